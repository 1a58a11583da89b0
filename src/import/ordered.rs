//! One file in the order of time: a value waits until nothing earlier can follow it.

use super::ImportError;
use super::entry::Entry;
use super::mapping::Mapping;
use super::problem::Problems;
use super::recording::{Recording, Source};
use super::survey::FileSurvey;
use holdtrue_engine::time::{Duration, Timestamp};
use std::cmp::{Ordering, Reverse};
use std::collections::BinaryHeap;

/// Most values that wait at once, about 100 bytes each.
pub(super) const HELD_MAX: usize = 1_000_000;

/// A file that is being read in the order of time.
pub(super) struct Ordered {
    source: Source,
    recording: Recording,
    /// Rows that are still to be read: a file may have grown since it was surveyed.
    rows: u64,
    disorder: Duration,
    disorder_line: u64,
    held: BinaryHeap<Reverse<Held>>,
    newest: Option<Timestamp>,
    /// The last that was handed out.
    passed: Option<Timestamp>,
    /// Values read so far, and how many there should be.
    read: u64,
    surveyed: u64,
    /// Most that may wait.
    most: usize,
    entries: Vec<Entry>,
}

/// A value that waits. Of one instant gates come first and indications last, then the mapping's
/// order counts, then the file's.
struct Held {
    entry: Entry,
    number: u64,
}

impl Ordered {
    pub(super) fn open(file: &FileSurvey, mapping: &Mapping) -> Result<Self, ImportError> {
        Ok(Self {
            source: file.source.clone(),
            recording: Recording::open(&file.source, mapping)?,
            rows: file.rows,
            disorder: file.disorder,
            disorder_line: file.disorder_line,
            held: BinaryHeap::new(),
            newest: None,
            passed: None,
            read: 0,
            surveyed: file.extent.count,
            most: HELD_MAX,
            entries: Vec::new(),
        })
    }

    /// The next value; `None` after the last.
    pub(super) fn next(&mut self, mapping: &Mapping) -> Result<Option<Entry>, ImportError> {
        while !self.first_is_due() {
            if self.rows == 0 {
                break;
            }
            self.read_row(mapping)?;
        }
        let Some(Reverse(Held { entry, .. })) = self.held.pop() else {
            return if self.read == self.surveyed {
                Ok(None)
            } else {
                Err(self.changed())
            };
        };
        if self.passed.is_some_and(|passed| entry.at < passed) {
            return Err(self.changed());
        }
        self.passed = Some(entry.at);
        Ok(Some(entry))
    }

    /// Whether nothing that is still to be read can come before the first that waits.
    fn first_is_due(&self) -> bool {
        match (self.held.peek(), self.newest) {
            (Some(Reverse(first)), Some(newest)) => first.entry.at < newest.minus(self.disorder),
            _ => false,
        }
    }

    fn read_row(&mut self, mapping: &Mapping) -> Result<(), ImportError> {
        // What can't be read was told when the file was surveyed.
        let mut problems = Problems::default();
        let mut entries = std::mem::take(&mut self.entries);
        let more = self
            .recording
            .advance(mapping, &mut entries, &mut problems)?;
        self.rows = if more { self.rows - 1 } else { 0 };
        for entry in entries.drain(..) {
            self.newest = self.newest.max(Some(entry.at));
            self.read += 1;
            let number = self.read;
            self.held.push(Reverse(Held { entry, number }));
        }
        self.entries = entries;
        if self.held.len() > self.most {
            return Err(ImportError::Disorder {
                path: self.source.path.clone(),
                line: self.disorder_line,
                seconds: self.disorder.seconds(),
            });
        }
        Ok(())
    }

    fn changed(&self) -> ImportError {
        ImportError::Changed {
            path: self.source.path.clone(),
        }
    }
}

impl Held {
    fn key(&self) -> ((Timestamp, u8, usize), u64) {
        (self.entry.order(), self.number)
    }
}

impl Ord for Held {
    fn cmp(&self, other: &Self) -> Ordering {
        self.key().cmp(&other.key())
    }
}

impl PartialOrd for Held {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl PartialEq for Held {
    fn eq(&self, other: &Self) -> bool {
        self.key() == other.key()
    }
}

impl Eq for Held {}

#[cfg(test)]
mod tests {
    use super::super::mapping::{Column, TimeColumn};
    use super::super::recording::Form;
    use super::super::survey::Survey;
    use super::*;
    use crate::payload::Target;
    use holdtrue_engine::setup::ChannelId;
    use holdtrue_text::time_form::TimeForm;
    use std::fmt::Write;
    use std::path::Path;

    fn mapping() -> Mapping {
        Mapping {
            times: vec![TimeColumn {
                name: "at".to_owned(),
                form: TimeForm::Epoch,
                ahead: None,
            }],
            columns: vec![Column {
                name: "v".to_owned(),
                target: Target::Indication(ChannelId(0)),
                status: None,
                only_where: None,
            }],
            ..Mapping::default()
        }
    }

    /// A file whose rows have these times in seconds, surveyed.
    fn survey(folder: &Path, times: &[i64]) -> Survey {
        let mut text = "at,v\n".to_owned();
        for (index, time) in times.iter().enumerate() {
            writeln!(text, "{time},{index}").unwrap();
        }
        let path = folder.join("a.csv");
        std::fs::write(&path, text).unwrap();
        let source = Source {
            path,
            form: Form::Csv,
        };
        Survey::of(&[source], &mapping(), &mut |_| {}).unwrap()
    }

    /// The times in the order in which they are handed out, and how many waited at most.
    fn read(file: &FileSurvey, most: usize) -> Result<(Vec<i64>, usize), ImportError> {
        let mut ordered = Ordered::open(file, &mapping())?;
        ordered.most = most;
        let (mut times, mut held) = (Vec::new(), 0);
        while let Some(entry) = ordered.next(&mapping())? {
            times.push(entry.at.0 / 1_000_000_000);
            held = held.max(ordered.held.len());
        }
        Ok((times, held))
    }

    #[test]
    fn values_wait_no_longer_than_the_disorder_needs() {
        let folder = tempfile::tempdir().unwrap();
        let straight: Vec<i64> = (0..1000).collect();
        let (told, held) = read(&survey(folder.path(), &straight).files[0], 1000).unwrap();
        assert_eq!(told, straight);
        assert!(held <= 2, "{held} waited for nothing");
        // Each pair of neighbours changed places: 1 s of disorder.
        let swapped: Vec<i64> = (0..1000).map(|time| time ^ 1).collect();
        let (told, held) = read(&survey(folder.path(), &swapped).files[0], 1000).unwrap();
        assert_eq!(told, straight);
        assert!(held <= 4, "{held} waited for 1 s");
    }

    #[test]
    fn too_much_disorder_is_refused_with_its_place() {
        let folder = tempfile::tempdir().unwrap();
        let reversed: Vec<i64> = (0..100).rev().collect();
        let survey = survey(folder.path(), &reversed);
        assert!(read(&survey.files[0], 100).is_ok());
        let Err(error @ ImportError::Disorder { .. }) = read(&survey.files[0], 99) else {
            panic!("100 values wait for the last");
        };
        let told = error.to_string();
        assert!(told.contains("a.csv:101: out of order by 99 s"), "{told}");
    }

    #[test]
    fn a_file_that_has_changed_since_it_was_surveyed_is_refused() {
        let folder = tempfile::tempdir().unwrap();
        let survey = survey(folder.path(), &[1, 2, 3]);
        let path = folder.path().join("a.csv");
        let changed = |text: &str| {
            std::fs::write(&path, text).unwrap();
            matches!(read(&survey.files[0], 9), Err(ImportError::Changed { .. }))
        };
        assert!(changed("at,v\n1,0\n2,1\n"), "shorter");
        assert!(changed("at,v\n3,0\n2,1\n1,2\n"), "in another order");
        // What was appended meanwhile is left for another time.
        assert!(!changed("at,v\n1,0\n2,1\n3,2\n4,3\n"));
    }
}
