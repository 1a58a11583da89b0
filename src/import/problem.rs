//! What in a recording can't be read, with file, line, column, value and the way out.

use std::fmt;

/// So many are named; further ones are only counted.
const NAMED_MAX: usize = 20;

/// One thing that can't be read.
#[derive(Clone, Debug, PartialEq, Eq, serde::Serialize)]
pub struct Problem {
    /// The file as it was given.
    pub file: String,
    /// Line in the file, from 1.
    pub line: u64,
    /// The column, JSON pointer or record; empty for the line as a whole.
    pub column: String,
    /// What stands there, shortened and in quotes; empty if the message shows it.
    pub value: String,
    /// What is wrong, and the way out.
    pub message: String,
}

/// What can't be read, the first of it by name.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Problems {
    /// The first ones, in the order in which they were met.
    pub named: Vec<Problem>,
    /// All of them.
    pub count: u64,
}

impl Problems {
    /// Notes one; it is only made where it is kept.
    pub fn note(&mut self, problem: impl FnOnce() -> Problem) {
        self.count += 1;
        if self.named.len() < NAMED_MAX {
            self.named.push(problem());
        }
    }
}

impl fmt::Display for Problem {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "{}:{}: ", self.file, self.line)?;
        if !self.column.is_empty() {
            write!(out, "{}: ", self.column)?;
        }
        if !self.value.is_empty() {
            write!(out, "{} ", self.value)?;
        }
        out.write_str(&self.message)
    }
}

impl fmt::Display for Problems {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (index, problem) in self.named.iter().enumerate() {
            if index > 0 {
                writeln!(out)?;
            }
            write!(out, "{problem}")?;
        }
        match self.count - self.named.len() as u64 {
            0 => Ok(()),
            more => write!(out, "\n… and {more} more"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn many_problems_are_counted_and_some_named() {
        let mut problems = Problems::default();
        for line in 1..=50 {
            problems.note(|| Problem {
                file: "a.csv".to_owned(),
                line,
                column: "pH".to_owned(),
                value: "\"x\"".to_owned(),
                message: "is not a number".to_owned(),
            });
        }
        let told = problems.to_string();
        assert!(told.starts_with("a.csv:1: pH: \"x\" is not a number\na.csv:2: "));
        assert!(told.ends_with("\n… and 30 more"), "{told}");
        assert_eq!(told.lines().count(), NAMED_MAX + 1);
    }
}
