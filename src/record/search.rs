//! Old readings, for the engine that can't look back by itself.

use super::row::{ReadingRow, TableRow};
use super::{Day, RecordError};
use holdtrue_engine::event::{Reading, Source};
use holdtrue_engine::time::{Duration, Timestamp};
use rusqlite::params;

/// A reading may bear a time so far ahead of the day of its file: what the engine accepts of
/// clocks that differ, generously. Files before are not looked into.
const AHEAD: Duration = Duration::from_seconds(86_400);

/// What is looked for.
pub(super) struct Search {
    /// Sources by their numbers in the record.
    pub(super) sources: Vec<(i64, Source)>,
    /// Phenomenon time, inclusive.
    pub(super) from: Timestamp,
    /// Phenomenon time, exclusive.
    pub(super) to: Timestamp,
    /// The last position that counts.
    pub(super) last: i64,
    pub(super) limit: usize,
}

impl Search {
    /// Whether the file of a day that ended then may hold any.
    pub(super) fn concerns(&self, day_end: Timestamp) -> bool {
        day_end.plus(AHEAD) > self.from
    }

    /// Adds what is in one file, in the order of positions.
    pub(super) fn search(
        &self,
        day: &Day,
        found: &mut Vec<(i64, Reading)>,
    ) -> Result<(), RecordError> {
        let mut read = || -> rusqlite::Result<()> {
            let mut statement = day.connection.prepare_cached(
                "SELECT position, source, phenomenon, received, value, sequence, excluded
                 FROM raw_readings WHERE source IN (SELECT value FROM json_each(?1))
                 AND phenomenon >= ?2 AND phenomenon < ?3 AND position <= ?4
                 ORDER BY position LIMIT ?5",
            )?;
            let numbers: Vec<i64> = self.sources.iter().map(|(number, _)| *number).collect();
            let list = serde_json::json!(numbers).to_string();
            let left = self.limit.saturating_sub(found.len());
            let left = i64::try_from(left).unwrap_or(i64::MAX);
            let mut rows =
                statement.query(params![list, self.from.0, self.to.0, self.last, left])?;
            while let Some(row) = rows.next()? {
                let row = ReadingRow::read(row)?;
                let of = self
                    .sources
                    .iter()
                    .find(|(number, _)| *number == row.source);
                let Some((_, source)) = of else { continue };
                found.push((row.position, row.reading(*source)));
            }
            Ok(())
        };
        read().map_err(|error| RecordError::from(error).of(day.path()))
    }
}
