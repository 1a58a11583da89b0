//! The files of a record folder, read without the right to write: for replay, verification, export
//! and the search for old readings.

use super::row::ReadingRow;
use super::search::Search;
use super::{Day, DayName, RecordError, Told, layout};
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use std::cell::RefCell;
use std::path::{Path, PathBuf};

/// A record folder.
pub struct Archive {
    folder: PathBuf,
    days: Vec<DayName>,
    /// The file that a row was last looked up in; the next is often in the same.
    last: RefCell<Option<Day>>,
}

impl Archive {
    /// Lists the record files in `folder`. A newest one whose making was broken off holds nothing
    /// and is left out.
    ///
    /// # Errors
    /// When the folder can't be read.
    pub fn open(folder: &Path) -> Result<Self, RecordError> {
        let mut days = list(folder)?;
        if let Some(newest) = days.last()
            && layout::is_unmade(&folder.join(newest.to_string()))
        {
            days.pop();
        }
        Ok(Self {
            folder: folder.to_path_buf(),
            days,
            last: RefCell::new(None),
        })
    }

    /// Names of the files, oldest first.
    #[must_use]
    pub fn days(&self) -> &[DayName] {
        &self.days
    }

    /// The folder.
    #[must_use]
    pub fn folder(&self) -> &Path {
        &self.folder
    }

    /// Where a file is.
    #[must_use]
    pub fn path(&self, name: DayName) -> PathBuf {
        self.folder.join(name.to_string())
    }

    /// Opens a file.
    ///
    /// # Errors
    /// When it can't be read.
    pub fn day(&self, name: DayName) -> Result<Day, RecordError> {
        Day::open(&self.path(name))
    }

    /// Readings of `sources` of the configuration `setup`, with phenomenon times in the half-open
    /// interval `times`, in `until` and the files before it, as far as they had come by the input
    /// at `position`; at most `limit`, in the order in which they came.
    ///
    /// # Errors
    /// When a file can't be read.
    pub fn readings(
        &self,
        until: &Day,
        setup: &Setup,
        sources: &[Source],
        times: (Timestamp, Timestamp),
        position: i64,
        limit: usize,
    ) -> Result<Vec<Reading>, RecordError> {
        let mut book = until.book()?;
        book.adopt(setup);
        let search = Search {
            sources: sources.iter().map(|it| (book.of(*it), *it)).collect(),
            from: times.0,
            to: times.1,
            last: position,
            limit,
        };
        let mut found = Vec::new();
        for name in self.days.iter().filter(|name| **name <= until.name()) {
            if search.concerns(name.day_end()) {
                search.search(&self.day(*name)?, &mut found)?;
            }
        }
        Ok(found.into_iter().map(|(_, reading)| reading).collect())
    }

    /// Hands every input of all files to `take`, oldest first, each with its recorded outputs.
    ///
    /// # Errors
    /// When a file can't be read, a row is missing or unreadable, or `take` refuses.
    pub fn walk<E: From<RecordError>>(
        &self,
        mut take: impl FnMut(Told<'_>) -> Result<(), E>,
    ) -> Result<(), E> {
        for name in &self.days {
            let day = self.day(*name)?;
            day.walk(self, day.opening().first_input - 1, i64::MAX, &mut take)?;
        }
        Ok(())
    }

    /// The reading at a position in the files before `before`.
    pub(super) fn reading_row(
        &self,
        position: i64,
        before: DayName,
    ) -> Result<ReadingRow, RecordError> {
        if let Some(day) = &*self.last.borrow()
            && let Some(row) = day.reading_row(position)?
        {
            return Ok(row);
        }
        for name in self.days.iter().rev().filter(|name| **name < before) {
            let day = self.day(*name)?;
            if day.opening().first_input > position {
                continue;
            }
            let row = day.reading_row(position)?;
            *self.last.borrow_mut() = Some(day);
            if let Some(row) = row {
                return Ok(row);
            }
            break;
        }
        Err(RecordError::Damaged {
            path: self.folder.clone(),
            what: format!("reading {position}, which a later input refers to, is not there"),
        })
    }
}

/// Names of all record files in `folder`, oldest first.
///
/// # Errors
/// When the folder can't be read.
pub(super) fn list(folder: &Path) -> Result<Vec<DayName>, RecordError> {
    let failed = |source| RecordError::Folder {
        folder: folder.to_path_buf(),
        source,
    };
    let mut days = Vec::new();
    for entry in std::fs::read_dir(folder).map_err(failed)? {
        let entry = entry.map_err(failed)?;
        if let Some(name) = DayName::of(&entry.path())
            && entry.file_type().map_err(failed)?.is_file()
        {
            days.push(name);
        }
    }
    days.sort_unstable();
    Ok(days)
}
