//! A day turns: a new file begins with all that is needed to go on from it.

use super::batch::Event;
use super::disk::Operation;
use super::opening::{self, Contents, Opening};
use super::sources::SourceBook;
use super::state_row::WaitingRow;
use super::writing::{Live, Record};
use super::{ARITHMETIC_REVISION, DayName, Numbered, RecordError, STATE_REVISION, State};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use std::path::Path;

/// What the record needs to begin a new file.
pub struct Turn<'a> {
    /// Now.
    pub now: Timestamp,
    /// The instant whose day the file is of; in a recording not now.
    pub day: Timestamp,
    /// The configuration in force.
    pub setup: &'a Setup,
    /// The whole state of the engine.
    pub state: State,
    /// The documents that wait for the broker.
    pub waiting: Vec<Numbered>,
}

impl Record {
    /// Whether what is written now may stand in the file that is written to: its day is not over
    /// and this program opened it.
    #[must_use]
    pub fn is_turn_due(&self, now: Timestamp) -> bool {
        self.live.as_ref().is_none_or(|live| {
            now >= live.name.day_end()
                || live.opening.program != env!("CARGO_PKG_VERSION")
                || live.opening.arithmetic != ARITHMETIC_REVISION
                || live.opening.state != STATE_REVISION
        })
    }

    fn next_opening(
        &self,
        turn: &Turn<'_>,
        name: DayName,
        preceding: Option<DayName>,
    ) -> Result<Opening, RecordError> {
        Ok(Opening {
            opened: turn.now,
            program: env!("CARGO_PKG_VERSION").to_owned(),
            arithmetic: ARITHMETIC_REVISION,
            state: STATE_REVISION,
            setup: serde_json::to_string(turn.setup).map_err(|source| RecordError::Unreadable {
                path: self.path(name),
                position: self.place.last_input,
                source,
            })?,
            preceding,
            chain: self.place.head.digest,
            first_batch: self.place.head.batch + 1,
            first_input: self.place.last_input + 1,
            first_output: self.place.last_output + 1,
            first_document: self.place.last_document + 1,
        })
    }

    /// Begins a new file; the one before is sealed from now on. Everything must be committed, but
    /// before the first file: what was noted by then follows its opening.
    ///
    /// # Errors
    /// When the file can't be made; the record is then as it was.
    ///
    /// # Panics
    /// When something is uncommitted: a fault of the caller.
    pub fn turn(&mut self, turn: Turn<'_>) -> Result<(), RecordError> {
        let first = self.is_new();
        assert!(
            first || self.batch.is_empty(),
            "a day turns between two batches"
        );
        let preceding = self.days.last().copied();
        let name = preceding.map_or_else(
            || DayName::first(turn.day),
            |preceding| preceding.next(turn.day),
        );
        let retained = self.retained_rows()?;
        let mut events = Vec::new();
        if !self.subscriptions.is_empty() {
            events.push(Event::Subscriptions(self.subscriptions_text()));
        }
        let opening = self.next_opening(&turn, name, preceding)?;
        let path = self.path(name);
        self.before(Operation::Open, &path)?;
        let waiting = turn.waiting.into_iter().map(|it| WaitingRow {
            number: it.number,
            document: it.document,
        });
        let contents = Contents {
            opening: opening.clone(),
            book: if first {
                &SourceBook::default()
            } else {
                self.batch.book()
            },
            events,
            state: turn.state,
            waiting: waiting.collect(),
            retained,
        };
        let (connection, place) = match opening::create(&path, contents) {
            Ok(made) => made,
            Err(error) => {
                // Without a table it counts as not made, but it must not stand in the way.
                remove_files(&path);
                return Err(error.of(&path));
            }
        };
        self.days.push(name);
        let before = self.live.replace(Live {
            name,
            path: path.clone(),
            connection,
            opening,
        });
        if let Some(before) = before {
            drop(before.connection);
            self.sealer.due.push_back(before.name);
        } else if let Some(preceding) = preceding
            && !self.sealer.due.contains(&preceding)
        {
            // It was sealed at a clean stop; that is noted in this file.
            self.sealer.due.push_back(preceding);
        }
        self.place = place;
        if first {
            self.batch.follow(place);
        } else {
            self.batch.clear(place);
        }
        self.after(Operation::Open, &path)
    }
}

/// Removes a database with what SQLite keeps beside it; what can't be removed is found again by
/// the next start.
pub(super) fn remove_files(path: &Path) {
    for suffix in ["", "-wal", "-shm", "-journal"] {
        let mut name = path.as_os_str().to_owned();
        name.push(suffix);
        let _ = std::fs::remove_file(name);
    }
}
