//! The file as rows: named cells, whatever its form.

use super::FeedError;
use holdtrue_text::csv_rows::{BadRow, CsvRows};
use holdtrue_text::lines::{BadLine, Lines};
use serde_json::{Map, Value};
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
    /// The file failed: nothing more can come.
    ended: bool,
}

enum Source {
    Csv(Box<CsvRows>),
    JsonLines(Lines),
}

impl Table {
    /// Opens a file.
    ///
    /// # Errors
    /// If it can't be opened, or a CSV file has no readable header.
    pub fn open(path: &Path, form: FileForm) -> Result<Self, FeedError> {
        let opened = match form {
            FileForm::JsonLines => Lines::open(path).map(Source::JsonLines),
            FileForm::Csv { separator } => {
                CsvRows::open(path, separator).map(|rows| Source::Csv(Box::new(rows)))
            }
        };
        let source = opened.map_err(|cause| FeedError::File {
            path: path.to_owned(),
            cause,
        })?;
        Ok(Self {
            source,
            ended: false,
        })
    }

    /// Refuses a column that the file is known not to have.
    ///
    /// # Errors
    /// Names the columns that there are.
    pub fn require(&self, column: &str) -> Result<(), FeedError> {
        match &self.source {
            Source::Csv(rows) if rows.position(column).is_none() => {
                let known = rows.columns().join(", ");
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
        if self.ended {
            return None;
        }
        match &mut self.source {
            Source::Csv(rows) => match rows.advance() {
                Ok(false) => None,
                Ok(true) => Some((rows.line(), cells(rows))),
                Err(why) => {
                    self.ended = matches!(why, BadRow::File(_));
                    Some((rows.line(), Err(why.to_string())))
                }
            },
            Source::JsonLines(lines) => {
                let row = match lines.advance() {
                    Ok(None) => return None,
                    Ok(Some(text)) => serde_json::from_str(text).map_err(|why| why.to_string()),
                    Err(why) => {
                        self.ended = matches!(why, BadLine::File(_));
                        Err(why.to_string())
                    }
                };
                Some((lines.line(), row))
            }
        }
    }
}

/// The cells of a CSV row by their columns.
fn cells(rows: &CsvRows) -> Result<Map<String, Value>, String> {
    let columns = rows.columns().iter().enumerate();
    columns
        .map(|(position, name)| match rows.cell(position) {
            Ok(cell) => Ok((name.clone(), Value::from(cell))),
            Err(shown) => Err(format!("{name}: {shown:?} is not UTF-8")),
        })
        .collect()
}
