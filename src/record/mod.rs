//! The append-only record: what the engine was told, what it said, and which documents the broker
//! still has to get.
//!
//! One SQLite file, written by one daemon at a time. A [`Batch`] is committed whole or not at all;
//! nothing is published or acknowledged before its batch is committed. Reading in order of
//! reference: [`Batch`], [`Record::commit`], [`Record::replay`].

mod batch;
mod body;
mod layout;
mod replay;

pub use batch::{Batch, Numbered};
pub use body::output_text;
pub use layout::FORMAT_VERSION;
pub use replay::Replayed;

use crate::document::Document;
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::time::Timestamp;
use rusqlite::{Connection, OptionalExtension, params};
use std::collections::BTreeSet;
use std::fs::{File, TryLockError};
use std::io::Write;
use std::path::{Path, PathBuf};

/// Name of the record file inside its folder.
const FILE_NAME: &str = "holdtrue.sqlite";
/// Name of the file whose lock says that a daemon uses the folder.
const LOCK_NAME: &str = "holdtrue.lock";

/// See [`Record::readings`].
const READINGS: &str = "
SELECT position, body FROM inputs WHERE kind = 'reading' AND phenomenon >= ?1
    AND phenomenon < ?2 AND source IN (SELECT value FROM json_each(?3))
    AND position > (SELECT coalesce(max(position), 0) FROM inputs WHERE kind = 'setup')
    ORDER BY position LIMIT ?4";

/// What can be wrong with a record.
#[derive(Debug, thiserror::Error)]
pub enum RecordError {
    /// The folder or a file in it can't be made, opened or locked.
    #[error("record folder {}: {source}", folder.display())]
    Folder {
        /// Which folder.
        folder: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// Another process holds the record.
    #[error(
        "record folder {} is in use by another holdtrue (process {holder}); stop that one, or give \
         this one a [record] folder of its own",
        folder.display()
    )]
    InUse {
        /// Which folder.
        folder: PathBuf,
        /// What the lock file says about the holder.
        holder: String,
    },
    /// The file is an SQLite file of something else.
    #[error("{} is not a record of holdtrue; give [record] folder another place", path.display())]
    Foreign {
        /// Which file.
        path: PathBuf,
    },
    /// The file was written by a later program.
    #[error(
        "{} has record format {found}, this program knows up to {known}; start the holdtrue that \
         wrote it, or a later one",
        path.display()
    )]
    NewerFormat {
        /// Which file.
        path: PathBuf,
        /// Its format.
        found: i32,
        /// The highest format that this program reads.
        known: i32,
    },
    /// SQLite refused.
    #[error("record: {0}")]
    Sqlite(#[from] rusqlite::Error),
    /// A row can't be turned into an input.
    #[error("record: input {position} can't be read: {source}")]
    Unreadable {
        /// Its position.
        position: i64,
        /// What is wrong with the text.
        source: serde_json::Error,
    },
    /// A row is missing.
    #[error("record: input {expected} is missing (the next one is {found}); the file is damaged")]
    Missing {
        /// The position that should have come.
        expected: i64,
        /// The position that came.
        found: i64,
    },
}

/// An open record.
pub struct Record {
    connection: Connection,
    /// Holds the lock for as long as the record is open.
    _lock: File,
    next_input: i64,
    next_output: i64,
}

impl Record {
    /// Opens the record in `folder`, which is made if it does not exist, and locks it against a
    /// second daemon.
    ///
    /// # Errors
    /// When the folder can't be used, another daemon uses it, or the file is not a record that
    /// this program reads.
    pub fn open(folder: &Path) -> Result<Self, RecordError> {
        let lock = lock(folder)?;
        let connection = layout::open_file(&folder.join(FILE_NAME))?;
        let next_input = connection.query_row(
            "SELECT coalesce(max(position), 0) + 1 FROM inputs",
            [],
            |row| row.get(0),
        )?;
        let next_output = connection.query_row(
            "SELECT coalesce(max(position), 0) + 1 FROM outputs",
            [],
            |row| row.get(0),
        )?;
        Ok(Self {
            connection,
            _lock: lock,
            next_input,
            next_output,
        })
    }

    /// Position that the next committed input will get; inputs count from 1.
    #[must_use]
    pub fn next_input(&self) -> i64 {
        self.next_input
    }

    /// Notes that a daemon goes on with this record from here.
    ///
    /// # Errors
    /// When the file can't be written.
    pub fn begin_session(&mut self, started: Timestamp, program: &str) -> Result<(), RecordError> {
        self.connection.execute(
            "INSERT INTO sessions (first_input, started, program) VALUES (?1, ?2, ?3)",
            params![self.next_input, started.0, program],
        )?;
        Ok(())
    }

    /// Version of the program that wrote the input at `position`, if the record says.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn program_at(&self, position: i64) -> Result<Option<String>, RecordError> {
        Ok(self
            .connection
            .query_row(
                "SELECT program FROM sessions WHERE first_input <= ?1 ORDER BY rowid DESC LIMIT 1",
                [position],
                |row| row.get(0),
            )
            .optional()?)
    }

    /// An empty batch that continues the record.
    #[must_use]
    pub fn batch(&self) -> Batch {
        Batch::new(self.next_input, self.next_output)
    }

    /// Writes a batch in one transaction; when this returns without error it is on the disk.
    ///
    /// # Errors
    /// When the file can't be written; then nothing of the batch is in the record and the same
    /// batch can be tried again.
    pub fn commit(&mut self, batch: &Batch) -> Result<(), RecordError> {
        let transaction = self.connection.transaction()?;
        batch.write(&transaction)?;
        transaction.commit()?;
        self.next_input = batch.next_input();
        self.next_output = batch.next_output();
        Ok(())
    }

    /// The documents that the broker has not acknowledged, in the order in which they were issued.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn outbox(&self) -> Result<Vec<Numbered>, RecordError> {
        let mut statement = self.connection.prepare(
            "SELECT number, topic, payload, retain, expires, correlation FROM outbox
             ORDER BY number",
        )?;
        let rows = statement.query_map([], |row| {
            Ok(Numbered {
                number: row.get(0)?,
                document: Document {
                    topic: row.get(1)?,
                    payload: row.get(2)?,
                    retain: row.get(3)?,
                    expires: row.get::<_, Option<i64>>(4)?.map(Timestamp),
                    correlation: row.get(5)?,
                },
            })
        })?;
        Ok(rows.collect::<Result<_, _>>()?)
    }

    /// The retained documents as they should stand at the broker, in order of their topics.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn standing(&self) -> Result<Vec<Document>, RecordError> {
        let mut statement = self
            .connection
            .prepare("SELECT topic, payload, expires FROM standing ORDER BY topic")?;
        let rows = statement.query_map([], |row| {
            Ok(Document {
                topic: row.get(0)?,
                payload: row.get(1)?,
                retain: true,
                expires: row.get::<_, Option<i64>>(2)?.map(Timestamp),
                correlation: None,
            })
        })?;
        Ok(rows.collect::<Result<_, _>>()?)
    }

    /// The topic filters that the broker last confirmed for this daemon's session.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn subscriptions(&self) -> Result<BTreeSet<String>, RecordError> {
        let mut statement = self
            .connection
            .prepare("SELECT filter FROM subscriptions")?;
        let rows = statement.query_map([], |row| row.get(0))?;
        Ok(rows.collect::<Result<_, _>>()?)
    }

    /// Replaces the confirmed topic filters.
    ///
    /// # Errors
    /// When the file can't be written; then the old ones stand.
    pub fn set_subscriptions(&mut self, filters: &BTreeSet<String>) -> Result<(), RecordError> {
        let transaction = self.connection.transaction()?;
        transaction.execute("DELETE FROM subscriptions", [])?;
        for filter in filters {
            transaction.execute("INSERT INTO subscriptions (filter) VALUES (?1)", [filter])?;
        }
        Ok(transaction.commit()?)
    }

    /// Recorded readings of any of `sources` with `from` ≤ phenomenon time < `to`, since the
    /// configuration in force, with their positions, in the order in which they were taken; at
    /// most `limit`.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn readings(
        &self,
        sources: &[Source],
        from: Timestamp,
        to: Timestamp,
        limit: usize,
    ) -> Result<Vec<(i64, Reading)>, RecordError> {
        // Positions in a setup may name another channel after a change of configuration, hence the
        // last setup only.
        let mut statement = self.connection.prepare(READINGS)?;
        let names: Vec<String> = sources
            .iter()
            .map(|source| body::source_text(*source))
            .collect();
        let names = serde_json::json!(names).to_string();
        let limit = i64::try_from(limit).unwrap_or(i64::MAX);
        let mut rows = statement.query(params![from.0, to.0, names, limit])?;
        let mut found = Vec::new();
        while let Some(row) = rows.next()? {
            let (position, text): (i64, String) = (row.get(0)?, row.get(1)?);
            found.push((position, replay::reading_from_text(position, &text)?));
        }
        Ok(found)
    }
}

/// Takes the lock of a record folder.
fn lock(folder: &Path) -> Result<File, RecordError> {
    let failed = |source| RecordError::Folder {
        folder: folder.to_path_buf(),
        source,
    };
    std::fs::create_dir_all(folder).map_err(failed)?;
    let path = folder.join(LOCK_NAME);
    let mut file = File::options()
        .create(true)
        .truncate(false)
        .read(true)
        .write(true)
        .open(&path)
        .map_err(failed)?;
    match file.try_lock() {
        Ok(()) => {}
        Err(TryLockError::WouldBlock) => {
            let holder = std::fs::read_to_string(&path).unwrap_or_default();
            return Err(RecordError::InUse {
                folder: folder.to_path_buf(),
                holder: holder.trim().to_owned(),
            });
        }
        Err(TryLockError::Error(error)) => return Err(failed(error)),
    }
    // Only for the message that a second daemon shows; the lock itself is what counts.
    file.set_len(0)
        .and_then(|()| writeln!(file, "{}", std::process::id()))
        .map_err(failed)?;
    Ok(file)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn readings_are_found_without_walking_through_the_record() {
        let folder = tempfile::tempdir().unwrap();
        let record = Record::open(folder.path()).unwrap();
        let mut statement = record
            .connection
            .prepare(&format!("EXPLAIN QUERY PLAN {READINGS}"))
            .unwrap();
        let plan: Vec<String> = statement
            .query_map(params![0, 1, "[]", 1], |row| row.get(3))
            .unwrap()
            .map(Result::unwrap)
            .collect();
        let plan = plan.join("\n");
        assert!(
            plan.contains("INDEX readings_by_source (source=? AND phenomenon>? AND phenomenon<?)"),
            "{plan}"
        );
        assert!(plan.contains("INDEX setups"), "{plan}");
        assert!(!plan.contains("SCAN inputs"), "{plan}");
    }
}
