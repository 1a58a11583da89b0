//! The record as its one writer has it: opened, and batches committed to it. What else it does is
//! in `turning` (a new file), `seals` (finished files) and `recall` (what it knows).

use super::archive::{self, Archive};
use super::batch::{Batch, Event, Place};
use super::chain::Head;
use super::disk::{Disk, Operation};
use super::lock::lock;
use super::opening::Opening;
use super::seals::Sealer;
use super::sources::SourceBook;
use super::turning::remove_files;
use super::{Day, DayName, RecordError, layout, recall, sealing};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use rusqlite::Connection;
use std::collections::{BTreeMap, BTreeSet};
use std::fs::File;
use std::path::{Path, PathBuf};

/// The file that is written to.
pub(super) struct Live {
    pub(super) name: DayName,
    pub(super) path: PathBuf,
    pub(super) connection: Connection,
    pub(super) opening: Opening,
}

/// An open record.
pub struct Record {
    pub(super) folder: PathBuf,
    /// `None`: the real one, and sealing has a thread of its own.
    pub(super) disk: Option<Box<dyn Disk>>,
    /// Holds the lock for as long as the record is open.
    _lock: File,
    pub(super) days: Vec<DayName>,
    pub(super) live: Option<Live>,
    pub(super) batch: Batch,
    pub(super) place: Place,
    /// Number of the newest retained document of each topic.
    pub(super) retained: BTreeMap<String, i64>,
    pub(super) subscriptions: BTreeSet<String>,
    pub(super) sealer: Sealer,
    /// Files to be removed once that is noted.
    pub(super) removing: Vec<DayName>,
}

impl Record {
    /// Opens the record in `folder`, which is made if it does not exist, and locks it against a
    /// second daemon.
    ///
    /// # Errors
    /// When the folder can't be used, another daemon uses it, or its newest file is not one that
    /// this program reads.
    pub fn open(folder: &Path) -> Result<Self, RecordError> {
        Self::open_over(folder, None)
    }

    /// Opens the record over a disk that is watched or simulated; everything then happens in the
    /// calling thread.
    ///
    /// # Errors
    /// As [`Record::open`].
    pub fn open_on(folder: &Path, disk: Box<dyn Disk>) -> Result<Self, RecordError> {
        Self::open_over(folder, Some(disk))
    }

    fn open_over(folder: &Path, disk: Option<Box<dyn Disk>>) -> Result<Self, RecordError> {
        let lock = lock(folder)?;
        let mut days = archive::list(folder)?;
        if let Some(newest) = days.last().copied()
            && discard_unmade(folder, newest)?
        {
            days.pop();
        }
        let start = Place {
            head: Head::default(),
            last_input: 0,
            last_output: 0,
            last_document: 0,
        };
        // The first file's opening will be the first link, before what is noted meanwhile.
        let mut after_opening = start;
        after_opening.head.batch += 1;
        let mut record = Self {
            folder: folder.to_path_buf(),
            disk,
            _lock: lock,
            live: None,
            batch: Batch::new(after_opening, SourceBook::default()),
            place: start,
            retained: BTreeMap::new(),
            subscriptions: BTreeSet::new(),
            sealer: Sealer::default(),
            removing: Vec::new(),
            days,
        };
        if let Some(newest) = record.days.last().copied() {
            record.go_on_in(newest)?;
        }
        Ok(record)
    }

    /// Takes up where the newest file ends.
    fn go_on_in(&mut self, newest: DayName) -> Result<(), RecordError> {
        let path = self.path(newest);
        let sealed = sealing::told_checksum(&self.folder, newest)?.is_some();
        let connection = if sealed {
            layout::open_to_read(&path)?
        } else {
            layout::open_to_write(&path)?
        };
        let day = Day::over(&path, connection)?;
        self.place = day.place()?;
        self.batch = Batch::new(self.place, day.book()?);
        self.retained = recall::retained_numbers(&day).map_err(|error| error.of(&path))?;
        self.subscriptions = recall::subscriptions(&day)?;
        self.find_unsealed(&day)?;
        if !sealed {
            let opening = day.opening().clone();
            self.live = Some(Live {
                name: newest,
                path,
                connection: day.connection,
                opening,
            });
        }
        Ok(())
    }

    pub(super) fn path(&self, name: DayName) -> PathBuf {
        self.folder.join(name.to_string())
    }

    /// The folder.
    #[must_use]
    pub fn folder(&self) -> &Path {
        &self.folder
    }

    /// Everything in the folder, to read from.
    ///
    /// # Errors
    /// When the folder can't be read.
    pub fn archive(&self) -> Result<Archive, RecordError> {
        Archive::open(&self.folder)
    }

    /// Position of the newest committed input; inputs count from 1.
    #[must_use]
    pub fn last_input(&self) -> i64 {
        self.place.last_input
    }

    /// The newest link of the chain.
    #[must_use]
    pub fn head(&self) -> Head {
        self.place.head
    }

    /// The file that is written to; `None` before the first turn and after [`Record::finish`].
    #[must_use]
    pub fn live(&self) -> Option<DayName> {
        self.live.as_ref().map(|live| live.name)
    }

    /// Inputs in the file that is written to.
    #[must_use]
    pub fn live_inputs(&self) -> i64 {
        let live = self.live.as_ref();
        live.map_or(0, |live| {
            self.place.last_input + 1 - live.opening.first_input
        })
    }

    /// What the next commit will write.
    pub fn batch(&mut self) -> &mut Batch {
        &mut self.batch
    }

    /// Whether a commit has something to write.
    #[must_use]
    pub fn has_news(&self) -> bool {
        !self.batch.is_empty()
    }

    /// Inputs since the last commit.
    #[must_use]
    pub fn uncommitted(&self) -> usize {
        self.batch.inputs()
    }

    /// Notes that a program goes on with the record from here.
    pub fn note_start(&mut self) {
        let program = env!("CARGO_PKG_VERSION").to_owned();
        self.batch.note(Event::Start(program));
    }

    /// Whether the record has no file yet.
    #[must_use]
    pub fn is_new(&self) -> bool {
        self.days.is_empty()
    }

    /// The configuration in force now counts for the sources of what comes; for a record whose
    /// state was restored.
    pub fn adopt(&mut self, setup: &Setup) {
        self.batch.book_mut().adopt(setup);
    }

    /// Writes the batch in one transaction; when this returns without error it is on the disk.
    ///
    /// # Errors
    /// When the file can't be written; then nothing of the batch is in the record, and the same
    /// batch is tried again by the next call.
    ///
    /// # Panics
    /// Before the first [`Record::turn`]: a fault of the caller.
    pub fn commit(&mut self, now: Timestamp) -> Result<(), RecordError> {
        self.look_after_seals()?;
        if self.batch.is_empty() {
            return Ok(());
        }
        let after = self.batch.place_after(now);
        let path = self.live.as_ref().expect("a file is open").path.clone();
        self.before(Operation::Commit, &path)?;
        let live = self.live.as_mut().expect("a file is open");
        let written = (|| {
            let transaction = live.connection.transaction()?;
            self.batch.write(&transaction, &after, now)?;
            transaction.commit()?;
            Ok(())
        })();
        written.map_err(|error: RecordError| error.of(&path))?;
        self.after(Operation::Commit, &path)?;
        for (number, document) in self.batch.documents() {
            if !document.retain {
                continue;
            }
            if document.payload.is_empty() {
                self.retained.remove(&document.topic);
            } else {
                self.retained.insert(document.topic.clone(), number);
            }
        }
        self.place = after;
        self.batch.clear(after);
        self.remove_noted();
        Ok(())
    }

    pub(super) fn before(&mut self, operation: Operation, path: &Path) -> Result<(), RecordError> {
        match &mut self.disk {
            Some(disk) => disk.before(operation, path).map_err(io(path)),
            None => Ok(()),
        }
    }

    pub(super) fn after(&mut self, operation: Operation, path: &Path) -> Result<(), RecordError> {
        match &mut self.disk {
            Some(disk) => disk.after(operation, path).map_err(io(path)),
            None => Ok(()),
        }
    }
}

pub(super) fn io(path: &Path) -> impl FnOnce(std::io::Error) -> RecordError + use<> {
    let folder = path.to_path_buf();
    move |source| RecordError::Folder { folder, source }
}

/// Removes a file to which nothing was ever committed: its making was broken off.
fn discard_unmade(folder: &Path, name: DayName) -> Result<bool, RecordError> {
    let path = folder.join(name.to_string());
    let look = || layout::is_empty(&Connection::open(&path)?);
    let unmade = look().map_err(|error: RecordError| error.of(&path))?;
    if unmade {
        remove_files(&path);
    }
    Ok(unmade)
}
