//! One file's text and what was noted while it was read: problems, and the keys asked for.

use super::problem::{Problem, Severity};
use std::cell::RefCell;
use std::collections::BTreeSet;
use std::ops::Range;

/// The text of one file and everything noted while reading it.
pub(super) struct Source<'text> {
    pub(super) text: &'text str,
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
pub(super) struct Found<T> {
    pub(super) value: T,
    pub(super) span: Range<usize>,
    pub(super) key: String,
}

impl<'text> Source<'text> {
    pub(super) fn new(text: &'text str) -> Self {
        Self {
            text,
            noted: RefCell::default(),
            asked: RefCell::default(),
        }
    }

    pub(super) fn error(&self, span: &Range<usize>, key: &str, message: impl Into<String>) {
        self.note(Severity::Error, span, key, message.into(), false);
    }

    pub(super) fn warn(&self, span: &Range<usize>, key: &str, message: impl Into<String>) {
        self.note(Severity::Warning, span, key, message.into(), false);
    }

    pub(super) fn note(
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
    pub(super) fn ask(&self, key: String) {
        self.asked.borrow_mut().insert(key);
    }

    /// Every key that the parser asked for, without counts: `channel.window`.
    pub(super) fn asked(&self) -> BTreeSet<String> {
        self.asked.borrow().clone()
    }

    /// Everything noted, in file order, each thing once (a default is read by every channel).
    /// In a file with broken syntax what is missing may stand in the broken part: left out.
    pub(super) fn into_problems(self, broken: bool) -> Vec<Problem> {
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
    pub(super) fn with<U>(&self, value: U) -> Found<U> {
        Found {
            value,
            span: self.span.clone(),
            key: self.key.clone(),
        }
    }
}
