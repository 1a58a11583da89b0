//! The rows of a batch: how each is written, read back, and hashed. One place for all three, so
//! that they can't drift apart.

use super::RecordError;
use super::chain::Link;
use super::sources::SourceName;
use crate::document::Document;
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::time::Timestamp;
use rusqlite::{Connection, Row, Statement, params};

/// A row of one table.
pub(super) trait TableRow: Sized {
    /// Its letter in the canonical form.
    const LETTER: u8;
    /// Inserts one row.
    const INSERT: &'static str;
    /// Reads rows whose key is above ?1 and at most ?2, in order.
    const SELECT: &'static str;

    /// Fills `INSERT`.
    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize>;

    /// From a row of `SELECT`.
    fn read(row: &Row<'_>) -> rusqlite::Result<Self>;

    /// Its columns in the canonical form.
    fn hash(&self, link: &mut Link);

    /// Writes rows.
    fn write_all(rows: &[Self], connection: &Connection) -> Result<(), RecordError> {
        if rows.is_empty() {
            return Ok(());
        }
        let mut statement = connection.prepare_cached(Self::INSERT)?;
        for row in rows {
            row.insert(&mut statement)?;
        }
        Ok(())
    }

    /// Hashes rows.
    fn hash_all(rows: &[Self], link: &mut Link) {
        for row in rows {
            link.row(Self::LETTER);
            row.hash(link);
        }
    }

    /// Hashes the rows of a file whose key is above `after` and at most `last`.
    fn hash_stored(
        connection: &Connection,
        after: i64,
        last: i64,
        link: &mut Link,
    ) -> Result<(), RecordError> {
        let mut statement = connection.prepare_cached(Self::SELECT)?;
        let mut rows = statement.query([after, last])?;
        while let Some(row) = rows.next()? {
            link.row(Self::LETTER);
            Self::read(row)?.hash(link);
        }
        Ok(())
    }
}

/// A source that is new with this batch.
#[derive(Clone, Debug)]
pub(super) struct SourceRow {
    pub(super) number: i64,
    pub(super) batch: i64,
    pub(super) name: SourceName,
}

impl TableRow for SourceRow {
    const LETTER: u8 = b's';
    const INSERT: &'static str =
        "INSERT INTO sources (number, batch, kind, name, unit) VALUES (?1, ?2, ?3, ?4, ?5)";
    const SELECT: &'static str = "SELECT number, batch, kind, name, unit FROM sources
        WHERE batch > ?1 AND batch <= ?2 ORDER BY number";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        let SourceName { kind, name, unit } = &self.name;
        statement.execute(params![self.number, self.batch, kind, name, unit])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            number: row.get(0)?,
            batch: row.get(1)?,
            name: SourceName {
                kind: row.get(2)?,
                name: row.get(3)?,
                unit: row.get(4)?,
            },
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.number);
        link.text(&self.name.kind);
        link.text(&self.name.name);
        link.text(&self.name.unit);
    }
}

/// An input that is a value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct ReadingRow {
    pub(super) position: i64,
    pub(super) source: i64,
    pub(super) phenomenon: Timestamp,
    pub(super) received: Timestamp,
    pub(super) value: f64,
    pub(super) sequence: Option<i64>,
    pub(super) excluded: bool,
}

impl ReadingRow {
    pub(super) fn new(position: i64, source: i64, reading: &Reading) -> Self {
        Self {
            position,
            source,
            phenomenon: reading.phenomenon,
            received: reading.received,
            // SQLite knows no negative zero; nor does the engine.
            value: reading.value + 0.0,
            sequence: reading.sequence,
            excluded: reading.excluded,
        }
    }

    /// The reading, of this source in the configuration in force.
    pub(super) fn reading(&self, source: Source) -> Reading {
        Reading {
            source,
            received: self.received,
            phenomenon: self.phenomenon,
            value: self.value,
            sequence: self.sequence,
            excluded: self.excluded,
        }
    }
}

impl TableRow for ReadingRow {
    const LETTER: u8 = b'r';
    const INSERT: &'static str = "INSERT INTO raw_readings
        (position, source, phenomenon, received, value, sequence, excluded)
        VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7)";
    const SELECT: &'static str =
        "SELECT position, source, phenomenon, received, value, sequence, excluded
        FROM raw_readings WHERE position > ?1 AND position <= ?2 ORDER BY position";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        statement.execute(params![
            self.position,
            self.source,
            self.phenomenon.0,
            self.received.0,
            self.value,
            self.sequence,
            self.excluded.then_some(1)
        ])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            position: row.get(0)?,
            source: row.get(1)?,
            phenomenon: Timestamp(row.get(2)?),
            received: Timestamp(row.get(3)?),
            value: row.get(4)?,
            sequence: row.get(5)?,
            excluded: row.get::<_, Option<i64>>(6)?.is_some(),
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.position);
        link.integer(self.source);
        link.integer(self.phenomenon.0);
        link.integer(self.received.0);
        link.float(self.value);
        link.maybe(self.sequence, Link::integer);
        link.integer(i64::from(self.excluded));
    }
}

/// Any other input.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct InputRow {
    pub(super) position: i64,
    pub(super) kind: String,
    pub(super) received: Option<Timestamp>,
    pub(super) body: String,
}

impl TableRow for InputRow {
    const LETTER: u8 = b'i';
    const INSERT: &'static str =
        "INSERT INTO inputs (position, kind, received, body) VALUES (?1, ?2, ?3, ?4)";
    const SELECT: &'static str = "SELECT position, kind, received, body FROM inputs
        WHERE position > ?1 AND position <= ?2 ORDER BY position";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        let received = self.received.map(|time| time.0);
        statement.execute(params![self.position, self.kind, received, self.body])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            position: row.get(0)?,
            kind: row.get(1)?,
            received: row.get::<_, Option<i64>>(2)?.map(Timestamp),
            body: row.get(3)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.position);
        link.text(&self.kind);
        link.maybe(self.received.map(|time| time.0), Link::integer);
        link.text(&self.body);
    }
}

/// Something that the engine said.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct OutputRow {
    pub(super) position: i64,
    pub(super) input: i64,
    pub(super) subject: Option<i64>,
    pub(super) kind: String,
    pub(super) body: String,
}

impl TableRow for OutputRow {
    const LETTER: u8 = b'o';
    const INSERT: &'static str =
        "INSERT INTO outputs (position, input, subject, kind, body) VALUES (?1, ?2, ?3, ?4, ?5)";
    const SELECT: &'static str = "SELECT position, input, subject, kind, body FROM outputs
        WHERE position > ?1 AND position <= ?2 ORDER BY position";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        statement.execute(params![
            self.position,
            self.input,
            self.subject,
            self.kind,
            self.body
        ])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            position: row.get(0)?,
            input: row.get(1)?,
            subject: row.get(2)?,
            kind: row.get(3)?,
            body: row.get(4)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.position);
        link.integer(self.input);
        link.maybe(self.subject, Link::integer);
        link.text(&self.kind);
        link.text(&self.body);
    }
}

/// A document as it is published.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct DocumentRow {
    pub(super) number: i64,
    pub(super) input: i64,
    pub(super) document: Document,
}

impl TableRow for DocumentRow {
    const LETTER: u8 = b'd';
    const INSERT: &'static str = "INSERT INTO documents
        (number, input, retain, expires, topic, correlation, payload)
        VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7)";
    const SELECT: &'static str =
        "SELECT number, retain, expires, topic, correlation, payload, input FROM documents
        WHERE number > ?1 AND number <= ?2 ORDER BY number";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        let document = &self.document;
        statement.execute(params![
            self.number,
            self.input,
            document.retain,
            document.expires.map(|time| time.0),
            document.topic,
            document.correlation,
            document.payload
        ])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            number: row.get(0)?,
            input: row.get(6)?,
            document: document_of(row)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.number);
        link.integer(self.input);
        hash_document(&self.document, link);
    }
}

/// From columns 1 to 5: retain, expires, topic, correlation, payload.
pub(super) fn document_of(row: &Row<'_>) -> rusqlite::Result<Document> {
    Ok(Document {
        retain: row.get(1)?,
        expires: row.get::<_, Option<i64>>(2)?.map(Timestamp),
        topic: row.get(3)?,
        correlation: row.get(4)?,
        payload: row.get(5)?,
    })
}

pub(super) fn hash_document(document: &Document, link: &mut Link) {
    link.integer(i64::from(document.retain));
    link.maybe(document.expires.map(|time| time.0), Link::integer);
    link.text(&document.topic);
    link.maybe(document.correlation.as_deref(), Link::bytes);
    link.bytes(&document.payload);
}

/// A document that waits no longer.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct SettledRow {
    pub(super) number: i64,
    pub(super) batch: i64,
    pub(super) how: String,
}

impl TableRow for SettledRow {
    const LETTER: u8 = b't';
    const INSERT: &'static str = "INSERT INTO settled (number, batch, how) VALUES (?1, ?2, ?3)";
    const SELECT: &'static str = "SELECT number, batch, how FROM settled
        WHERE batch > ?1 AND batch <= ?2 ORDER BY number";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        statement.execute(params![self.number, self.batch, self.how])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            number: row.get(0)?,
            batch: row.get(1)?,
            how: row.get(2)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.number);
        link.text(&self.how);
    }
}

/// Something that happened to the record itself.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct EventRow {
    pub(super) batch: i64,
    pub(super) kind: String,
    pub(super) body: String,
}

impl TableRow for EventRow {
    const LETTER: u8 = b'e';
    const INSERT: &'static str = "INSERT INTO events (batch, kind, body) VALUES (?1, ?2, ?3)";
    const SELECT: &'static str = "SELECT batch, kind, body FROM events
        WHERE batch > ?1 AND batch <= ?2 ORDER BY rowid";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        statement.execute(params![self.batch, self.kind, self.body])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            batch: row.get(0)?,
            kind: row.get(1)?,
            body: row.get(2)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.text(&self.kind);
        link.text(&self.body);
    }
}
