//! Which column of a recording is whose value, and how its cells are to be read.

use super::words::{self, Words};
use super::{columns, names, names::Names};
use crate::configuration::{Configuration, Problems};
use crate::payload::{Status, Target};
use holdtrue_engine::setup::{ChannelId, ReferenceKind, Setup};
use holdtrue_engine::time::Duration;
use holdtrue_text::time_form::TimeForm;

/// Which column is whose value. What is called a column here is one of a CSV file, a JSON pointer
/// (or the name of a member) in JSON lines, the resolved name of a record in SenML.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Mapping {
    /// Columns of times; in each file the first that it has counts.
    pub times: Vec<TimeColumn>,
    /// The columns that are imported.
    pub columns: Vec<Column>,
    /// Texts that stand for no value, as an empty cell does.
    pub missing: Vec<String>,
    /// The decimal sign of CSV cells is a comma.
    pub decimal_comma: bool,
    /// What separates CSV cells; by the file's name if it is not told.
    pub separator: Option<u8>,
}

/// A column of times.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct TimeColumn {
    /// The column.
    pub name: String,
    /// How it is written.
    pub form: TimeForm,
    /// By how much the clock behind times without an offset of their own runs ahead of UTC.
    pub ahead: Option<Duration>,
}

/// A column that is imported.
#[derive(Clone, Debug, PartialEq)]
pub struct Column {
    /// The column.
    pub name: String,
    /// Whose value it is.
    pub target: Target,
    /// Another column, which says whether the value is to be used.
    pub status: Option<Status<String>>,
    /// Another column, by which the rows are known that this is about: in a file that has all
    /// sensors in one column, a row each.
    pub only_where: Option<Status<String>>,
}

impl Mapping {
    /// From what the command line says.
    ///
    /// # Errors
    /// Everything that is wrong with it.
    pub fn from_words(words: &Words, configuration: &Configuration) -> Result<Self, Vec<String>> {
        words::read(words, &Names::new(configuration))
    }

    /// From the text of a TOML file; `file` is its name in messages.
    ///
    /// # Errors
    /// Everything that is wrong with it, with line and column.
    pub fn from_toml(
        text: &str,
        file: &str,
        configuration: &Configuration,
    ) -> Result<Self, Problems> {
        columns::read(text, file, &Names::new(configuration))
    }

    /// What a column is, in words.
    #[must_use]
    pub fn shown(&self, column: usize, setup: &Setup) -> String {
        names::shown(&self.columns[column].target, setup)
    }

    /// What the channels need and no column is: without it they make no pairs.
    #[must_use]
    pub fn lacking(&self, setup: &Setup) -> Vec<String> {
        let mapped = |wanted: &Target| self.columns.iter().any(|it| it.target == *wanted);
        let mut lacking = Vec::new();
        for (index, channel) in setup.channels.iter().enumerate() {
            let mut needed = vec![Target::Indication(ChannelId::at(index))];
            let reference = setup.references.get(channel.reference.0 as usize);
            if reference.is_some_and(|reference| reference.kind == ReferenceKind::Measured) {
                needed.push(Target::Reference(channel.reference));
            }
            let influences = channel.influences.iter();
            needed.extend(influences.map(|influence| Target::Influence(influence.source)));
            needed.retain(|target| !mapped(target));
            lacking.extend(needed.iter().map(|target| names::shown(target, setup)));
        }
        lacking.dedup();
        lacking
    }

    /// Whether a text stands for no value.
    pub(super) fn is_missing(&self, text: &str) -> bool {
        text.is_empty() || self.missing.iter().any(|missing| missing == text)
    }
}

/// The two that are the same value by the same rows, if there are any.
pub(super) fn repeated(columns: &[Column]) -> Option<(usize, usize)> {
    let same = |a: &Column, b: &Column| {
        a.name == b.name && a.target == b.target && a.only_where == b.only_where
    };
    (0..columns.len()).find_map(|later| {
        let earlier = (0..later).find(|&earlier| same(&columns[earlier], &columns[later]))?;
        Some((earlier, later))
    })
}
