//! The record as its one writer has it: batches are committed, days turn, finished files are
//! sealed.

use super::archive::Archive;
use super::batch::{Batch, Event, Numbered, Place};
use super::chain::Head;
use super::disk::{Disk, Operation, RealDisk};
use super::lock::lock;
use super::opening::{self, Contents, Opening};
use super::row::{RetainedRow, WaitingRow};
use super::sealing;
use super::search::Search;
use super::sources::SourceBook;
use super::{
    ARITHMETIC_REVISION, Day, DayName, Digest, RecordError, STATE_REVISION, State, layout,
};
use crate::document::Document;
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use rusqlite::Connection;
use std::collections::{BTreeMap, BTreeSet, VecDeque};
use std::fs::File;
use std::path::{Path, PathBuf};
use std::thread::JoinHandle;

/// A file that is larger than this is not sealed at a clean stop, which would take long; the next
/// start goes on in it.
const SEAL_AT_STOP_MAX: u64 = 1 << 30;

/// What the record needs to begin a new file.
pub struct Turn<'a> {
    /// Now.
    pub now: Timestamp,
    /// The instant whose day the file is of; in a recording not now.
    pub day: Timestamp,
    /// The configuration in force.
    pub setup: &'a Setup,
    /// The whole state of the engine.
    pub state: State,
    /// The documents that wait for the broker.
    pub waiting: Vec<Numbered>,
}

/// The file that is written to.
struct Live {
    name: DayName,
    path: PathBuf,
    connection: Connection,
    opening: Opening,
}

/// Sealing goes on beside the writing: a large file takes its time.
#[derive(Default)]
struct Sealer {
    due: VecDeque<DayName>,
    /// At work on this file.
    worker: Option<(DayName, JoinHandle<Result<Digest, RecordError>>)>,
}

/// An open record.
pub struct Record {
    folder: PathBuf,
    /// `None`: the real one, and sealing has a thread of its own.
    disk: Option<Box<dyn Disk>>,
    /// Holds the lock for as long as the record is open.
    _lock: File,
    days: Vec<DayName>,
    live: Option<Live>,
    batch: Batch,
    place: Place,
    /// Number of the newest retained document of each topic.
    retained: BTreeMap<String, i64>,
    subscriptions: BTreeSet<String>,
    sealer: Sealer,
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
        let mut days = Archive::open(folder)?.days().to_vec();
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
        let mut record = Self {
            folder: folder.to_path_buf(),
            disk,
            _lock: lock,
            live: None,
            batch: Batch::new(start, SourceBook::default()),
            place: start,
            retained: BTreeMap::new(),
            subscriptions: BTreeSet::new(),
            sealer: Sealer::default(),
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
        self.retained = retained_numbers(&day).map_err(|error| error.of(&path))?;
        self.subscriptions = subscriptions(&day)?;
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

    /// Files before the newest whose sealing was broken off, or is not noted in it.
    fn find_unsealed(&mut self, newest: &Day) -> Result<(), RecordError> {
        for name in self.days.iter().copied().filter(|it| *it < newest.name()) {
            let is_preceding = newest.opening().preceding == Some(name);
            let due = match sealing::told_checksum(&self.folder, name)? {
                None => true,
                Some(_) => is_preceding && !is_noted(newest, name)?,
            };
            if due {
                self.sealer.due.push_back(name);
            }
        }
        Ok(())
    }

    fn path(&self, name: DayName) -> PathBuf {
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

    /// Whether what is written now may stand in the file that is written to: its day is not over
    /// and this program opened it.
    #[must_use]
    pub fn is_turn_due(&self, now: Timestamp) -> bool {
        self.live.as_ref().is_none_or(|live| {
            now >= live.name.day_end()
                || live.opening.program != env!("CARGO_PKG_VERSION")
                || live.opening.arithmetic != ARITHMETIC_REVISION
                || live.opening.state != STATE_REVISION
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

    /// Begins a new file; the one before is sealed from now on. Everything must be committed.
    ///
    /// # Errors
    /// When the file can't be made; the record is then as it was.
    ///
    /// # Panics
    /// When something is uncommitted: a fault of the caller.
    pub fn turn(&mut self, turn: Turn<'_>) -> Result<(), RecordError> {
        assert!(self.batch.is_empty(), "a day turns between two batches");
        let preceding = self.days.last().copied();
        let name = preceding.map_or_else(
            || DayName::first(turn.day),
            |preceding| preceding.next(turn.day),
        );
        let retained = self.retained_rows()?;
        let mut events = Vec::new();
        if !self.subscriptions.is_empty() {
            events.push(Event::Subscriptions(self.subscriptions_text()));
        }
        let opening = Opening {
            opened: turn.now,
            program: env!("CARGO_PKG_VERSION").to_owned(),
            arithmetic: ARITHMETIC_REVISION,
            state: STATE_REVISION,
            setup: serde_json::to_string(turn.setup).map_err(|source| RecordError::Unreadable {
                path: self.path(name),
                position: self.place.last_input,
                source,
            })?,
            preceding,
            chain: self.place.head.digest,
            first_batch: self.place.head.batch + 1,
            first_input: self.place.last_input + 1,
            first_output: self.place.last_output + 1,
            first_document: self.place.last_document + 1,
        };
        let path = self.path(name);
        self.before(Operation::Open, &path)?;
        let waiting = turn.waiting.into_iter().map(|it| WaitingRow {
            number: it.number,
            document: it.document,
        });
        let contents = Contents {
            opening: opening.clone(),
            book: self.batch.book(),
            events,
            state: turn.state,
            waiting: waiting.collect(),
            retained,
        };
        let (connection, place) = match opening::create(&path, contents) {
            Ok(made) => made,
            Err(error) => {
                // Without a table it counts as not made, but it must not stand in the way.
                remove_files(&path);
                return Err(error.of(&path));
            }
        };
        self.days.push(name);
        let before = self.live.replace(Live {
            name,
            path: path.clone(),
            connection,
            opening,
        });
        if let Some(before) = before {
            drop(before.connection);
            self.sealer.due.push_back(before.name);
        } else if let Some(preceding) = preceding
            && !self.sealer.due.contains(&preceding)
        {
            // It was sealed at a clean stop; that is noted in this file.
            self.sealer.due.push_back(preceding);
        }
        self.place = place;
        self.batch.clear(place);
        self.after(Operation::Open, &path)
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
        let live = self.live.as_mut().expect("a file is open");
        let path = live.path.clone();
        if let Some(disk) = &mut self.disk {
            disk.before(Operation::Commit, &path).map_err(io(&path))?;
        }
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
        Ok(())
    }

    fn before(&mut self, operation: Operation, path: &Path) -> Result<(), RecordError> {
        match &mut self.disk {
            Some(disk) => disk.before(operation, path).map_err(io(path)),
            None => Ok(()),
        }
    }

    fn after(&mut self, operation: Operation, path: &Path) -> Result<(), RecordError> {
        match &mut self.disk {
            Some(disk) => disk.after(operation, path).map_err(io(path)),
            None => Ok(()),
        }
    }

    /// Notes seals that are finished, and begins the next.
    fn look_after_seals(&mut self) -> Result<(), RecordError> {
        if self.disk.is_some() {
            return self.seal_all();
        }
        if let Some((_, worker)) = &self.sealer.worker
            && !worker.is_finished()
        {
            return Ok(());
        }
        self.join_sealer();
        if let Some(name) = self.sealer.due.front().copied() {
            let folder = self.folder.clone();
            let worker = std::thread::Builder::new()
                .name("seal".to_owned())
                .spawn(move || sealing::seal(&folder, name, &mut RealDisk));
            if let Ok(worker) = worker {
                self.sealer.due.pop_front();
                self.sealer.worker = Some((name, worker));
            }
        }
        Ok(())
    }

    /// Waits for the worker, if there is one.
    fn join_sealer(&mut self) {
        let Some((name, worker)) = self.sealer.worker.take() else {
            return;
        };
        match worker.join() {
            Ok(Ok(digest)) => self.batch.note(Event::Sealed(name.to_string(), digest)),
            Ok(Err(error)) => {
                tracing::warn!(%error, file = %name, "a finished file can't be sealed; later again");
                self.sealer.due.push_back(name);
            }
            Err(panic) => std::panic::resume_unwind(panic),
        }
    }

    /// Seals every finished file now.
    fn seal_all(&mut self) -> Result<(), RecordError> {
        self.join_sealer();
        while let Some(name) = self.sealer.due.front().copied() {
            let digest = match &mut self.disk {
                Some(disk) => sealing::seal(&self.folder, name, disk.as_mut()),
                None => sealing::seal(&self.folder, name, &mut RealDisk),
            }?;
            self.sealer.due.pop_front();
            self.batch.note(Event::Sealed(name.to_string(), digest));
        }
        Ok(())
    }

    /// Ends the writing: commits, and seals the newest file as well unless it is very large.
    ///
    /// # Errors
    /// When the disk refuses; what was committed is there all the same.
    pub fn finish(&mut self, now: Timestamp) -> Result<(), RecordError> {
        self.seal_all()?;
        self.commit(now)?;
        let Some(live) = self.live.take() else {
            return Ok(());
        };
        let size = std::fs::metadata(&live.path).map_or(0, |it| it.len());
        drop(live.connection);
        if size > SEAL_AT_STOP_MAX {
            return Ok(());
        }
        match &mut self.disk {
            Some(disk) => sealing::seal(&self.folder, live.name, disk.as_mut()),
            None => sealing::seal(&self.folder, live.name, &mut RealDisk),
        }?;
        Ok(())
    }

    /// The documents that the broker has not acknowledged, in the order in which they were issued.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn outbox(&self) -> Result<Vec<Numbered>, RecordError> {
        self.with_newest(|day| {
            let mut statement = day.prepare(
                "SELECT number, retain, expires, topic, correlation, payload
                 FROM waiting_at_opening WHERE number NOT IN (SELECT number FROM settled)
                 UNION ALL SELECT number, retain, expires, topic, correlation, payload
                 FROM documents WHERE number NOT IN (SELECT number FROM settled)
                 ORDER BY number",
            )?;
            let rows = statement.query_map([], |row| {
                Ok(Numbered {
                    number: row.get(0)?,
                    document: super::row::document_of(row)?,
                })
            })?;
            rows.collect()
        })
        .map(Option::unwrap_or_default)
    }

    /// Number of the newest document.
    #[must_use]
    pub fn last_document(&self) -> i64 {
        self.place.last_document
    }

    /// The retained documents as they should stand at the broker, in order of their topics.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn standing(&self) -> Result<Vec<Document>, RecordError> {
        let rows = self.retained_rows()?;
        Ok(rows
            .into_iter()
            .map(|row| Document {
                topic: row.topic,
                payload: row.payload,
                retain: true,
                expires: row.expires,
                correlation: None,
            })
            .collect())
    }

    fn retained_rows(&self) -> Result<Vec<RetainedRow>, RecordError> {
        let rows = self.with_newest(|day| {
            let mut own =
                day.prepare("SELECT expires, payload FROM documents WHERE number = ?1")?;
            let mut earlier =
                day.prepare("SELECT expires, payload FROM retained_at_opening WHERE topic = ?1")?;
            let mut rows = Vec::with_capacity(self.retained.len());
            for (topic, number) in &self.retained {
                let read = |row: &rusqlite::Row<'_>| {
                    Ok(RetainedRow {
                        number: *number,
                        topic: topic.clone(),
                        expires: row.get::<_, Option<i64>>(0)?.map(Timestamp),
                        payload: row.get(1)?,
                    })
                };
                let row = match own.query_row([number], read) {
                    Err(rusqlite::Error::QueryReturnedNoRows) => {
                        earlier.query_row([topic], read)?
                    }
                    other => other?,
                };
                rows.push(row);
            }
            Ok(rows)
        });
        rows.map(Option::unwrap_or_default)
    }

    /// Reads from the newest file; `None` if there is none.
    fn with_newest<T>(
        &self,
        read: impl FnOnce(&Connection) -> rusqlite::Result<T>,
    ) -> Result<Option<T>, RecordError> {
        let Some(newest) = self.days.last().copied() else {
            return Ok(None);
        };
        let path = self.path(newest);
        let done = match &self.live {
            Some(live) => read(&live.connection),
            None => read(&layout::open_to_read(&path)?),
        };
        done.map(Some)
            .map_err(|error| RecordError::from(error).of(&path))
    }

    /// The topic filters that the broker last confirmed for this daemon's session.
    #[must_use]
    pub fn subscriptions(&self) -> &BTreeSet<String> {
        &self.subscriptions
    }

    /// Replaces the confirmed topic filters, with the next commit.
    pub fn set_subscriptions(&mut self, filters: BTreeSet<String>) {
        self.subscriptions = filters;
        let text = self.subscriptions_text();
        self.batch.note(Event::Subscriptions(text));
    }

    fn subscriptions_text(&self) -> String {
        serde_json::json!(self.subscriptions).to_string()
    }

    /// Committed readings of any of `sources` with `from` ≤ phenomenon time < `to`, with their
    /// positions, in the order in which they were taken; at most `limit`.
    ///
    /// # Errors
    /// When a file can't be read.
    pub fn readings(
        &mut self,
        sources: &[Source],
        from: Timestamp,
        to: Timestamp,
        limit: usize,
    ) -> Result<Vec<(i64, Reading)>, RecordError> {
        let search = Search {
            sources,
            from,
            to,
            limit,
        };
        let mut found = Vec::new();
        for name in self.days.clone() {
            if search.concerns(name.day_end()) {
                let day = Day::open(&self.path(name))?;
                search.search(&day, self.batch.book_mut(), &mut found)?;
            }
        }
        Ok(found)
    }
}

fn io(path: &Path) -> impl FnOnce(std::io::Error) -> RecordError + use<> {
    let folder = path.to_path_buf();
    move |source| RecordError::Folder { folder, source }
}

/// Removes a file to which nothing was ever committed: its making was broken off.
fn discard_unmade(folder: &Path, name: DayName) -> Result<bool, RecordError> {
    let path = folder.join(name.to_string());
    let connection = Connection::open(&path)?;
    let unmade = layout::is_empty(&connection).map_err(|error| error.of(&path))?;
    drop(connection);
    if unmade {
        remove_files(&path);
    }
    Ok(unmade)
}

/// Removes a database with what SQLite keeps beside it; what can't be removed is found again by
/// the next start.
fn remove_files(path: &Path) {
    for suffix in ["", "-wal", "-shm", "-journal"] {
        let mut name = path.as_os_str().to_owned();
        name.push(suffix);
        let _ = std::fs::remove_file(name);
    }
}

/// Number of the newest retained document of each topic.
fn retained_numbers(day: &Day) -> Result<BTreeMap<String, i64>, RecordError> {
    let mut retained = BTreeMap::new();
    let mut statement = day
        .connection
        .prepare("SELECT topic, number FROM retained_at_opening")?;
    let mut rows = statement.query([])?;
    while let Some(row) = rows.next()? {
        retained.insert(row.get(0)?, row.get(1)?);
    }
    let mut statement = day.connection.prepare(
        "SELECT topic, number, length(payload) FROM documents WHERE retain ORDER BY number",
    )?;
    let mut rows = statement.query([])?;
    while let Some(row) = rows.next()? {
        let topic: String = row.get(0)?;
        if row.get::<_, i64>(2)? == 0 {
            retained.remove(&topic);
        } else {
            retained.insert(topic, row.get(1)?);
        }
    }
    Ok(retained)
}

/// The newest note of confirmed filters.
fn subscriptions(day: &Day) -> Result<BTreeSet<String>, RecordError> {
    use rusqlite::OptionalExtension;
    let text: Option<String> = day
        .connection
        .query_row(
            "SELECT body FROM events WHERE kind = 'subscriptions' ORDER BY rowid DESC LIMIT 1",
            [],
            |row| row.get(0),
        )
        .optional()
        .map_err(|error| RecordError::from(error).of(day.path()))?;
    let Some(text) = text else {
        return Ok(BTreeSet::new());
    };
    serde_json::from_str(&text)
        .map_err(|error| day.damaged(format!("the list of subscriptions can't be read ({error})")))
}

/// Whether a file's checksum is noted in this one.
fn is_noted(day: &Day, sealed: DayName) -> Result<bool, RecordError> {
    day.connection
        .query_row(
            "SELECT count(*) > 0 FROM events WHERE kind = 'sealed' AND body LIKE ?1",
            [format!("%  {sealed}")],
            |row| row.get(0),
        )
        .map_err(|error| RecordError::from(error).of(day.path()))
}
