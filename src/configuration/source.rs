//! One file's text and what was noted while it was read: problems, and the keys asked for.

use super::problem::{Problem, Severity};
use std::cell::RefCell;
use std::collections::BTreeSet;
use std::ops::Range;

/// The text of one file and everything noted while reading it.
pub(crate) struct Source<'text> {
    pub(crate) text: &'text str,
    noted: RefCell<Vec<Noted>>,
    asked: RefCell<BTreeSet<String>>,
}

/// A problem, and whether it is only that something was not there.
struct Noted {
    problem: Problem,
    missing: bool,
}

/// A value with the place where it stands.
#[derive(Clone, Debug)]
pub(crate) struct Found<T> {
    pub(crate) value: T,
    pub(crate) span: Range<usize>,
    pub(crate) key: String,
}

impl<'text> Source<'text> {
    pub(crate) fn new(text: &'text str) -> Self {
        Self {
            text,
            noted: RefCell::default(),
            asked: RefCell::default(),
        }
    }

    pub(crate) fn error(&self, span: &Range<usize>, key: &str, message: impl Into<String>) {
        self.note(Severity::Error, span, key, message.into(), false);
    }

    pub(crate) fn warn(&self, span: &Range<usize>, key: &str, message: impl Into<String>) {
        self.note(Severity::Warning, span, key, message.into(), false);
    }

    pub(crate) fn note(
        &self,
        severity: Severity,
        at: &Range<usize>,
        key: &str,
        message: String,
        missing: bool,
    ) {
        let problem = Problem::at(severity, self.text, at, key, message);
        self.noted.borrow_mut().push(Noted { problem, missing });
    }

    /// Remembers that the parser looks for a key.
    pub(crate) fn ask(&self, key: String) {
        self.asked.borrow_mut().insert(key);
    }

    /// Every key that the parser asked for, without counts: `channel.window`.
    pub(crate) fn asked(&self) -> BTreeSet<String> {
        self.asked.borrow().clone()
    }

    /// Everything noted, in file order, each thing once (a default is read by every channel).
    /// In a file with broken syntax what is missing may stand in the broken part: left out.
    pub(crate) fn into_problems(self, broken: bool) -> Vec<Problem> {
        let noted = self.noted.into_inner().into_iter();
        let mut problems: Vec<Problem> = noted
            .filter(|noted| !(broken && noted.missing))
            .map(|noted| noted.problem)
            .collect();
        problems.sort_by_key(|problem| (problem.line, problem.column));
        let mut seen = BTreeSet::new();
        problems.retain(|p| seen.insert((p.line, p.column, p.key.clone(), p.message.clone())));
        problems
    }
}

impl<T> Found<T> {
    /// The same place with another value.
    pub(crate) fn with<U>(&self, value: U) -> Found<U> {
        Found {
            value,
            span: self.span.clone(),
            key: self.key.clone(),
        }
    }
}
