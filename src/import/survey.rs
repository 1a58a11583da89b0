//! The first reading of all files: what can't be read, how much there is, and how far each file is
//! out of order.

use super::ImportError;
use super::entry::{Entry, What};
use super::mapping::Mapping;
use super::ordered::{HELD_MAX, Ordered};
use super::problem::Problems;
use super::recording::{Recording, Source};
use holdtrue_engine::time::{Duration, Timestamp};

/// What all files hold.
#[derive(Clone, Debug, Default)]
pub struct Survey {
    /// File by file, in the order of their first instants.
    pub files: Vec<FileSurvey>,
    /// Column by column, as in the mapping.
    pub columns: Vec<Extent>,
    /// What can't be read.
    pub problems: Problems,
    /// Columns that no file has.
    lacking: Vec<usize>,
}

/// What one file holds.
#[derive(Clone, Debug)]
pub struct FileSurvey {
    /// The file.
    pub source: Source,
    /// How many rows, lines or pieces of packs.
    pub(super) rows: u64,
    /// Values and states of gates, and their first and last instants.
    pub extent: Extent,
    /// How far a value comes behind a later one, at most …
    pub disorder: Duration,
    /// … and on which line that is.
    pub disorder_line: u64,
}

/// How many values, from when to when.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Extent {
    /// Values or states.
    pub count: u64,
    /// Of these, not to be used by their status.
    pub excluded: u64,
    /// The earliest.
    pub first: Option<Timestamp>,
    /// The latest.
    pub last: Option<Timestamp>,
}

impl Survey {
    /// Reads all files; `progress` is told each time how many more rows were read.
    ///
    /// # Errors
    /// When a file can't be read, does not fit the mapping, or is too far out of order.
    pub fn of(
        sources: &[Source],
        mapping: &Mapping,
        progress: &mut dyn FnMut(u64),
    ) -> Result<Self, ImportError> {
        let mut survey = Self {
            columns: vec![Extent::default(); mapping.columns.len()],
            ..Self::default()
        };
        let mut found = vec![false; mapping.columns.len()];
        for source in sources {
            survey.add(source, mapping, &mut found, progress)?;
        }
        survey.lacking = (0..found.len()).filter(|column| !found[*column]).collect();
        survey.files.sort_by_key(|file| file.extent.first);
        Ok(survey)
    }

    /// Refuses a mapping of what no file has.
    ///
    /// # Errors
    /// Names the columns.
    pub fn check(&self, mapping: &Mapping) -> Result<(), ImportError> {
        if self.lacking.is_empty() {
            return Ok(());
        }
        let lacking = self.lacking.iter();
        let names: Vec<&str> = lacking
            .map(|column| mapping.columns[*column].name.as_str())
            .collect();
        Err(ImportError::Misfit(format!(
            "none of the files has {}, which the mapping names",
            names.join(", ")
        )))
    }

    /// All values and states.
    #[must_use]
    pub fn extent(&self) -> Extent {
        let mut whole = Extent::default();
        for file in &self.files {
            whole.count += file.extent.count;
            whole.excluded += file.extent.excluded;
            whole.first = earliest(whole.first, file.extent.first);
            whole.last = whole.last.max(file.extent.last);
        }
        whole
    }

    fn add(
        &mut self,
        source: &Source,
        mapping: &Mapping,
        found: &mut [bool],
        progress: &mut dyn FnMut(u64),
    ) -> Result<(), ImportError> {
        let mut recording = Recording::open(source, mapping)?;
        let mut file = FileSurvey {
            source: source.clone(),
            rows: 0,
            extent: Extent::default(),
            disorder: Duration::ZERO,
            disorder_line: 0,
        };
        let mut entries = Vec::new();
        while recording.advance(mapping, &mut entries, &mut self.problems)? {
            file.rows += 1;
            progress(1);
            for entry in entries.drain(..) {
                file.take(&entry);
                self.columns[entry.column].take(&entry);
            }
        }
        for column in recording.found() {
            found[column] = true;
        }
        file.refuse_too_much_disorder(mapping)?;
        self.files.push(file);
        Ok(())
    }
}

impl FileSurvey {
    fn take(&mut self, entry: &Entry) {
        let behind = self.extent.last.map(|newest| newest.since(entry.at));
        if let Some(behind) = behind.filter(|behind| *behind > self.disorder) {
            self.disorder = behind;
            self.disorder_line = entry.line;
        }
        self.extent.take(entry);
    }

    /// Looks how much of the file would have to wait; reads it again only where it may be too much.
    fn refuse_too_much_disorder(&self, mapping: &Mapping) -> Result<(), ImportError> {
        if self.disorder == Duration::ZERO || self.extent.count <= HELD_MAX as u64 {
            return Ok(());
        }
        let mut ordered = Ordered::open(self, mapping)?;
        while ordered.next(mapping)?.is_some() {}
        Ok(())
    }
}

impl Extent {
    fn take(&mut self, entry: &Entry) {
        self.count += 1;
        if let What::Value { excluded: true, .. } = entry.what {
            self.excluded += 1;
        }
        self.first = earliest(self.first, Some(entry.at));
        self.last = self.last.max(Some(entry.at));
    }
}

/// The earlier of two, where there are two.
fn earliest(a: Option<Timestamp>, b: Option<Timestamp>) -> Option<Timestamp> {
    match (a, b) {
        (Some(a), Some(b)) => Some(a.min(b)),
        (one, other) => one.or(other),
    }
}
