//! What is written together: inputs, the outputs they caused, the documents these became, and what
//! the broker took.

use super::body;
use super::chain::{Digest, Head, Link};
use super::row::{
    DocumentRow, EventRow, InputRow, OutputRow, ReadingRow, SettledRow, SourceRow, TableRow,
};
use super::sources::SourceBook;
use super::state_row::StateRow;
use super::{RecordError, State};
use crate::document::Document;
use holdtrue_engine::event::{Input, Output, Source, Subject};
use holdtrue_engine::time::Timestamp;
use rusqlite::{Connection, params};

/// A document with its place in the order of issue.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Numbered {
    /// Grows with every document.
    pub number: i64,
    /// The document.
    pub document: Document,
}

/// Why a document waits no longer.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Settled {
    /// The broker has it.
    Taken,
    /// The broker has a newer one of its topic.
    Overtaken,
    /// It is too old to be worth anything.
    Expired,
    /// The broker will never take it.
    Refused,
    /// It had to make room while the broker was away.
    PushedOut,
    /// Nobody was to have it: it is of a recording that was imported.
    NotSent,
}

impl Settled {
    fn word(self) -> &'static str {
        match self {
            Self::Taken => "taken",
            Self::Overtaken => "overtaken",
            Self::Expired => "expired",
            Self::Refused => "refused",
            Self::PushedOut => "pushed-out",
            Self::NotSent => "not-sent",
        }
    }
}

/// What happened to the record itself.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) enum Event {
    /// A program goes on with the record: its version.
    Start(String),
    /// The topic filters that the broker confirmed, as a JSON list.
    Subscriptions(String),
    /// A finished file and its checksum.
    Sealed(String, Digest),
    /// A file that is removed, and why.
    Removed(String, String),
}

/// How far the positions of a record have come.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Place {
    pub(super) head: Head,
    pub(super) last_input: i64,
    pub(super) last_output: i64,
    pub(super) last_document: i64,
}

/// The next transaction in the making. Texts are made when something is added, so that a second
/// attempt at a failed commit costs nothing but the writing.
pub struct Batch {
    place: Place,
    book: SourceBook,
    /// Sources from this number on are new.
    first_source: i64,
    readings: Vec<ReadingRow>,
    inputs: Vec<InputRow>,
    outputs: Vec<OutputRow>,
    documents: Vec<DocumentRow>,
    settled: Vec<SettledRow>,
    events: Vec<EventRow>,
    states: Vec<StateRow>,
    last_input: i64,
}

impl Batch {
    pub(super) fn new(place: Place, book: SourceBook) -> Self {
        Self {
            place,
            first_source: book.next(),
            book,
            readings: Vec::new(),
            inputs: Vec::new(),
            outputs: Vec::new(),
            documents: Vec::new(),
            settled: Vec::new(),
            events: Vec::new(),
            states: Vec::new(),
            last_input: place.last_input,
        }
    }

    /// Adds an input and what it caused. `positions`: of the rows in a `Supplied` input, else
    /// empty.
    pub fn add(&mut self, input: &Input, positions: &[i64], outputs: &[Output]) {
        self.last_input += 1;
        let position = self.last_input;
        if let Input::Reading(reading) = input {
            let source = self.book.of(reading.source);
            self.readings
                .push(ReadingRow::new(position, source, reading));
        } else {
            let (kind, received) = body::columns(input);
            self.inputs.push(InputRow {
                position,
                kind: kind.to_owned(),
                received,
                body: body::input_text(input, positions),
            });
        }
        // Before a new configuration counts: what is said of it bears the old one's positions.
        for output in outputs {
            let subject = body::subject(output).and_then(|subject| self.number(subject));
            let next = self.last_output() + 1;
            self.outputs.push(OutputRow {
                position: next,
                input: position,
                subject,
                kind: body::output_kind(output).to_owned(),
                body: body::output_text(output),
            });
        }
        if let Input::Setup(setup) = input {
            self.book.adopt(setup);
        }
    }

    fn number(&mut self, subject: Subject) -> Option<i64> {
        match subject {
            Subject::Node => None,
            Subject::Channel(id) => Some(self.book.of(Source::Indication(id))),
            Subject::Reference(id) => Some(self.book.of(Source::Reference(id))),
            Subject::Influence(id) => Some(self.book.of(Source::Influence(id))),
        }
    }

    /// Adds a document to the outbox; its number.
    pub fn add_document(&mut self, document: Document) -> i64 {
        let number = self.last_document() + 1;
        self.documents.push(DocumentRow {
            number,
            input: self.last_input,
            document,
        });
        number
    }

    /// Takes a document out of the outbox.
    pub fn settle(&mut self, number: i64, how: Settled) {
        self.settled.push(SettledRow {
            number,
            batch: self.number_of_batch(),
            how: how.word().to_owned(),
        });
    }

    pub(super) fn note(&mut self, event: Event) {
        let (kind, body) = match event {
            Event::Start(program) => ("start", program),
            Event::Subscriptions(filters) => ("subscriptions", filters),
            Event::Sealed(file, digest) => ("sealed", format!("{digest}  {file}")),
            Event::Removed(file, why) => ("removed", format!("{file}: {why}")),
        };
        self.events.push(EventRow {
            batch: self.number_of_batch(),
            kind: kind.to_owned(),
            body,
        });
    }

    /// Adds parts of the engine's state as it is after the last input that was added.
    pub fn add_state(&mut self, state: State) {
        let batch = self.number_of_batch();
        let rows = state
            .into_iter()
            .map(|(part, bytes)| StateRow::new(batch, part, bytes));
        self.states.extend(rows);
    }

    /// Whether there is anything to write.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.inputs() == 0
            && self.documents.is_empty()
            && self.settled.is_empty()
            && self.events.is_empty()
            && self.states.is_empty()
    }

    /// How many inputs it holds.
    #[must_use]
    pub fn inputs(&self) -> usize {
        self.readings.len() + self.inputs.len()
    }

    /// Position of the newest input.
    #[must_use]
    pub fn last_input(&self) -> i64 {
        self.last_input
    }

    /// Number of this batch.
    pub(super) fn number_of_batch(&self) -> i64 {
        self.place.head.batch + 1
    }

    fn last_output(&self) -> i64 {
        let new = i64::try_from(self.outputs.len()).unwrap_or(i64::MAX);
        self.place.last_output + new
    }

    fn last_document(&self) -> i64 {
        let new = i64::try_from(self.documents.len()).unwrap_or(i64::MAX);
        self.place.last_document + new
    }

    pub(super) fn book(&self) -> &SourceBook {
        &self.book
    }

    pub(super) fn book_mut(&mut self) -> &mut SourceBook {
        &mut self.book
    }

    /// Where the record stands with this batch in it, committed at this instant.
    pub(super) fn place_after(&mut self, committed: Timestamp) -> Place {
        // The order in which they are read back.
        self.settled.sort_by_key(|row| row.number);
        let number = self.number_of_batch();
        let mut link = Link::new(&self.place.head.digest, number, committed);
        SourceRow::hash_all(&self.new_sources(), &mut link);
        ReadingRow::hash_all(&self.readings, &mut link);
        InputRow::hash_all(&self.inputs, &mut link);
        OutputRow::hash_all(&self.outputs, &mut link);
        DocumentRow::hash_all(&self.documents, &mut link);
        SettledRow::hash_all(&self.settled, &mut link);
        EventRow::hash_all(&self.events, &mut link);
        StateRow::hash_all(&self.states, &mut link);
        Place {
            head: Head {
                batch: number,
                digest: link.close(),
            },
            last_input: self.last_input,
            last_output: self.last_output(),
            last_document: self.last_document(),
        }
    }

    fn new_sources(&self) -> Vec<SourceRow> {
        let batch = self.number_of_batch();
        let new = self.book.since(self.first_source);
        new.map(|(number, name)| SourceRow {
            number,
            batch,
            name: name.clone(),
        })
        .collect()
    }

    /// Writes the rows; part of a transaction.
    pub(super) fn write(
        &self,
        connection: &Connection,
        after: &Place,
        committed: Timestamp,
    ) -> Result<(), RecordError> {
        SourceRow::write_all(&self.new_sources(), connection)?;
        ReadingRow::write_all(&self.readings, connection)?;
        InputRow::write_all(&self.inputs, connection)?;
        OutputRow::write_all(&self.outputs, connection)?;
        DocumentRow::write_all(&self.documents, connection)?;
        SettledRow::write_all(&self.settled, connection)?;
        EventRow::write_all(&self.events, connection)?;
        StateRow::write_all(&self.states, connection)?;
        write_link(connection, after, committed)
    }

    /// Goes on to the next batch after this one was committed. What it had allocated is kept.
    pub(super) fn clear(&mut self, place: Place) {
        self.place = place;
        self.first_source = self.book.next();
        self.readings.clear();
        self.inputs.clear();
        self.outputs.clear();
        self.documents.clear();
        self.settled.clear();
        self.events.clear();
        self.states.clear();
    }

    /// The first file was opened; what was noted by then follows.
    pub(super) fn follow(&mut self, opening: Place) {
        self.place = opening;
    }

    /// The rows that an opening consists of.
    pub(super) fn into_opening_rows(self) -> (Vec<EventRow>, Vec<StateRow>) {
        (self.events, self.states)
    }

    /// Documents of the batch, for what is remembered of them.
    pub(super) fn documents(&self) -> impl Iterator<Item = (i64, &Document)> {
        self.documents.iter().map(|row| (row.number, &row.document))
    }
}

/// Writes the row of a batch.
pub(super) fn write_link(
    connection: &Connection,
    place: &Place,
    committed: Timestamp,
) -> Result<(), RecordError> {
    connection
        .prepare_cached(
            "INSERT INTO batches (number, committed, last_input, last_output, last_document, digest)
             VALUES (?1, ?2, ?3, ?4, ?5, ?6)",
        )?
        .execute(params![
            place.head.batch,
            committed.0,
            place.last_input,
            place.last_output,
            place.last_document,
            place.head.digest.0
        ])?;
    Ok(())
}
