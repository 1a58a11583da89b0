//! The links of a file: as they stand there, and as they follow from its rows.

use super::batch::Place;
use super::chain::{Digest, Head, Link};
use super::row::{
    DocumentRow, EventRow, InputRow, OutputRow, ReadingRow, SettledRow, SourceRow, TableRow,
};
use super::state_row::StateRow;
use super::{Day, RecordError};
use holdtrue_engine::time::Timestamp;
use std::collections::{BTreeMap, BTreeSet};

impl Day {
    /// Where the record stands after the newest batch of this file.
    ///
    /// # Errors
    /// When the file can't be read.
    pub(super) fn place(&self) -> Result<Place, RecordError> {
        let mut newest = None;
        self.links(|place, _| {
            newest = Some(place);
            Ok(())
        })?;
        newest.ok_or_else(|| self.damaged("it has no batch".to_owned()))
    }

    /// Hands over every batch in order with the instant of its commit.
    pub(super) fn links(
        &self,
        mut take: impl FnMut(Place, Timestamp) -> Result<(), RecordError>,
    ) -> Result<(), RecordError> {
        let failed = |error| RecordError::from(error).of(self.path());
        let mut statement = self
            .connection
            .prepare(
                "SELECT number, committed, last_input, last_output, last_document, digest
                 FROM batches ORDER BY number",
            )
            .map_err(failed)?;
        let mut rows = statement.query([]).map_err(failed)?;
        while let Some(row) = rows.next().map_err(failed)? {
            let read = || -> rusqlite::Result<(Place, Timestamp)> {
                let digest: Vec<u8> = row.get(5)?;
                let place = Place {
                    head: Head {
                        batch: row.get(0)?,
                        // What has another length is no digest and agrees with none.
                        digest: Digest::from_blob(&digest).unwrap_or_default(),
                    },
                    last_input: row.get(2)?,
                    last_output: row.get(3)?,
                    last_document: row.get(4)?,
                };
                Ok((place, Timestamp(row.get(1)?)))
            };
            let (place, committed) = read().map_err(failed)?;
            take(place, committed)?;
        }
        Ok(())
    }

    /// What is needed to compute the digests of all batches: rows that are found by their batch.
    pub(super) fn by_batch(&self) -> Result<ByBatch, RecordError> {
        let read = || -> rusqlite::Result<BTreeSet<i64>> {
            let mut statement = self
                .connection
                .prepare("SELECT DISTINCT batch FROM states")?;
            statement.query_map([], |row| row.get(0))?.collect()
        };
        Ok(ByBatch {
            sources: grouped(self.sources()?, |row| row.batch),
            settled: grouped(self.rows(i64::MIN, i64::MAX)?, |row: &SettledRow| row.batch),
            events: grouped(self.rows(i64::MIN, i64::MAX)?, |row: &EventRow| row.batch),
            states: read().map_err(|error| RecordError::from(error).of(self.path()))?,
        })
    }

    /// The digest of a batch as it follows from what stands in the file.
    pub(super) fn stored_digest(
        &self,
        by_batch: &ByBatch,
        before: &Place,
        place: &Place,
        committed: Timestamp,
    ) -> Result<Digest, RecordError> {
        let number = place.head.batch;
        if number == self.opening().first_batch {
            return self
                .opening()
                .stored_digest(&self.connection)
                .map_err(|error| error.of(self.path()));
        }
        let hash = || -> Result<Digest, RecordError> {
            let file = &self.connection;
            let mut link = Link::new(&before.head.digest, number, committed);
            let (input, output) = (before.last_input, before.last_output);
            let (document, last) = (before.last_document, place.last_document);
            SourceRow::hash_all(rows_of(&by_batch.sources, number), &mut link);
            ReadingRow::hash_stored(file, input, place.last_input, &mut link)?;
            InputRow::hash_stored(file, input, place.last_input, &mut link)?;
            OutputRow::hash_stored(file, output, place.last_output, &mut link)?;
            DocumentRow::hash_stored(file, document, last, &mut link)?;
            SettledRow::hash_all(rows_of(&by_batch.settled, number), &mut link);
            EventRow::hash_all(rows_of(&by_batch.events, number), &mut link);
            if by_batch.states.contains(&number) {
                StateRow::hash_stored(file, number - 1, number, &mut link)?;
            }
            Ok(link.close())
        };
        hash().map_err(|error| error.of(self.path()))
    }

    /// What happened to the record itself: kinds and texts, in order.
    pub(super) fn notes(&self) -> Result<Vec<(String, String)>, RecordError> {
        let rows: Vec<EventRow> = self.rows(i64::MIN, i64::MAX)?;
        Ok(rows.into_iter().map(|row| (row.kind, row.body)).collect())
    }

    /// Whether a table has rows whose key is above `last`.
    pub(super) fn has_rows_beyond(
        &self,
        table: &'static str,
        last: i64,
    ) -> Result<bool, RecordError> {
        let key = match table {
            "documents" => "number",
            "settled" | "events" | "states" | "sources" => "batch",
            _ => "position",
        };
        let query = format!("SELECT count(*) > 0 FROM {table} WHERE {key} > ?1");
        self.connection
            .query_row(&query, [last], |row| row.get(0))
            .map_err(|error| RecordError::from(error).of(self.path()))
    }
}

/// Rows that are found by their batch, and not by a position.
pub(super) struct ByBatch {
    sources: BTreeMap<i64, Vec<SourceRow>>,
    settled: BTreeMap<i64, Vec<SettledRow>>,
    events: BTreeMap<i64, Vec<EventRow>>,
    /// Batches with which the state was saved.
    states: BTreeSet<i64>,
}

fn grouped<R>(rows: Vec<R>, batch: impl Fn(&R) -> i64) -> BTreeMap<i64, Vec<R>> {
    let mut groups: BTreeMap<i64, Vec<R>> = BTreeMap::new();
    for row in rows {
        groups.entry(batch(&row)).or_default().push(row);
    }
    groups
}

fn rows_of<R>(groups: &BTreeMap<i64, Vec<R>>, batch: i64) -> &[R] {
    groups.get(&batch).map_or(&[], Vec::as_slice)
}
