//! Reads the record back in order, for a restart.

use super::{Record, RecordError, body};
use holdtrue_engine::event::{Input, Reading};

/// One recorded input with the outputs that it caused when it was live.
#[derive(Debug)]
pub struct Replayed {
    /// The input's position.
    pub position: i64,
    /// The input.
    pub input: Input,
    /// Bodies of the recorded outputs, in order.
    pub outputs: Vec<String>,
}

impl Record {
    /// Hands every recorded input to `take`, oldest first, each with its recorded outputs.
    ///
    /// # Errors
    /// When the file can't be read, a row is missing or unreadable, or `take` refuses.
    pub fn replay<E: From<RecordError>>(
        &self,
        mut take: impl FnMut(Replayed) -> Result<(), E>,
    ) -> Result<(), E> {
        let mut inputs = self
            .connection
            .prepare("SELECT position, kind, body FROM inputs ORDER BY position")
            .map_err(RecordError::from)?;
        let mut outputs = self
            .connection
            .prepare("SELECT body, input FROM outputs ORDER BY position")
            .map_err(RecordError::from)?;
        let mut inputs = inputs.query([]).map_err(RecordError::from)?;
        let mut outputs = outputs.query([]).map_err(RecordError::from)?;
        let mut waiting = next_output(&mut outputs)?;
        let mut expected = 1;
        while let Some(row) = inputs.next().map_err(RecordError::from)? {
            let position: i64 = row.get(0).map_err(RecordError::from)?;
            if position != expected {
                return Err(RecordError::Missing {
                    expected,
                    found: position,
                }
                .into());
            }
            let input = self.input_from_row(position, row)?;
            expected += 1;
            let mut bodies = Vec::new();
            while let Some((body, cause)) = waiting.take() {
                if cause > position {
                    waiting = Some((body, cause));
                    break;
                }
                bodies.push(body);
                waiting = next_output(&mut outputs)?;
            }
            take(Replayed {
                position,
                input,
                outputs: bodies,
            })?;
        }
        Ok(())
    }

    fn input_from_row(&self, position: i64, row: &rusqlite::Row<'_>) -> Result<Input, RecordError> {
        let (kind, text): (String, String) = (row.get(1)?, row.get(2)?);
        let reading = |at| self.reading_at(at).map_err(RowError::Record);
        body::input_from_text(&kind, &text, reading).map_err(|error| match error {
            RowError::Record(error) => error,
            RowError::Json(source) => RecordError::Unreadable { position, source },
        })
    }

    fn reading_at(&self, position: i64) -> Result<Reading, RecordError> {
        let text: String = self.connection.query_row(
            "SELECT body FROM inputs WHERE position = ?1 AND kind = 'reading'",
            [position],
            |row| row.get(0),
        )?;
        reading_from_text(position, &text)
    }
}

/// Why a row can't be read: its own text, or a row that it refers to.
enum RowError {
    Json(serde_json::Error),
    Record(RecordError),
}

impl From<serde_json::Error> for RowError {
    fn from(error: serde_json::Error) -> Self {
        Self::Json(error)
    }
}

/// The reading in the body of the input at `position`.
pub(super) fn reading_from_text(position: i64, text: &str) -> Result<Reading, RecordError> {
    use serde::de::Error;
    match serde_json::from_str(text) {
        Ok(Input::Reading(reading)) => Ok(reading),
        Ok(_) => {
            let source = serde_json::Error::custom("the row is not a reading");
            Err(RecordError::Unreadable { position, source })
        }
        Err(source) => Err(RecordError::Unreadable { position, source }),
    }
}

fn next_output(rows: &mut rusqlite::Rows<'_>) -> Result<Option<(String, i64)>, RecordError> {
    match rows.next()? {
        Some(row) => Ok(Some((row.get(0)?, row.get(1)?))),
        None => Ok(None),
    }
}
