//! The file as rows: named cells, whatever its form.

use super::FeedError;
use serde_json::{Map, Value};
use std::fs::File;
use std::io::{BufRead, BufReader, Lines};
use std::path::Path;

/// Form of the file.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum FileForm {
    /// With a header line; cells separated by this character.
    Csv {
        /// The separator.
        separator: u8,
    },
    /// One JSON object a line.
    JsonLines,
}

/// One row: its line in the file, and its cells by column, or why it can't be read.
pub type Row = (u64, Result<Map<String, Value>, String>);

/// The rows of a file, in its order.
pub struct Table {
    source: Source,
    /// Column names, known beforehand for CSV only.
    columns: Option<Vec<String>>,
}

enum Source {
    Csv(Box<csv::StringRecordsIntoIter<File>>),
    JsonLines {
        lines: Lines<BufReader<File>>,
        line: u64,
    },
}

impl Table {
    /// Opens a file.
    ///
    /// # Errors
    /// If it can't be opened, or a CSV file has no readable header.
    pub fn open(path: &Path, form: FileForm) -> Result<Self, FeedError> {
        let failed = |cause| FeedError::File {
            path: path.to_owned(),
            cause,
        };
        let file = File::open(path).map_err(failed)?;
        match form {
            FileForm::JsonLines => {
                let lines = BufReader::new(file).lines();
                Ok(Self {
                    source: Source::JsonLines { lines, line: 0 },
                    columns: None,
                })
            }
            FileForm::Csv { separator } => {
                let mut reader = csv::ReaderBuilder::new()
                    .delimiter(separator)
                    .trim(csv::Trim::All)
                    .from_reader(file);
                let header = reader.headers().map_err(|error| {
                    FeedError::Usage(format!("{}: no header: {error}", path.display()))
                })?;
                // A byte order mark, which spreadsheets write, is no part of the first name.
                let columns = header
                    .iter()
                    .map(|name| name.trim_start_matches('\u{feff}').to_owned())
                    .collect();
                let rows = Box::new(reader.into_records());
                Ok(Self {
                    source: Source::Csv(rows),
                    columns: Some(columns),
                })
            }
        }
    }

    /// Refuses a column that the file is known not to have.
    ///
    /// # Errors
    /// Names the columns that there are.
    pub fn require(&self, column: &str) -> Result<(), FeedError> {
        match &self.columns {
            Some(columns) if !columns.iter().any(|known| known == column) => {
                let known = columns.join(", ");
                Err(FeedError::Usage(format!(
                    "no column {column:?}; the file has: {known}"
                )))
            }
            _ => Ok(()),
        }
    }
}

impl Iterator for Table {
    type Item = Row;

    fn next(&mut self) -> Option<Row> {
        match &mut self.source {
            Source::Csv(rows) => {
                let row = rows.next()?;
                let columns = self.columns.as_deref().unwrap_or_default();
                Some(match row {
                    Ok(row) => {
                        let line = row.position().map_or(0, csv::Position::line);
                        let cells = columns.iter().zip(row.iter());
                        let cells = cells.map(|(name, cell)| (name.clone(), Value::from(cell)));
                        (line, Ok(cells.collect()))
                    }
                    Err(error) => {
                        let line = error.position().map_or(0, csv::Position::line);
                        (line, Err(error.to_string()))
                    }
                })
            }
            Source::JsonLines { lines, line } => loop {
                *line += 1;
                let text = match lines.next()? {
                    Ok(text) => text,
                    Err(error) => return Some((*line, Err(error.to_string()))),
                };
                if !text.trim().is_empty() {
                    return Some((
                        *line,
                        serde_json::from_str(&text).map_err(|e| e.to_string()),
                    ));
                }
            },
        }
    }
}
