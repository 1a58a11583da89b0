//! A text file line by line, each line bounded, without keeping more than one.

use std::fs::File;
use std::io::{self, BufRead, BufReader, Read};
use std::path::Path;

/// Longest line that is read, bytes. A longer one is no line of a recording.
pub const LINE_MAX: usize = 16 * 1024 * 1024;

/// The lines of a file that are not blank.
pub struct Lines {
    reader: BufReader<File>,
    line: u64,
    text: Vec<u8>,
}

/// Why a line can't be used; the next one may.
#[derive(Debug, thiserror::Error)]
pub enum BadLine {
    /// The file can't be read on.
    #[error(transparent)]
    File(#[from] io::Error),
    /// Not text.
    #[error("is not UTF-8")]
    NotText,
    /// Longer than [`LINE_MAX`].
    #[error("is longer than {LINE_MAX} bytes")]
    TooLong,
}

impl Lines {
    /// Opens a file.
    ///
    /// # Errors
    /// If it can't be opened.
    pub fn open(path: &Path) -> io::Result<Self> {
        Ok(Self {
            reader: BufReader::with_capacity(1 << 16, File::open(path)?),
            line: 0,
            text: Vec::new(),
        })
    }

    /// The number of the line read last, from 1.
    #[must_use]
    pub fn line(&self) -> u64 {
        self.line
    }

    /// The next line that is not blank, without its end; `None` after the last.
    ///
    /// # Errors
    /// Why the line that follows can't be used.
    pub fn advance(&mut self) -> Result<Option<&str>, BadLine> {
        loop {
            self.text.clear();
            let mut piece = self.reader.by_ref().take(LINE_MAX as u64);
            if piece.read_until(b'\n', &mut self.text)? == 0 {
                return Ok(None);
            }
            self.line += 1;
            if self.text.len() == LINE_MAX && !self.text.ends_with(b"\n") {
                self.reader.skip_until(b'\n')?;
                return Err(BadLine::TooLong);
            }
            // A byte order mark, which spreadsheets write, is no part of the first line.
            if self.line == 1 && self.text.starts_with(b"\xef\xbb\xbf") {
                self.text.drain(..3);
            }
            if !self.text.trim_ascii().is_empty() {
                break;
            }
        }
        let text = std::str::from_utf8(self.text.trim_ascii_end());
        text.map(Some).map_err(|_| BadLine::NotText)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn lines(bytes: &[u8]) -> Vec<(u64, Result<String, String>)> {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("lines");
        std::fs::write(&path, bytes).unwrap();
        let mut lines = Lines::open(&path).unwrap();
        let mut found = Vec::new();
        loop {
            let next = match lines.advance() {
                Ok(None) => break found,
                Ok(Some(text)) => Ok(text.to_owned()),
                Err(why) => Err(why.to_string()),
            };
            found.push((lines.line(), next));
        }
    }

    #[test]
    fn blank_lines_are_passed_over_and_counted() {
        let found = lines(b"\xef\xbb\xbf{\"a\":1}\r\n\n  \n{\"b\":2}");
        let text = |text: &str| Ok(text.to_owned());
        assert_eq!(found, [(1, text("{\"a\":1}")), (4, text("{\"b\":2}"))]);
    }

    #[test]
    fn a_line_that_is_no_text_does_not_end_the_file() {
        let found = lines(b"a\n\xff\nb\n");
        assert_eq!(found[0].1.as_deref(), Ok("a"));
        assert!(found[1].1.is_err());
        assert_eq!(found[2], (3, Ok("b".to_owned())));
    }

    #[test]
    fn an_endless_line_is_refused_and_passed_over() {
        let mut bytes = vec![b'x'; LINE_MAX + 5];
        bytes.extend_from_slice(b"\nlast\n");
        let found = lines(&bytes);
        assert!(found[0].1.as_ref().unwrap_err().contains("longer"));
        assert_eq!(found[1..], [(2, Ok("last".to_owned()))]);
    }
}
