//! One day's file, read: its opening, its links, the states in it, and its inputs in order.

use super::archive::Archive;
use super::body;
use super::chain::Digest;
use super::opening::Opening;
use super::row::{InputRow, ReadingRow, SourceRow, TableRow};
use super::sources::{Positions, SourceBook, SourceName};
use super::state_row::StateRow;
use super::{DayName, RecordError, State, layout};
use holdtrue_engine::event::{Input, Reading};
use holdtrue_engine::setup::Setup;
use rusqlite::{Connection, OptionalExtension};
use std::path::{Path, PathBuf};

/// One input with what was recorded of it.
#[derive(Debug)]
pub struct Told<'a> {
    /// Its position.
    pub position: i64,
    /// The input.
    pub input: &'a Input,
    /// The outputs that it caused, in order.
    pub outputs: &'a [Said],
}

/// A recorded output.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Said {
    /// Its position.
    pub position: i64,
    /// Its text.
    pub body: String,
}

/// A day's file, open.
pub struct Day {
    name: DayName,
    path: PathBuf,
    pub(super) connection: Connection,
    opening: Opening,
}

impl Day {
    /// Opens a file to read from.
    ///
    /// # Errors
    /// When it can't be read or is no record.
    pub fn open(path: &Path) -> Result<Self, RecordError> {
        Self::over(path, layout::open_to_read(path)?)
    }

    /// Of a file that is open already.
    pub(super) fn over(path: &Path, connection: Connection) -> Result<Self, RecordError> {
        let name = DayName::of(path).ok_or_else(|| RecordError::Foreign {
            path: path.to_path_buf(),
        })?;
        let opening = Opening::read(&connection).map_err(|error| error.of(path))?;
        Ok(Self {
            name,
            path: path.to_path_buf(),
            connection,
            opening,
        })
    }

    /// Its name.
    #[must_use]
    pub fn name(&self) -> DayName {
        self.name
    }

    /// Where it is.
    #[must_use]
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// What it opens with.
    #[must_use]
    pub fn opening(&self) -> &Opening {
        &self.opening
    }

    /// The configuration that was in force after the input at `position`.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn setup_after(&self, position: i64) -> Result<Setup, RecordError> {
        let newest: Option<(i64, String)> = self
            .connection
            .query_row(
                "SELECT position, body FROM inputs WHERE kind = 'setup' AND position <= ?1
                 ORDER BY position DESC LIMIT 1",
                [position],
                |row| Ok((row.get(0)?, row.get(1)?)),
            )
            .optional()
            .map_err(|error| RecordError::from(error).of(&self.path))?;
        let unreadable = |position, source| RecordError::Unreadable {
            path: self.path.clone(),
            position,
            source,
        };
        match newest {
            None => serde_json::from_str(&self.opening.setup)
                .map_err(|source| unreadable(self.opening.first_input - 1, source)),
            Some((position, text)) => match serde_json::from_str(&text) {
                Ok(Input::Setup(setup)) => Ok(*setup),
                Ok(_) => {
                    use serde::de::Error;
                    let source = serde_json::Error::custom("the row is not a configuration");
                    Err(unreadable(position, source))
                }
                Err(source) => Err(unreadable(position, source)),
            },
        }
    }

    /// All sources that the file knows, under their numbers.
    pub(super) fn book(&self) -> Result<SourceBook, RecordError> {
        let mut book = SourceBook::default();
        for row in self.sources()? {
            if !book.restore(row.number, row.name) {
                return Err(self.damaged(format!("source {} is out of order", row.number)));
            }
        }
        Ok(book)
    }

    pub(super) fn sources(&self) -> Result<Vec<SourceRow>, RecordError> {
        self.rows(i64::MIN, i64::MAX)
    }

    pub(super) fn rows<R: TableRow>(&self, after: i64, last: i64) -> Result<Vec<R>, RecordError> {
        let read = || -> rusqlite::Result<Vec<R>> {
            let mut statement = self.connection.prepare(R::SELECT)?;
            statement.query_map([after, last], R::read)?.collect()
        };
        read().map_err(|error| RecordError::from(error).of(&self.path))
    }

    /// The batches after which the state was saved, newest first, each with the position of the
    /// last input before it. The last is the opening.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn saved_states(&self) -> Result<Vec<(i64, i64)>, RecordError> {
        let read = || -> rusqlite::Result<Vec<(i64, i64)>> {
            let mut statement = self.connection.prepare(
                "SELECT number, last_input FROM batches
                 WHERE number IN (SELECT batch FROM states) ORDER BY number DESC",
            )?;
            statement
                .query_map([], |row| Ok((row.get(0)?, row.get(1)?)))?
                .collect()
        };
        read().map_err(|error| RecordError::from(error).of(&self.path))
    }

    /// The whole state as it was after `batch`: of each part the newest up to there.
    ///
    /// # Errors
    /// When the file can't be read, or a part's digest is not that of its bytes.
    pub fn state_after(&self, batch: i64) -> Result<State, RecordError> {
        let read = || -> rusqlite::Result<Vec<StateRow>> {
            let mut statement = self.connection.prepare(
                "SELECT batch, part, digest, bytes FROM states AS it WHERE batch =
                 (SELECT max(batch) FROM states WHERE part = it.part AND batch <= ?1)
                 ORDER BY rowid",
            )?;
            statement.query_map([batch], StateRow::read)?.collect()
        };
        let rows = read().map_err(|error| RecordError::from(error).of(&self.path))?;
        if let Some(row) = rows.iter().find(|row| row.digest == Digest::default()) {
            return Err(self.damaged(format!(
                "the saved state of {} after batch {} is damaged",
                row.part, row.batch
            )));
        }
        Ok(rows.into_iter().map(|row| (row.part, row.bytes)).collect())
    }

    /// The parts that were saved with one batch.
    ///
    /// # Errors
    /// When the file can't be read.
    pub fn saved_with(&self, batch: i64) -> Result<State, RecordError> {
        let rows: Vec<StateRow> = self.rows(batch - 1, batch)?;
        Ok(rows.into_iter().map(|row| (row.part, row.bytes)).collect())
    }

    /// Hands every input after `after`, up to `last`, to `take`, in order, each with its recorded
    /// outputs. `archive` has the files before this one, for rows that inputs refer to.
    ///
    /// # Errors
    /// When the file can't be read, a row is missing or unreadable, or `take` refuses.
    pub fn walk<E: From<RecordError>>(
        &self,
        archive: &Archive,
        after: i64,
        last: i64,
        mut take: impl FnMut(Told<'_>) -> Result<(), E>,
    ) -> Result<(), E> {
        let sql = |error: rusqlite::Error| RecordError::from(error).of(&self.path);
        let names: Vec<SourceName> = self.sources()?.into_iter().map(|row| row.name).collect();
        let mut positions = Positions::new(names.iter(), &self.setup_after(after)?);
        let mut readings = self.connection.prepare(ReadingRow::SELECT).map_err(sql)?;
        let mut readings = readings.query([after, last]).map_err(sql)?;
        let mut inputs = self.connection.prepare(InputRow::SELECT).map_err(sql)?;
        let mut inputs = inputs.query([after, last]).map_err(sql)?;
        let mut outputs = self
            .connection
            .prepare(
                "SELECT position, input, body FROM outputs WHERE position > ?1 ORDER BY position",
            )
            .map_err(sql)?;
        let from = self.outputs_up_to(after)?;
        let mut outputs = outputs.query([from]).map_err(sql)?;
        let mut said = next_said(&mut outputs).map_err(sql)?;
        let mut reading = next_row::<ReadingRow>(&mut readings).map_err(sql)?;
        let mut other = next_row::<InputRow>(&mut inputs).map_err(sql)?;
        let mut expected = after + 1;
        let mut caused = Vec::new();
        loop {
            let input = match (&reading, &other) {
                (Some(row), next) if next.as_ref().is_none_or(|it| row.position < it.position) => {
                    self.expect(expected, row.position)?;
                    let input = Input::Reading(self.reading(row, &positions)?);
                    reading = next_row(&mut readings).map_err(sql)?;
                    input
                }
                (_, Some(row)) => {
                    self.expect(expected, row.position)?;
                    let input = self.other(row, &positions, archive)?;
                    other = next_row(&mut inputs).map_err(sql)?;
                    input
                }
                (_, None) => return Ok(()),
            };
            caused.clear();
            while let Some((cause, output)) = said.take() {
                if cause > expected {
                    said = Some((cause, output));
                    break;
                }
                caused.push(output);
                said = next_said(&mut outputs).map_err(sql)?;
            }
            take(Told {
                position: expected,
                input: &input,
                outputs: &caused,
            })?;
            if let Input::Setup(setup) = &input {
                positions = Positions::new(names.iter(), setup);
            }
            expected += 1;
        }
    }

    fn expect(&self, expected: i64, found: i64) -> Result<(), RecordError> {
        if expected == found {
            return Ok(());
        }
        Err(RecordError::Missing {
            path: self.path.clone(),
            expected,
            found,
        })
    }

    /// Position of the last output of the inputs up to `input`.
    fn outputs_up_to(&self, input: i64) -> Result<i64, RecordError> {
        let before = self.opening.first_output - 1;
        if input < self.opening.first_input {
            return Ok(before);
        }
        // Outputs stand in the order of their inputs: the newest row that belongs to the batch of
        // this input, or to one before it.
        let found: Option<i64> = self
            .connection
            .query_row(
                "SELECT max(position) FROM outputs WHERE input <= ?1 AND position <=
                 (SELECT last_output FROM batches WHERE last_input >= ?1 ORDER BY number LIMIT 1)",
                [input],
                |row| row.get(0),
            )
            .map_err(|error| RecordError::from(error).of(&self.path))?;
        Ok(found.unwrap_or(before))
    }

    fn reading(&self, row: &ReadingRow, positions: &Positions) -> Result<Reading, RecordError> {
        let source = positions.of(row.source).ok_or_else(|| {
            self.damaged(format!(
                "input {} has source {}, which the configuration in force does not know",
                row.position, row.source
            ))
        })?;
        Ok(row.reading(source))
    }

    fn other(
        &self,
        row: &InputRow,
        positions: &Positions,
        archive: &Archive,
    ) -> Result<Input, RecordError> {
        let reading = |position| {
            let row = self.reading_row(position)?;
            let row = match row {
                Some(row) => row,
                None => archive
                    .reading_row(position, self.name)
                    .map_err(Trouble::Record)?,
            };
            self.reading(&row, positions).map_err(Trouble::Record)
        };
        body::input_from_text(&row.kind, &row.body, reading).map_err(|trouble| match trouble {
            Trouble::Record(error) => error,
            Trouble::Json(source) => RecordError::Unreadable {
                path: self.path.clone(),
                position: row.position,
                source,
            },
        })
    }

    /// The reading at a position, if it is in this file.
    pub(super) fn reading_row(&self, position: i64) -> Result<Option<ReadingRow>, RecordError> {
        let mut rows = self.rows::<ReadingRow>(position - 1, position)?;
        Ok(rows.pop())
    }

    /// An error about this file.
    pub(super) fn damaged(&self, what: String) -> RecordError {
        RecordError::Damaged {
            path: self.path.clone(),
            what,
        }
    }
}

/// Why an input can't be made from its row: its own text, or a row that it refers to.
enum Trouble {
    Json(serde_json::Error),
    Record(RecordError),
}

impl From<serde_json::Error> for Trouble {
    fn from(error: serde_json::Error) -> Self {
        Self::Json(error)
    }
}

impl From<RecordError> for Trouble {
    fn from(error: RecordError) -> Self {
        Self::Record(error)
    }
}

fn next_row<R: TableRow>(rows: &mut rusqlite::Rows<'_>) -> rusqlite::Result<Option<R>> {
    match rows.next()? {
        Some(row) => R::read(row).map(Some),
        None => Ok(None),
    }
}

fn next_said(rows: &mut rusqlite::Rows<'_>) -> rusqlite::Result<Option<(i64, Said)>> {
    match rows.next()? {
        Some(row) => {
            let said = Said {
                position: row.get(0)?,
                body: row.get(2)?,
            };
            Ok(Some((row.get(1)?, said)))
        }
        None => Ok(None),
    }
}
