//! The rows that a file opens with: parts of the engine's state, and documents.

use super::chain::{Digest, Link};
use super::row::{TableRow, document_of, hash_document};
use crate::document::Document;
use holdtrue_engine::time::Timestamp;
use rusqlite::{Row, Statement, params};

/// A part of the engine's state.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct StateRow {
    pub(super) batch: i64,
    pub(super) part: String,
    pub(super) digest: Digest,
    pub(super) bytes: Vec<u8>,
}

impl StateRow {
    pub(super) fn new(batch: i64, part: String, bytes: Vec<u8>) -> Self {
        Self {
            batch,
            part,
            digest: Digest::of(&bytes),
            bytes,
        }
    }
}

impl TableRow for StateRow {
    const LETTER: u8 = b'p';
    const INSERT: &'static str =
        "INSERT INTO states (batch, part, digest, bytes) VALUES (?1, ?2, ?3, ?4)";
    const SELECT: &'static str = "SELECT batch, part, digest, bytes FROM states
        WHERE batch > ?1 AND batch <= ?2 ORDER BY rowid";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        statement.execute(params![self.batch, self.part, self.digest.0, self.bytes])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        let told: [u8; 32] = row.get(2)?;
        let bytes: Vec<u8> = row.get(3)?;
        // A digest that is not that of the bytes is none.
        let digest = Some(Digest::of(&bytes)).filter(|digest| digest.0 == told);
        Ok(Self {
            batch: row.get(0)?,
            part: row.get(1)?,
            digest: digest.unwrap_or_default(),
            bytes,
        })
    }

    /// The bytes go in by their digest: the many bytes of a state are hashed once.
    fn hash(&self, link: &mut Link) {
        link.text(&self.part);
        link.bytes(&self.digest.0);
    }
}

/// A document of an earlier file that waited for the broker when this one was opened.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct WaitingRow {
    pub(super) number: i64,
    pub(super) document: Document,
}

impl TableRow for WaitingRow {
    const LETTER: u8 = b'w';
    const INSERT: &'static str = "INSERT INTO waiting_at_opening
        (number, retain, expires, topic, correlation, payload) VALUES (?1, ?2, ?3, ?4, ?5, ?6)";
    const SELECT: &'static str =
        "SELECT number, retain, expires, topic, correlation, payload FROM waiting_at_opening
        WHERE number > ?1 AND number <= ?2 ORDER BY number";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        let document = &self.document;
        statement.execute(params![
            self.number,
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
            document: document_of(row)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.integer(self.number);
        hash_document(&self.document, link);
    }
}

/// A retained document as it should stand at the broker when this file was opened.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct RetainedRow {
    pub(super) number: i64,
    pub(super) topic: String,
    pub(super) expires: Option<Timestamp>,
    pub(super) payload: Vec<u8>,
}

impl TableRow for RetainedRow {
    const LETTER: u8 = b'k';
    const INSERT: &'static str = "INSERT INTO retained_at_opening
        (topic, number, expires, payload) VALUES (?1, ?2, ?3, ?4)";
    const SELECT: &'static str = "SELECT topic, number, expires, payload FROM retained_at_opening
        WHERE number > ?1 AND number <= ?2 ORDER BY topic";

    fn insert(&self, statement: &mut Statement<'_>) -> rusqlite::Result<usize> {
        let expires = self.expires.map(|time| time.0);
        statement.execute(params![self.topic, self.number, expires, self.payload])
    }

    fn read(row: &Row<'_>) -> rusqlite::Result<Self> {
        Ok(Self {
            topic: row.get(0)?,
            number: row.get(1)?,
            expires: row.get::<_, Option<i64>>(2)?.map(Timestamp),
            payload: row.get(3)?,
        })
    }

    fn hash(&self, link: &mut Link) {
        link.text(&self.topic);
        link.integer(self.number);
        link.maybe(self.expires.map(|time| time.0), Link::integer);
        link.bytes(&self.payload);
    }
}
