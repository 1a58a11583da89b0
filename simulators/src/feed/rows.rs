//! Rows turned into messages; what is left out, with reasons.

use super::FeedError;
use super::field::{Constant, Field, Kind};
use super::table::Table;
use crate::message::{Message, time_text};
use holdtrue_engine::time::{Duration, Timestamp};
use holdtrue_text::time_form::TimeForm;
use serde_json::{Map, Number, Value};

/// Reasons kept for the report; further ones are only counted.
const REASONS_MAX: usize = 10;
/// Times without an offset of their own are taken as UTC.
const IN_UTC: Option<Duration> = Some(Duration::ZERO);

/// How rows become messages.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Mapping {
    /// Topic; `{column}` stands for a cell of the row.
    pub topic: String,
    /// Columns that become members; empty: all that the topic does not use, numbers where they read
    /// as numbers.
    pub fields: Vec<Field>,
    /// Members that every payload gets.
    pub constants: Vec<Constant>,
    /// How times are read; RFC 3339 by default.
    pub time_form: Option<TimeForm>,
}

impl Mapping {
    /// Refuses a mapping that does not fit the file, or a topic that can't be one.
    ///
    /// # Errors
    /// Says what does not fit.
    pub fn check(&self, table: &Table) -> Result<(), FeedError> {
        if self.topic.is_empty() || self.topic.contains(['+', '#']) {
            return Err(FeedError::Usage(format!(
                "{:?} is not a topic to publish to",
                self.topic
            )));
        }
        let columns = self.fields.iter().map(|field| field.column.as_str());
        columns
            .chain(self.topic_columns())
            .try_for_each(|column| table.require(column))
    }

    /// The columns that the topic names.
    fn topic_columns(&self) -> impl Iterator<Item = &str> {
        self.topic
            .split('{')
            .skip(1)
            .filter_map(|rest| rest.split_once('}'))
            .map(|(name, _)| name)
    }

    /// The message of one row.
    fn message(&self, cells: &Map<String, Value>) -> Result<Message, String> {
        let mut topic = self.topic.clone();
        for column in self.topic_columns() {
            topic = topic.replace(&format!("{{{column}}}"), &text(cell(cells, column)?));
        }
        if topic.contains(['+', '#']) {
            return Err(format!("{topic:?} is not a topic to publish to"));
        }
        let mut at = None;
        let mut payload = Map::new();
        if self.fields.is_empty() {
            payload = self.all_cells(cells);
            at = payload
                .get("at")
                .and_then(|at| TimeForm::Rfc3339.read(&text(at), IN_UTC).ok());
        }
        for field in &self.fields {
            let value = self.member(field, cells, &mut at)?;
            payload.insert(field.key.clone(), value);
        }
        for constant in &self.constants {
            payload.insert(constant.key.clone(), constant.value.clone());
        }
        let payload = Value::Object(payload).to_string();
        Ok(Message {
            topic,
            payload,
            at: at.unwrap_or(Timestamp(0)),
        })
    }

    /// All cells that the topic does not use.
    fn all_cells(&self, cells: &Map<String, Value>) -> Map<String, Value> {
        cells
            .iter()
            .filter(|(name, _)| !self.topic_columns().any(|used| used == *name))
            .map(|(name, cell)| {
                let value = match cell {
                    Value::String(text) => number(text).map_or_else(|| cell.clone(), Value::Number),
                    other => other.clone(),
                };
                (name.clone(), value)
            })
            .collect()
    }

    /// One member of the payload; `at` takes the first time that is met.
    fn member(
        &self,
        field: &Field,
        cells: &Map<String, Value>,
        at: &mut Option<Timestamp>,
    ) -> Result<Value, String> {
        let cell = cell(cells, &field.column)?;
        let cell_text = text(cell);
        let unreadable = |what| format!("{}: {cell_text:?} is not {what}", field.column);
        match field.kind {
            Kind::Text => Ok(Value::String(cell_text)),
            Kind::Number => number(&cell_text)
                .map(Value::Number)
                .ok_or_else(|| unreadable("a number")),
            Kind::Time => {
                let form = self.time_form.as_ref().unwrap_or(&TimeForm::Rfc3339);
                let read = form.read(&cell_text, IN_UTC);
                let instant =
                    read.map_err(|why| format!("{}: {cell_text:?} {why}", field.column))?;
                at.get_or_insert(instant);
                Ok(Value::String(time_text(instant)))
            }
        }
    }
}

/// The messages of a table, in its order. Rows that can't be read are left out and counted.
pub struct Rows {
    table: Table,
    mapping: Mapping,
    /// Rows left out so far.
    pub left_out: u64,
    /// The first reasons, with their lines.
    pub reasons: Vec<String>,
}

impl Rows {
    /// The rows of `table` under `mapping`.
    ///
    /// # Errors
    /// If the mapping does not fit the file.
    pub fn new(table: Table, mapping: Mapping) -> Result<Self, FeedError> {
        mapping.check(&table)?;
        Ok(Self {
            table,
            mapping,
            left_out: 0,
            reasons: Vec::new(),
        })
    }
}

impl Iterator for Rows {
    type Item = Message;

    fn next(&mut self) -> Option<Message> {
        loop {
            let (line, row) = self.table.next()?;
            match row.and_then(|cells| self.mapping.message(&cells)) {
                Ok(message) => return Some(message),
                Err(reason) => {
                    self.left_out += 1;
                    if self.reasons.len() < REASONS_MAX {
                        self.reasons.push(format!("line {line}: {reason}"));
                    }
                }
            }
        }
    }
}

/// A row's cell.
fn cell<'a>(cells: &'a Map<String, Value>, column: &str) -> Result<&'a Value, String> {
    cells.get(column).ok_or_else(|| format!("no {column:?}"))
}

/// A cell as text.
fn text(cell: &Value) -> String {
    match cell {
        Value::String(text) => text.clone(),
        other => other.to_string(),
    }
}

/// A number that JSON can hold; integers stay integers.
fn number(text: &str) -> Option<Number> {
    if let Ok(whole) = text.parse::<i64>() {
        return Some(whole.into());
    }
    // Words that Rust takes for numbers ("inf", "nan") are none here.
    if !text.starts_with(|first: char| first.is_ascii_digit() || "+-.".contains(first)) {
        return None;
    }
    text.parse().ok().and_then(Number::from_f64)
}
