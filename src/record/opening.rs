//! What a day's file opens with: where it goes on from, the state of the engine, the documents that
//! still wait and those that are retained. So each file can be read without those before it.

use super::batch::{Event, Place, write_link};
use super::chain::{Digest, Head, Link};
use super::row::{EventRow, SourceRow, TableRow};
use super::sources::SourceBook;
use super::state_row::{RetainedRow, StateRow, WaitingRow};
use super::{DayName, RecordError, layout, views};
use crate::record::batch::Batch;
use holdtrue_engine::time::Timestamp;
use rusqlite::{Connection, params};
use std::path::Path;

/// The row of the table `day`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Opening {
    /// When the file was opened.
    pub opened: Timestamp,
    /// Version of the program that opened it.
    pub program: String,
    /// Revision of the engine's arithmetic.
    pub arithmetic: i64,
    /// Revision of the saved state.
    pub state: i64,
    /// Configuration in force, as JSON.
    pub setup: String,
    /// The file before.
    pub preceding: Option<DayName>,
    /// Digest of the last batch in the file before; zeros in the first.
    pub chain: Digest,
    /// Number of the opening's own batch.
    pub first_batch: i64,
    /// Position of the first input.
    pub first_input: i64,
    /// Position of the first output.
    pub first_output: i64,
    /// Number of the first document.
    pub first_document: i64,
}

impl Opening {
    /// Reads it from a file.
    ///
    /// # Errors
    /// When the file can't be read or has no such row.
    pub(super) fn read(connection: &Connection) -> Result<Self, RecordError> {
        Ok(connection.query_row(
            "SELECT opened, program, arithmetic, state, setup, preceding, chain, first_batch,
             first_input, first_output, first_document FROM day",
            [],
            |row| {
                let preceding: Option<String> = row.get(5)?;
                let chain: [u8; 32] = row.get(6)?;
                Ok(Self {
                    opened: Timestamp(row.get(0)?),
                    program: row.get(1)?,
                    arithmetic: row.get(2)?,
                    state: row.get(3)?,
                    setup: row.get(4)?,
                    preceding: preceding.and_then(|name| name.parse().ok()),
                    chain: Digest(chain),
                    first_batch: row.get(7)?,
                    first_input: row.get(8)?,
                    first_output: row.get(9)?,
                    first_document: row.get(10)?,
                })
            },
        )?)
    }

    fn write(&self, connection: &Connection) -> Result<(), RecordError> {
        connection.execute(
            "INSERT INTO day (opened, program, arithmetic, state, setup, preceding, chain,
             first_batch, first_input, first_output, first_document)
             VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8, ?9, ?10, ?11)",
            params![
                self.opened.0,
                self.program,
                self.arithmetic,
                self.state,
                self.setup,
                self.preceding.map(|name| name.to_string()),
                self.chain.0,
                self.first_batch,
                self.first_input,
                self.first_output,
                self.first_document
            ],
        )?;
        Ok(())
    }

    fn hash(&self, link: &mut Link) {
        link.row(b'y');
        link.text(&self.program);
        link.integer(self.arithmetic);
        link.integer(self.state);
        link.text(&self.setup);
        link.maybe(self.preceding, |link, name| link.text(&name.to_string()));
        link.integer(self.first_input);
        link.integer(self.first_output);
        link.integer(self.first_document);
    }

    /// Where the record stood before the opening.
    pub(super) fn place_before(&self) -> Place {
        Place {
            head: Head {
                batch: self.first_batch - 1,
                digest: self.chain,
            },
            last_input: self.first_input - 1,
            last_output: self.first_output - 1,
            last_document: self.first_document - 1,
        }
    }

    /// The digest of the opening's batch as it follows from what stands in the file.
    pub(super) fn stored_digest(&self, connection: &Connection) -> Result<Digest, RecordError> {
        let (after, last) = (self.first_batch - 1, self.first_batch);
        let mut link = Link::new(&self.chain, self.first_batch, self.opened);
        self.hash(&mut link);
        SourceRow::hash_stored(connection, after, last, &mut link)?;
        EventRow::hash_stored(connection, after, last, &mut link)?;
        StateRow::hash_stored(connection, after, last, &mut link)?;
        WaitingRow::hash_stored(connection, i64::MIN, i64::MAX, &mut link)?;
        RetainedRow::hash_stored(connection, i64::MIN, i64::MAX, &mut link)?;
        Ok(link.close())
    }
}

/// Everything that a new file begins with.
pub(super) struct Contents<'a> {
    pub(super) opening: Opening,
    pub(super) book: &'a SourceBook,
    pub(super) events: Vec<Event>,
    pub(super) state: super::State,
    pub(super) waiting: Vec<WaitingRow>,
    pub(super) retained: Vec<RetainedRow>,
}

/// Makes a file with its contents in one transaction; the place after it.
///
/// # Errors
/// When the file can't be written; it may then exist without a table, which counts as not made.
pub(super) fn create(
    path: &Path,
    contents: Contents<'_>,
) -> Result<(Connection, Place), RecordError> {
    let Contents {
        opening,
        book,
        events,
        state,
        waiting,
        mut retained,
    } = contents;
    retained.sort_by(|a, b| a.topic.cmp(&b.topic));
    // Through a batch, which knows how its rows are made.
    let mut batch = Batch::new(opening.place_before(), SourceBook::default());
    for event in events {
        batch.note(event);
    }
    batch.add_state(state);
    let (events, states) = batch.into_opening_rows();
    let number = opening.first_batch;
    let sources: Vec<SourceRow> = book
        .since(1)
        .map(|(source, name)| SourceRow {
            number: source,
            batch: number,
            name: name.clone(),
        })
        .collect();
    let mut link = Link::new(&opening.chain, number, opening.opened);
    opening.hash(&mut link);
    SourceRow::hash_all(&sources, &mut link);
    EventRow::hash_all(&events, &mut link);
    StateRow::hash_all(&states, &mut link);
    WaitingRow::hash_all(&waiting, &mut link);
    RetainedRow::hash_all(&retained, &mut link);
    let mut place = opening.place_before();
    place.head = Head {
        batch: number,
        digest: link.close(),
    };
    let mut connection = layout::open_to_write(path)?;
    let transaction = connection.transaction()?;
    transaction.execute_batch(layout::TABLES)?;
    transaction.execute_batch(layout::LIVE_INDEXES)?;
    transaction.execute_batch(&views::statements())?;
    layout::stamp(&transaction)?;
    opening.write(&transaction)?;
    SourceRow::write_all(&sources, &transaction)?;
    EventRow::write_all(&events, &transaction)?;
    StateRow::write_all(&states, &transaction)?;
    WaitingRow::write_all(&waiting, &transaction)?;
    RetainedRow::write_all(&retained, &transaction)?;
    write_link(&transaction, &place, opening.opened)?;
    transaction.commit()?;
    fold(&connection)?;
    Ok((connection, place))
}

/// Folds the write-ahead log into a new file, so that a file with an opening never looks as if
/// its making had been broken off, whatever happens to its log later.
fn fold(connection: &Connection) -> Result<(), RecordError> {
    let is_busy: bool =
        connection.query_row("PRAGMA wal_checkpoint(TRUNCATE)", [], |row| row.get(0))?;
    if is_busy {
        let busy = rusqlite::ffi::Error::new(rusqlite::ffi::SQLITE_BUSY);
        return Err(rusqlite::Error::SqliteFailure(busy, None).into());
    }
    Ok(())
}
