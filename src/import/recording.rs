//! A file of a recording, row by row, whatever its form.

use super::ImportError;
use super::entry::Entry;
use super::json_lines::JsonLines;
use super::mapping::Mapping;
use super::packs::Packs;
use super::problem::Problems;
use super::table::Table;
use holdtrue_text::csv_rows::BadRow;
use std::path::{Path, PathBuf};

/// Form of a file.
#[derive(Clone, Copy, Debug, PartialEq, Eq, clap::ValueEnum)]
pub enum Form {
    /// A header line, then rows of cells.
    Csv,
    /// One JSON object a line.
    JsonLines,
    /// SenML packs (RFC 8428, JSON): one a line, or one over the whole file.
    Senml,
}

/// A file to be imported.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    /// Where it is.
    pub path: PathBuf,
    /// What it is.
    pub form: Form,
}

impl Form {
    /// What a file's name tells.
    ///
    /// # Errors
    /// What to say, if it tells nothing.
    pub fn of(path: &Path) -> Result<Self, String> {
        let name = path.extension().and_then(std::ffi::OsStr::to_str);
        match name {
            Some("csv" | "tsv") => Ok(Self::Csv),
            Some("jsonl" | "ndjson") => Ok(Self::JsonLines),
            Some("senml") => Ok(Self::Senml),
            _ => Err(format!(
                "{}: the name does not tell the form; say --format csv, json-lines or senml",
                path.display()
            )),
        }
    }
}

impl Source {
    /// The file's name in messages.
    pub(super) fn name(&self) -> String {
        self.path.display().to_string()
    }

    /// The file can't be read.
    pub(super) fn failed(&self, error: std::io::Error) -> ImportError {
        ImportError::File {
            path: self.path.clone(),
            source: error,
        }
    }
}

/// A file that is being read.
pub(super) struct Recording {
    source: Source,
    rows: Rows,
}

enum Rows {
    Csv(Box<Table>),
    JsonLines(Box<JsonLines>),
    Senml(Box<Packs>),
}

impl Recording {
    pub(super) fn open(source: &Source, mapping: &Mapping) -> Result<Self, ImportError> {
        let rows = match source.form {
            Form::Csv => Rows::Csv(Box::new(Table::open(source, mapping)?)),
            Form::JsonLines => Rows::JsonLines(Box::new(JsonLines::open(source, mapping)?)),
            Form::Senml => Rows::Senml(Box::new(Packs::open(source, mapping)?)),
        };
        Ok(Self {
            source: source.clone(),
            rows,
        })
    }

    /// Reads one row, one line, or one piece of a pack, and appends what it holds; `false` after
    /// the last.
    pub(super) fn advance(
        &mut self,
        mapping: &Mapping,
        entries: &mut Vec<Entry>,
        problems: &mut Problems,
    ) -> Result<bool, ImportError> {
        let read = match &mut self.rows {
            Rows::Csv(table) => {
                let read = table.advance(mapping, entries, problems);
                read.map_err(|bad| match bad {
                    BadRow::File(error) => error,
                    other => std::io::Error::other(other),
                })
            }
            Rows::JsonLines(lines) => lines.advance(mapping, entries, problems),
            Rows::Senml(packs) => packs.advance(mapping, entries, problems),
        };
        read.map_err(|error| self.source.failed(error))
    }

    /// The mapped columns that the file is known to have.
    pub(super) fn found(&self) -> Vec<usize> {
        match &self.rows {
            Rows::Csv(table) => table.found().collect(),
            Rows::JsonLines(lines) => lines.found().collect(),
            Rows::Senml(packs) => packs.found().collect(),
        }
    }
}
