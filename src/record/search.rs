//! Old readings, for the engine that can't look back by itself.

use super::row::{ReadingRow, TableRow};
use super::sources::SourceBook;
use super::{Day, RecordError};
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::time::{Duration, Timestamp};
use rusqlite::params;

/// A reading may bear a time so far ahead of the day of its file: what the engine accepts of
/// clocks that differ, generously. Files before are not looked into.
const AHEAD: Duration = Duration::from_seconds(86_400);

/// What is looked for.
pub(super) struct Search<'a> {
    pub(super) sources: &'a [Source],
    /// Phenomenon time, inclusive.
    pub(super) from: Timestamp,
    /// Phenomenon time, exclusive.
    pub(super) to: Timestamp,
    pub(super) limit: usize,
}

impl Search<'_> {
    /// Whether the file of a day that ended then may hold any.
    pub(super) fn concerns(&self, day_end: Timestamp) -> bool {
        day_end.plus(AHEAD) > self.from
    }

    /// Adds what is in one file, in the order of positions.
    pub(super) fn search(
        &self,
        day: &Day,
        book: &mut SourceBook,
        found: &mut Vec<(i64, Reading)>,
    ) -> Result<(), RecordError> {
        let mut read = |found: &mut Vec<(i64, Reading)>| -> rusqlite::Result<()> {
            let mut statement = day.connection.prepare_cached(
                "SELECT position, source, phenomenon, received, value, sequence, excluded
                 FROM raw_readings WHERE source IN (SELECT value FROM json_each(?1))
                 AND phenomenon >= ?2 AND phenomenon < ?3 ORDER BY position LIMIT ?4",
            )?;
            let numbers: Vec<i64> = self.sources.iter().map(|it| book.of(*it)).collect();
            let list = serde_json::json!(numbers).to_string();
            let left = self.limit.saturating_sub(found.len());
            let left = i64::try_from(left).unwrap_or(i64::MAX);
            let mut rows = statement.query(params![list, self.from.0, self.to.0, left])?;
            while let Some(row) = rows.next()? {
                let row = ReadingRow::read(row)?;
                let of = numbers.iter().position(|number| *number == row.source);
                let Some(source) = of.map(|place| self.sources[place]) else {
                    continue;
                };
                let reading = Reading {
                    source,
                    received: row.received,
                    phenomenon: row.phenomenon,
                    value: row.value,
                    sequence: row.sequence,
                    excluded: row.excluded,
                };
                found.push((row.position, reading));
            }
            Ok(())
        };
        read(found).map_err(|error| RecordError::from(error).of(day.path()))
    }
}
