//! JSON arrays cut into their elements while they are read: one array over a whole file, one a
//! line, or one behind the other. Only one element is kept.

use holdtrue_text::lines::LINE_MAX;
use std::fs::File;
use std::io::{self, BufRead, BufReader};
use std::path::Path;

/// A file of arrays that is being read.
pub(super) struct Scan {
    reader: BufReader<File>,
    line: u64,
    state: State,
    element: Vec<u8>,
    /// Where the element begins.
    element_line: u64,
}

/// Where the reading stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum State {
    /// Outside any array.
    Between,
    /// Behind `[`.
    First,
    /// Behind an element.
    Behind,
    /// Behind a comma.
    Next,
    /// Nothing more can be read.
    Ended,
}

/// What comes next.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Piece {
    /// An element: [`Scan::element`].
    Element,
    /// The end of an array.
    End,
    /// Something that does not belong there; the array it stands in is lost.
    Bad(&'static str),
    /// The end of the file.
    EndOfFile,
}

impl Scan {
    pub(super) fn open(path: &Path) -> io::Result<Self> {
        Ok(Self {
            reader: BufReader::with_capacity(1 << 16, File::open(path)?),
            line: 1,
            state: State::Between,
            element: Vec::new(),
            element_line: 1,
        })
    }

    /// The text of the element that was read last, and the line on which it begins. (What is not
    /// UTF-8 is no JSON, and is found to be none.)
    pub(super) fn element(&self) -> (u64, std::borrow::Cow<'_, str>) {
        (self.element_line, String::from_utf8_lossy(&self.element))
    }

    /// The line that is being read.
    pub(super) fn line(&self) -> u64 {
        self.line
    }

    /// Reads on.
    pub(super) fn advance(&mut self) -> io::Result<Piece> {
        loop {
            let Some(byte) = self.peek()? else {
                let inside = !matches!(self.state, State::Between | State::Ended);
                self.state = State::Ended;
                return Ok(if inside {
                    Piece::Bad("the array has no end")
                } else {
                    Piece::EndOfFile
                });
            };
            let (next, piece) = match (self.state, byte) {
                (State::Ended, _) => return Ok(Piece::EndOfFile),
                (state, b' ' | b'\t' | b'\r' | b'\n') => (state, None),
                (State::Between, b'[') => (State::First, None),
                (State::First | State::Behind, b']') => (State::Between, Some(Piece::End)),
                (State::Behind, b',') => (State::Next, None),
                (State::First | State::Next, other) if !matches!(other, b',' | b']') => {
                    return self.read_element();
                }
                (State::Between, _) => return self.skip_line("an array, [ … ], must begin here"),
                _ => return self.skip_line("a comma, ] or an element must stand here"),
            };
            self.bump(byte);
            self.state = next;
            if let Some(piece) = piece {
                return Ok(piece);
            }
        }
    }

    /// Reads an element up to the comma or bracket behind it.
    fn read_element(&mut self) -> io::Result<Piece> {
        self.element.clear();
        self.element_line = self.line;
        let (mut depth, mut in_text, mut escaped) = (0_u32, false, false);
        while let Some(byte) = self.peek()? {
            match byte {
                _ if escaped => escaped = false,
                b'\\' if in_text => escaped = true,
                b'"' => in_text = !in_text,
                _ if in_text => {}
                b'{' | b'[' => depth = depth.saturating_add(1),
                b',' | b']' if depth == 0 => {
                    self.state = State::Behind;
                    return Ok(Piece::Element);
                }
                b'}' | b']' => depth = depth.saturating_sub(1),
                _ => {}
            }
            self.bump(byte);
            self.element.push(byte);
            if self.element.len() > LINE_MAX {
                self.state = State::Ended;
                return Ok(Piece::Bad("an element is longer than any record"));
            }
        }
        self.state = State::Ended;
        Ok(Piece::Bad("the array has no end"))
    }

    /// Gives up the array and looks for another one on the next line.
    fn skip_line(&mut self, why: &'static str) -> io::Result<Piece> {
        self.state = State::Between;
        self.reader.skip_until(b'\n')?;
        self.line += 1;
        Ok(Piece::Bad(why))
    }

    fn peek(&mut self) -> io::Result<Option<u8>> {
        Ok(self.reader.fill_buf()?.first().copied())
    }

    fn bump(&mut self, byte: u8) {
        self.reader.consume(1);
        self.line += u64::from(byte == b'\n');
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn pieces(text: &str) -> Vec<String> {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("packs");
        std::fs::write(&path, text).unwrap();
        let mut scan = Scan::open(&path).unwrap();
        let mut found = Vec::new();
        loop {
            found.push(match scan.advance().unwrap() {
                Piece::EndOfFile => break found,
                Piece::End => "]".to_owned(),
                Piece::Bad(why) => format!("bad: {why}"),
                Piece::Element => {
                    let (line, text) = scan.element();
                    format!("{line} {}", text.trim())
                }
            });
        }
    }

    #[test]
    fn arrays_are_cut_wherever_they_stand() {
        let one = pieces("[{\"a\":[1,2]},\n {\"b\":\"],\\\"[\"}\n]\n");
        assert_eq!(one, ["1 {\"a\":[1,2]}", "2 {\"b\":\"],\\\"[\"}", "]"]);
        let lines = pieces("[{}]\n\n[]\n[1, 2] [3]");
        assert_eq!(lines, ["1 {}", "]", "]", "4 1", "4 2", "]", "4 3", "]"]);
        assert_eq!(pieces(""), Vec::<String>::new());
    }

    #[test]
    fn what_does_not_belong_is_told_and_the_next_line_is_read() {
        let found = pieces("{\"a\":1}\n[1,,2]\n[,]\n[3,]\n[1\n");
        assert_eq!(found[0], "bad: an array, [ … ], must begin here");
        assert_eq!(found[1], "2 1");
        assert!(found[2].starts_with("bad: a comma"), "{found:?}");
        assert!(found[3].starts_with("bad: a comma"), "{found:?}");
        assert_eq!(found[4], "4 3");
        assert!(found[5].starts_with("bad: a comma"), "{found:?}");
        assert_eq!(found[6..], ["bad: the array has no end"]);
    }
}
