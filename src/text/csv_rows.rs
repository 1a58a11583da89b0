//! A CSV file row by row: a header line, then cells by their column.

use csv::{ByteRecord, Reader, ReaderBuilder, Trim};
use std::fs::File;
use std::io::{self, BufRead, BufReader, Read, Seek, SeekFrom};
use std::path::Path;

/// The first line ends within so many bytes, or how it ends does not matter.
const FIRST_LINE_MAX: u64 = 1 << 20;

/// The rows of a CSV file in its order.
pub struct CsvRows {
    reader: Reader<File>,
    columns: Vec<String>,
    row: ByteRecord,
    line: u64,
    ends: Ends,
}

/// How the file ends its lines, without which the parser's own count of them can't be understood.
struct Ends {
    /// With CR and LF. Of these the parser takes LF for the beginning of the next row.
    carriage_return: bool,
    /// Bytes in the file, if its last line has no end.
    open_at: Option<u64>,
}

/// Why a row can't be used; the next one may, except after [`BadRow::File`].
#[derive(Debug, thiserror::Error)]
pub enum BadRow {
    /// The file can't be read on.
    #[error(transparent)]
    File(#[from] io::Error),
    /// More or fewer cells than the header has.
    #[error("has {found} cells where the header has {expected}")]
    Cells {
        /// How many it has.
        found: u64,
        /// How many it should have.
        expected: u64,
    },
    /// Anything else that the format does not allow.
    #[error("{0}")]
    Form(String),
}

impl CsvRows {
    /// Opens a file and reads its header.
    ///
    /// # Errors
    /// If it can't be opened or read.
    pub fn open(path: &Path, separator: u8) -> io::Result<Self> {
        let ends = Ends::of(path)?;
        let mut reader = ReaderBuilder::new()
            .delimiter(separator)
            .trim(Trim::All)
            .buffer_capacity(1 << 16)
            .from_reader(File::open(path)?);
        let header = reader.byte_headers().map_err(io::Error::other)?;
        // A byte order mark, which spreadsheets write, is no part of the first name.
        let columns = header
            .iter()
            .map(|name| {
                let name = String::from_utf8_lossy(name);
                name.trim_start_matches('\u{feff}').trim().to_owned()
            })
            .collect();
        Ok(Self {
            reader,
            columns,
            row: ByteRecord::new(),
            line: 0,
            ends,
        })
    }

    /// The names in the header.
    #[must_use]
    pub fn columns(&self) -> &[String] {
        &self.columns
    }

    /// Position of a column by its name.
    #[must_use]
    pub fn position(&self, column: &str) -> Option<usize> {
        self.columns.iter().position(|known| known == column)
    }

    /// The line on which the row read last begins, from 1.
    #[must_use]
    pub fn line(&self) -> u64 {
        self.line
    }

    /// Goes to the next row; `false` after the last.
    ///
    /// # Errors
    /// Why the row that follows can't be used.
    pub fn advance(&mut self) -> Result<bool, BadRow> {
        let read = self.reader.read_byte_record(&mut self.row);
        let within = self.row.as_slice().iter().filter(|byte| **byte == b'\n');
        let last = self.ends.last_line(self.reader.position());
        self.line = last.saturating_sub(within.count() as u64);
        read.map_err(|error| match error.into_kind() {
            csv::ErrorKind::Io(cause) => BadRow::File(cause),
            csv::ErrorKind::UnequalLengths {
                expected_len, len, ..
            } => BadRow::Cells {
                found: len,
                expected: expected_len,
            },
            other => BadRow::Form(format!("{other:?}")),
        })
    }

    /// A cell of this row; empty if there is none at that position.
    ///
    /// # Errors
    /// With what can be shown of it, if it is not UTF-8.
    pub fn cell(&self, position: usize) -> Result<&str, String> {
        let bytes = self.row.get(position).unwrap_or_default();
        std::str::from_utf8(bytes).map_err(|_| String::from_utf8_lossy(bytes).into_owned())
    }
}

impl Ends {
    fn of(path: &Path) -> io::Result<Self> {
        let mut file = BufReader::new(File::open(path)?);
        let mut first = Vec::new();
        let mut beginning = file.by_ref().take(FIRST_LINE_MAX);
        beginning.read_until(b'\n', &mut first)?;
        let bytes = file.seek(SeekFrom::End(0))?;
        let mut last = [b'\n'];
        if bytes > 0 {
            file.seek(SeekFrom::End(-1))?;
            file.read_exact(&mut last)?;
        }
        Ok(Self {
            carriage_return: first.ends_with(b"\r\n"),
            open_at: (last != [b'\n']).then_some(bytes),
        })
    }

    /// The line on which the row that was just read ends; `here`: where the parser is.
    fn last_line(&self, here: &csv::Position) -> u64 {
        let ended = !self.carriage_return && self.open_at != Some(here.byte());
        here.line().saturating_sub(u64::from(ended))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn open(bytes: &[u8]) -> CsvRows {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("rows.csv");
        std::fs::write(&path, bytes).unwrap();
        CsvRows::open(&path, b';').unwrap()
    }

    #[test]
    fn cells_are_found_by_their_column() {
        let mut rows = open(b"\xef\xbb\xbfat; pH ;note\r\n1;7.25;\"a;b\nc\"\r\n\r\n2; ;\r\n");
        assert_eq!(rows.columns(), ["at", "pH", "note"]);
        assert_eq!((rows.position("pH"), rows.position("ph")), (Some(1), None));
        assert!(rows.advance().unwrap());
        assert_eq!((rows.line(), rows.cell(1)), (2, Ok("7.25")));
        assert_eq!(rows.cell(2), Ok("a;b\nc"));
        assert!(rows.advance().unwrap());
        assert_eq!((rows.cell(0), rows.cell(1)), (Ok("2"), Ok("")));
        assert_eq!(rows.line(), 5, "two lines in quotes, one empty");
        assert!(!rows.advance().unwrap());
    }

    #[test]
    fn lines_are_counted_however_they_end() {
        for (text, lines) in [
            ("a;b\n1;2\n3;4\n", [2, 3]),
            ("a;b\n1;2\n3;4", [2, 3]),
            ("a;b\r\n1;2\r\n3;4\r\n", [2, 3]),
            ("a;b\r\n1;2\r\n3;4", [2, 3]),
            ("a;b\n\n\n1;\"x\ny\"\n\n3;4", [4, 7]),
        ] {
            let mut rows = open(text.as_bytes());
            let mut found = Vec::new();
            while rows.advance().unwrap() {
                found.push(rows.line());
            }
            assert_eq!(found, lines, "{text:?}");
        }
    }

    #[test]
    fn a_bad_row_does_not_end_the_file() {
        let mut rows = open(b"at;pH\n1\n2;\xff\n3;7\n");
        let short = rows.advance().unwrap_err().to_string();
        assert_eq!(short, "has 1 cells where the header has 2");
        assert_eq!(rows.line(), 2);
        assert!(rows.advance().unwrap());
        assert!(rows.cell(1).is_err());
        assert!(rows.advance().unwrap());
        assert_eq!((rows.line(), rows.cell(1)), (4, Ok("7")));
    }
}
