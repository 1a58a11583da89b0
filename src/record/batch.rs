//! What is written together: inputs, the outputs they caused, the documents these became, and what
//! the broker took.

use super::{RecordError, body};
use crate::document::Document;
use holdtrue_engine::event::{Input, Output};
use rusqlite::{Transaction, params};

/// A document with its place in the order of issue.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Numbered {
    /// Grows with every document.
    pub number: i64,
    /// The document.
    pub document: Document,
}

/// One transaction in the making. Texts are made when something is added, so that a second attempt
/// at a failed commit costs nothing but the writing.
pub struct Batch {
    first_input: i64,
    first_output: i64,
    inputs: Vec<(body::Columns, String)>,
    outputs: Vec<(i64, &'static str, String)>,
    documents: Vec<Numbered>,
    taken: Vec<i64>,
}

impl Batch {
    pub(super) fn new(first_input: i64, first_output: i64) -> Self {
        Self {
            first_input,
            first_output,
            inputs: Vec::new(),
            outputs: Vec::new(),
            documents: Vec::new(),
            taken: Vec::new(),
        }
    }

    /// Adds an input and what it caused. `positions`: of the rows in a `Supplied` input, else
    /// empty.
    pub fn add(&mut self, input: &Input, positions: &[i64], outputs: &[Output]) {
        let position = self.next_input();
        self.inputs
            .push((body::columns(input), body::input_text(input, positions)));
        for output in outputs {
            let body = body::output_text(output);
            self.outputs
                .push((position, body::output_kind(output), body));
        }
    }

    /// Adds a document to the outbox.
    pub fn add_document(&mut self, document: Numbered) {
        self.documents.push(document);
    }

    /// Removes a document from the outbox: acknowledged, expired, or overtaken by a newer one of
    /// its topic.
    pub fn remove_document(&mut self, number: i64) {
        self.taken.push(number);
    }

    /// Whether there is anything to write.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.inputs.is_empty() && self.documents.is_empty() && self.taken.is_empty()
    }

    /// How many inputs it holds.
    #[must_use]
    pub fn inputs(&self) -> usize {
        self.inputs.len()
    }

    pub(super) fn next_input(&self) -> i64 {
        self.first_input + as_position(self.inputs.len())
    }

    pub(super) fn next_output(&self) -> i64 {
        self.first_output + as_position(self.outputs.len())
    }

    pub(super) fn write(&self, transaction: &Transaction<'_>) -> Result<(), RecordError> {
        self.write_events(transaction)?;
        let mut insert = transaction.prepare_cached(
            "INSERT INTO outbox (number, topic, payload, retain, expires, correlation)
             VALUES (?1, ?2, ?3, ?4, ?5, ?6)",
        )?;
        let mut stand = transaction.prepare_cached(
            "INSERT INTO standing (topic, payload, expires) VALUES (?1, ?2, ?3)
             ON CONFLICT (topic) DO UPDATE SET payload = ?2, expires = ?3",
        )?;
        let mut clear = transaction.prepare_cached("DELETE FROM standing WHERE topic = ?1")?;
        for Numbered { number, document } in &self.documents {
            let Document {
                topic,
                payload,
                retain,
                expires,
                correlation,
            } = document;
            let expires = expires.map(|time| time.0);
            insert.execute(params![
                number,
                topic,
                payload,
                retain,
                expires,
                correlation
            ])?;
            if *retain && payload.is_empty() {
                clear.execute([topic])?;
            } else if *retain {
                stand.execute(params![topic, payload, expires])?;
            }
        }
        let mut delete = transaction.prepare_cached("DELETE FROM outbox WHERE number = ?1")?;
        for number in &self.taken {
            delete.execute([number])?;
        }
        Ok(())
    }

    fn write_events(&self, transaction: &Transaction<'_>) -> Result<(), RecordError> {
        let mut insert = transaction.prepare_cached(
            "INSERT INTO inputs (position, kind, received, source, phenomenon, body)
             VALUES (?1, ?2, ?3, ?4, ?5, ?6)",
        )?;
        for (position, (columns, body)) in (self.first_input..).zip(&self.inputs) {
            insert.execute(params![
                position,
                columns.kind,
                columns.received.map(|time| time.0),
                columns.source,
                columns.phenomenon.map(|time| time.0),
                body
            ])?;
        }
        let mut insert = transaction.prepare_cached(
            "INSERT INTO outputs (position, input, kind, body) VALUES (?1, ?2, ?3, ?4)",
        )?;
        for (position, (input, kind, body)) in (self.first_output..).zip(&self.outputs) {
            insert.execute(params![position, input, kind, body])?;
        }
        Ok(())
    }
}

fn as_position(count: usize) -> i64 {
    i64::try_from(count).expect("a list in memory has fewer than 2^63 members")
}
