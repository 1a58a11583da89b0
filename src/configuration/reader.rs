//! One table of the TOML tree with positions: typed access that notes every problem and goes on,
//! and notices keys that nobody asked for.
//!
//! A getter that finds something unusable notes the problem and answers as if the key were absent,
//! so that reading goes on and all problems are found at once. Whoever reads must look at
//! [`Source::into_problems`] before using what was read.

use super::problem::Severity;
use super::source::{Found, Source};
use crate::payload::Scalar;
use holdtrue_engine::time::Duration;
use std::cell::RefCell;
use std::collections::BTreeSet;
use std::ops::{Range, RangeInclusive};
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Two keys at least this much alike (Jaro-Winkler, 0 … 1) are taken for a slip of the pen.
pub(crate) const ALIKE: f64 = 0.82;

/// One table of the file.
pub(crate) struct Section<'source> {
    source: &'source Source<'source>,
    /// As it is shown: `channel[2].indication`.
    path: String,
    /// The same without counts: `channel.indication`.
    kind: String,
    span: Range<usize>,
    table: &'source DeTable<'source>,
    /// Where to look for a key that this table does not set.
    defaults: Option<&'source Section<'source>>,
    known: RefCell<BTreeSet<&'static str>>,
}

impl<'source> Section<'source> {
    /// The whole file as one section.
    pub(crate) fn top(
        source: &'source Source<'source>,
        table: &'source Spanned<DeTable<'source>>,
    ) -> Self {
        Self {
            source,
            path: String::new(),
            kind: String::new(),
            span: 0..0,
            table: table.get_ref(),
            defaults: None,
            known: RefCell::default(),
        }
    }

    /// Keys that are absent here are looked up there.
    pub(crate) fn with_defaults(mut self, defaults: Option<&'source Section<'source>>) -> Self {
        self.defaults = defaults;
        self
    }

    pub(crate) fn path(&self) -> &str {
        &self.path
    }

    pub(crate) fn source(&self) -> &'source Source<'source> {
        self.source
    }

    /// Notes an error about the section as a whole.
    pub(crate) fn error(&self, message: impl Into<String>) {
        self.source.error(&self.span, &self.path, message);
    }

    /// Notes an error about a value in it.
    pub(crate) fn wrong<T>(&self, found: &Found<T>, message: impl Into<String>) {
        self.source.error(&found.span, &found.key, message);
    }

    /// Notes that a key should be there.
    pub(crate) fn missing(&self, key: &'static str, advice: &str) {
        let path = self.path_of(key);
        let message = format!("is missing; {advice}");
        self.source
            .note(Severity::Error, &self.span, &path, message, true);
    }

    /// Whether the key is set here (or by default).
    pub(crate) fn has(&self, key: &'static str) -> bool {
        self.value(key).is_some()
    }

    /// The place of a key, for problems that come out later.
    pub(crate) fn place(&self, key: &'static str) -> Option<Found<()>> {
        self.value(key).map(|found| found.with(()))
    }

    pub(crate) fn text(&self, key: &'static str) -> Option<Found<&'source str>> {
        let found = self.value(key)?;
        let text = found.value.as_str();
        self.typed(&found, text, "a text in quotes")
    }

    /// A text that must be there.
    pub(crate) fn need_text(&self, key: &'static str, advice: &str) -> Option<Found<&'source str>> {
        if !self.has(key) {
            self.missing(key, advice);
        }
        self.text(key)
    }

    /// Whether the key holds a text (and not a table, where both are allowed).
    pub(crate) fn is_text(&self, key: &'static str) -> bool {
        self.value(key).is_some_and(|found| found.value.is_str())
    }

    /// A date or date-time, as a TOML date or in quotes.
    pub(crate) fn date(&self, key: &'static str) -> Option<Found<String>> {
        let found = self.value(key)?;
        let text = match found.value {
            DeValue::Datetime(date) => Some(date.to_string()),
            other => other.as_str().map(str::to_owned),
        };
        self.typed(&found, text, "a date, as \"2027-06-30\"")
    }

    pub(crate) fn truth(&self, key: &'static str) -> Option<Found<bool>> {
        let found = self.value(key)?;
        self.typed(&found, found.value.as_bool(), "true or false")
    }

    /// A finite number, with or without a decimal point.
    pub(crate) fn number(&self, key: &'static str) -> Option<Found<f64>> {
        let found = self.value(key)?;
        self.typed(&found, number(found.value), "a finite number")
    }

    /// A number within bounds; `unit` explains them.
    pub(crate) fn number_in(
        &self,
        key: &'static str,
        allowed: impl Fn(f64) -> bool,
        wanted: &str,
    ) -> Option<Found<f64>> {
        let found = self.number(key)?;
        if allowed(found.value) {
            return Some(found);
        }
        self.wrong(&found, format!("{} is not {wanted}", found.value));
        None
    }

    pub(crate) fn integer_in<N: TryFrom<i64> + std::fmt::Display + PartialOrd>(
        &self,
        key: &'static str,
        allowed: RangeInclusive<N>,
    ) -> Option<Found<N>> {
        let found = self.value(key)?;
        let wanted = format!(
            "a whole number from {} to {}",
            allowed.start(),
            allowed.end()
        );
        let within = integer(found.value)
            .and_then(|integer| N::try_from(integer).ok())
            .filter(|integer| allowed.contains(integer));
        self.typed(&found, within, &wanted)
    }

    /// A length of time, not negative.
    pub(crate) fn duration(&self, key: &'static str) -> Option<Found<Duration>> {
        let found = self.signed_duration(key)?;
        if found.value < Duration::ZERO {
            self.wrong(&found, "must not be negative");
            return None;
        }
        Some(found)
    }

    /// A length of time longer than zero.
    pub(crate) fn positive_duration(&self, key: &'static str) -> Option<Found<Duration>> {
        let found = self.duration(key)?;
        if found.value == Duration::ZERO {
            self.wrong(&found, "must be longer than zero");
            return None;
        }
        Some(found)
    }

    pub(crate) fn signed_duration(&self, key: &'static str) -> Option<Found<Duration>> {
        let found = self.value(key)?;
        let text = found.value.as_str();
        let text = self.typed(
            &found,
            text,
            "a length of time in quotes, as \"10 s\" or \"30 d\"",
        )?;
        match super::quantity::duration(text.value) {
            Ok(duration) => Some(found.with(duration)),
            Err(message) => {
                self.wrong(&found, message);
                None
            }
        }
    }

    /// One of a few words.
    pub(crate) fn choice<T: Clone>(
        &self,
        key: &'static str,
        choices: &[(&str, T)],
    ) -> Option<Found<T>> {
        let found = self.text(key)?;
        let chosen = choices.iter().find(|(word, _)| *word == found.value);
        if chosen.is_none() {
            let words: Vec<String> = choices
                .iter()
                .map(|(word, _)| format!("\"{word}\""))
                .collect();
            let words = words.join(" or ");
            self.wrong(
                &found,
                format!("\"{}\" is not known; write {words}", found.value),
            );
        }
        chosen.map(|(_, value)| found.with(value.clone()))
    }

    /// A list of texts.
    pub(crate) fn texts(&self, key: &'static str) -> Vec<Found<&'source str>> {
        self.list(key, "a list of texts", |value| value.as_str())
    }

    /// A list of numbers.
    pub(crate) fn numbers(&self, key: &'static str) -> Vec<Found<f64>> {
        self.list(key, "a list of finite numbers", number)
    }

    /// A list of texts, numbers and truth values.
    pub(crate) fn scalars(&self, key: &'static str) -> Vec<Found<Scalar>> {
        self.list(
            key,
            "a list of texts, numbers, true or false",
            |value| match value {
                DeValue::String(text) => Some(Scalar::Text(text.as_ref().to_owned())),
                DeValue::Boolean(truth) => Some(Scalar::Truth(*truth)),
                other => number(other).map(Scalar::Number),
            },
        )
    }

    fn list<T>(
        &self,
        key: &'static str,
        wanted: &str,
        read: impl Fn(&'source DeValue<'source>) -> Option<T>,
    ) -> Vec<Found<T>> {
        let Some(found) = self.value(key) else {
            return Vec::new();
        };
        let Some(list) = self.typed(&found, found.value.as_array(), wanted) else {
            return Vec::new();
        };
        let elements = list.value.iter().filter_map(|element| {
            let at = Found {
                value: element.get_ref(),
                span: element.span(),
                key: found.key.clone(),
            };
            self.typed(&at, read(at.value), wanted)
        });
        elements.collect()
    }

    /// A table in it, `[key]` or `key = { … }`.
    pub(crate) fn section(&self, key: &'static str) -> Option<Section<'source>> {
        let found = self.value(key)?;
        let table = self.typed(&found, found.value.as_table(), "a table")?;
        Some(self.below(key, found.key.clone(), found.span, table.value))
    }

    /// All tables of a list of tables, `[[key]]`.
    pub(crate) fn sections(&self, key: &'static str) -> Vec<Section<'source>> {
        let Some(found) = self.value(key) else {
            return Vec::new();
        };
        let wanted = format!("a list of tables, each begun by [[{key}]]");
        let Some(list) = self.typed(&found, found.value.as_array(), &wanted) else {
            return Vec::new();
        };
        let mut sections = Vec::new();
        for (index, element) in list.value.iter().enumerate() {
            let path = format!("{}[{}]", found.key, index + 1);
            let at = Found {
                value: element.get_ref(),
                span: element.span(),
                key: path.clone(),
            };
            if let Some(table) = self.typed(&at, at.value.as_table(), "a table") {
                sections.push(self.below(key, path, at.span, table.value));
            }
        }
        sections
    }

    fn below(
        &self,
        key: &'static str,
        path: String,
        span: Range<usize>,
        table: &'source DeTable<'source>,
    ) -> Section<'source> {
        Section {
            source: self.source,
            path,
            kind: joined(&self.kind, key),
            span,
            table,
            defaults: None,
            known: RefCell::default(),
        }
    }

    /// Notes every key that nobody has asked for.
    pub(crate) fn finish(&self) {
        let known = self.known.borrow();
        for name in self.table.keys() {
            let word = name.get_ref().as_ref();
            if known.contains(word) {
                continue;
            }
            let nearest = known
                .iter()
                .map(|known| (strsim::jaro_winkler(known, word), known))
                .filter(|(likeness, _)| *likeness >= ALIKE)
                .max_by(|a, b| a.0.total_cmp(&b.0));
            let advice = match nearest {
                Some((_, nearest)) => format!("did you mean {nearest}?"),
                None => {
                    format!(
                        "known here: {}",
                        known.iter().copied().collect::<Vec<_>>().join(", ")
                    )
                }
            };
            let path = joined(&self.path, word);
            self.source
                .error(&name.span(), &path, format!("unknown key; {advice}"));
        }
    }

    /// The value of a key, from here or from the defaults.
    fn value(&self, key: &'static str) -> Option<Found<&'source DeValue<'source>>> {
        self.known.borrow_mut().insert(key);
        self.source.ask(joined(&self.kind, key));
        match self.table.get(key) {
            Some(value) => Some(Found {
                value: value.get_ref(),
                span: value.span(),
                key: self.path_of(key),
            }),
            None => self.defaults?.value(key),
        }
    }

    fn path_of(&self, key: &str) -> String {
        joined(&self.path, key)
    }

    /// Notes it when a value has not the wanted type.
    fn typed<A, T>(&self, found: &Found<A>, value: Option<T>, wanted: &str) -> Option<Found<T>> {
        if value.is_none() {
            let shown: String = self.source.text[found.span.clone()]
                .chars()
                .take(40)
                .collect();
            self.wrong(
                found,
                format!("{} is not {wanted}", shown.replace('\n', " ")),
            );
        }
        value.map(|value| found.with(value))
    }
}

fn joined(path: &str, key: &str) -> String {
    if path.is_empty() {
        key.to_owned()
    } else {
        format!("{path}.{key}")
    }
}

fn integer(value: &DeValue<'_>) -> Option<i64> {
    let integer = value.as_integer()?;
    i64::from_str_radix(integer.as_str(), integer.radix()).ok()
}

fn number(value: &DeValue<'_>) -> Option<f64> {
    let number = match value {
        DeValue::Integer(_) => integer(value)? as f64,
        DeValue::Float(float) => float.as_str().parse().ok()?,
        _ => return None,
    };
    number.is_finite().then_some(number)
}
