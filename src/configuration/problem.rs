//! What is wrong with a configuration, and where.

use std::fmt;
use std::ops::Range;

/// How bad a problem is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, serde::Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Severity {
    /// The configuration is refused.
    Error,
    /// Allowed, but probably not what is meant.
    Warning,
}

/// One thing that is wrong.
#[derive(Clone, Debug, PartialEq, Eq, serde::Serialize)]
pub struct Problem {
    /// Error or warning.
    pub severity: Severity,
    /// Line in the file, from 1.
    pub line: usize,
    /// Column in that line in characters, from 1.
    pub column: usize,
    /// The key it is about, e.g. `channel[2].window`; empty for the file as a whole.
    pub key: String,
    /// What is wrong, the value, and the way out.
    pub message: String,
}

/// Everything that is wrong with one file: at least one error, and the warnings, in file order.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problems {
    /// The file's name as it was given.
    pub file: String,
    /// The problems in file order.
    pub list: Vec<Problem>,
}

impl Problem {
    /// A problem at a byte range of `text`.
    pub(crate) fn at(
        severity: Severity,
        text: &str,
        span: &Range<usize>,
        key: &str,
        message: String,
    ) -> Self {
        let (line, column) = position(text, span.start);
        Self {
            severity,
            line,
            column,
            key: key.to_owned(),
            message,
        }
    }

    /// One line for a person: `file:line:column: error: key: message`.
    #[must_use]
    pub fn line_for(&self, file: &str) -> String {
        let word = match self.severity {
            Severity::Error => "error",
            Severity::Warning => "warning",
        };
        let key = if self.key.is_empty() {
            String::new()
        } else {
            format!("{}: ", self.key)
        };
        format!(
            "{file}:{}:{}: {word}: {key}{}",
            self.line, self.column, self.message
        )
    }
}

impl fmt::Display for Problems {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (index, problem) in self.list.iter().enumerate() {
            if index > 0 {
                writeln!(out)?;
            }
            write!(out, "{}", problem.line_for(&self.file))?;
        }
        Ok(())
    }
}

impl std::error::Error for Problems {}

/// Line and column, both from 1, of a byte offset; columns count characters, as editors do.
fn position(text: &str, offset: usize) -> (usize, usize) {
    let mut end = offset.min(text.len());
    while !text.is_char_boundary(end) {
        end -= 1;
    }
    let before = &text[..end];
    let line_start = before.rfind('\n').map_or(0, |newline| newline + 1);
    let line = before.matches('\n').count() + 1;
    (line, before[line_start..].chars().count() + 1)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn positions_count_characters_from_one() {
        let text = "a = 1\nµ = \"°C\"\n";
        assert_eq!(position(text, 0), (1, 1));
        assert_eq!(position(text, 6), (2, 1));
        assert_eq!(position(text, 9), (2, 3), "µ is one character of two bytes");
        assert_eq!(position(text, 10_000), (3, 1), "past the end is the end");
        assert_eq!(
            position(text, 7),
            (2, 1),
            "inside a character is its beginning"
        );
    }

    #[test]
    fn a_line_names_file_place_key_and_message() {
        let message = "is not a duration".to_owned();
        let problem = Problem::at(
            Severity::Warning,
            "\n window = 3",
            &(2..8),
            "window",
            message,
        );
        assert_eq!(
            problem.line_for("a.toml"),
            "a.toml:2:2: warning: window: is not a duration"
        );
    }
}
