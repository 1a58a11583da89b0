//! Who checks the promises: an engine that nothing interrupts follows the record from its first
//! input on, and everything that the world has seen is looked up in it.

use crate::broker::{Broker, Published};
use crate::plant::{Named, gate_key, reading_key};
use crate::violation::{Broken, Violation};
use holdtrue::document;
use holdtrue::keeper::{Wanted, assemble, note_wanted, whole};
use holdtrue::record::{Archive, Day, DayName, Digest, RecordError, State, Told, output_text};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, RefusedReason, Source, Subject};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

/// Why the engine does not let a reading in.
const AT_THE_DOOR: [RefusedReason; 9] = [
    RefusedReason::UnknownTopic,
    RefusedReason::NotFinite,
    RefusedReason::NegativeTime,
    RefusedReason::Future,
    RefusedReason::Late,
    RefusedReason::Duplicate,
    RefusedReason::StatusExcluded,
    RefusedReason::OutOfRange,
    RefusedReason::TooFast,
];

/// What became of something that was sent.
#[derive(Clone, Copy, Debug, Default)]
struct Fate {
    rows: u32,
    /// Let in; counts anew when the channel itself does.
    used: u32,
    ever_used: bool,
    /// Not let in, for another reason than that it had come before.
    refused: u32,
}

/// A document in the record.
#[derive(Clone, Debug, PartialEq, Eq)]
struct Kept {
    topic: String,
    payload: Vec<u8>,
    retain: bool,
    expires: Option<Timestamp>,
}

/// What was found over all, so that a run in which nothing happens does not pass for a good one.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Found {
    pub(crate) inputs: i64,
    pub(crate) documents: usize,
    pub(crate) files: usize,
    pub(crate) supplied: u64,
    pub(crate) setups: u64,
    pub(crate) orders: u64,
    pub(crate) duplicates: u64,
    pub(crate) saved_states: u64,
    pub(crate) restored: u64,
}

/// The auditor of one run.
#[derive(Default)]
pub(crate) struct Auditor {
    engine: Engine,
    wanted: Vec<Wanted>,
    position: i64,
    day: Option<DayName>,
    /// The newest batch whose saved state was looked at.
    looked_at: i64,
    /// Documents that follow from recorded outputs.
    rendered: BTreeSet<Digest>,
    fates: BTreeMap<String, Fate>,
    answers: BTreeMap<String, String>,
    documents: BTreeMap<i64, Kept>,
    /// How much of what the broker knows was looked up.
    acknowledged: usize,
    published: usize,
    pub(crate) found: Found,
}

impl Auditor {
    /// Follows the record in `folder` to its end.
    pub(crate) fn catch_up(&mut self, folder: &Path) -> Result<(), Violation> {
        let archive = Archive::open(folder)?;
        for name in archive.days() {
            if self.day.is_some_and(|day| *name < day) {
                continue;
            }
            let day = archive.day(*name)?;
            if self.day != Some(*name) {
                self.open_day(&day)?;
            }
            self.follow(&archive, &day)?;
            self.read_documents(&day)?;
        }
        self.found.inputs = self.position;
        self.found.files = archive.days().len();
        self.found.documents = self.documents.len();
        Ok(())
    }

    /// A day opens with the state that the one before led to.
    fn open_day(&mut self, day: &Day) -> Result<(), Violation> {
        let opening = day.opening();
        if opening.first_input != self.position + 1 {
            return Err(Broken::Gap.because(format!(
                "{} begins with input {}, the one before ends with {}",
                day.name(),
                opening.first_input,
                self.position
            )));
        }
        self.compare_state(&day.state_after(opening.first_batch)?, Broken::Opening)?;
        self.looked_at = opening.first_batch;
        self.day = Some(day.name());
        Ok(())
    }

    /// Takes the inputs of a day that are new, and looks at the states that were saved between
    /// them.
    fn follow(&mut self, archive: &Archive, day: &Day) -> Result<(), Violation> {
        // Newest first.
        let mut due = day.saved_states()?;
        due.retain(|(batch, _)| *batch > self.looked_at);
        self.look_at_saved(day, &mut due)?;
        day.walk::<Violation>(archive, self.position, i64::MAX, |told| {
            self.take(&told)?;
            self.look_at_saved(day, &mut due)
        })?;
        match due.last() {
            None => Ok(()),
            Some((batch, _)) => Err(Broken::SavedState.because(format!(
                "batch {batch} has a state after inputs that are not there"
            ))),
        }
    }

    /// Looks at the states that were saved after the newest input.
    fn look_at_saved(&mut self, day: &Day, due: &mut Vec<(i64, i64)>) -> Result<(), Violation> {
        while let Some((batch, _)) = due.pop_if(|(_, after)| *after == self.position) {
            self.compare_state(&day.state_after(batch)?, Broken::SavedState)?;
            self.looked_at = batch;
            self.found.saved_states += 1;
        }
        Ok(())
    }

    fn take(&mut self, told: &Told<'_>) -> Result<(), Violation> {
        let before = self.engine.setup().clone();
        let refused_before = self.refused_at_the_door(told.input);
        let mut outputs = Vec::new();
        self.engine.step(told.input, &mut outputs);
        self.position = told.position;
        note_wanted(told.input, &outputs, &mut self.wanted);
        let says: Vec<String> = outputs.iter().map(output_text).collect();
        let recorded: Vec<&String> = told.outputs.iter().map(|said| &said.body).collect();
        if says.iter().ne(recorded.iter().copied()) {
            return Err(Broken::Replay.because(format!(
                "input {} leads to {says:?}, the record says {recorded:?}",
                told.position
            )));
        }
        for output in &outputs {
            if let Some(document) = document::render(output, &before) {
                self.rendered
                    .insert(named(&document.topic, &document.payload));
            }
            self.check_answer(output)?;
        }
        self.note_fate(told.input, &before, &refused_before)
    }

    /// How often readings of this source were not let in, by reason.
    fn refused_at_the_door(&self, input: &Input) -> Vec<u64> {
        let Input::Reading(reading) = input else {
            return Vec::new();
        };
        let subject = match reading.source {
            Source::Indication(id) => Subject::Channel(id),
            Source::Reference(id) => Subject::Reference(id),
            Source::Influence(id) => Subject::Influence(id),
        };
        let counters = self.engine.standing().counters;
        let reasons = AT_THE_DOOR.iter();
        reasons
            .map(|reason| counters.get(subject, *reason))
            .collect()
    }

    fn note_fate(
        &mut self,
        input: &Input,
        before: &Setup,
        refused_before: &[u64],
    ) -> Result<(), Violation> {
        let refused_now = self.refused_at_the_door(input);
        let key = match input {
            Input::Reading(reading) => {
                reading_key(&name_of(reading.source, before), reading.phenomenon)
            }
            Input::Gate(gate) => gate_key(gate.phenomenon, gate.open),
            Input::Order(order) => {
                self.found.orders += 1;
                order.id.clone()
            }
            Input::Refused(refused) => refused.detail.clone(),
            Input::Setup(setup) => {
                self.found.setups += 1;
                self.forget_removed(before, setup);
                return Ok(());
            }
            Input::Supplied(_) => {
                self.found.supplied += 1;
                return Ok(());
            }
            Input::Tick { .. } => return Ok(()),
        };
        let fate = self.fates.entry(key.clone()).or_default();
        fate.rows += 1;
        if matches!(input, Input::Refused(_)) {
            fate.refused += 1;
        }
        if !matches!(input, Input::Reading(_)) {
            return Ok(());
        }
        let why = AT_THE_DOOR
            .iter()
            .zip(refused_before.iter().zip(&refused_now))
            .find(|(_, (before, now))| before != now)
            .map(|(reason, _)| *reason);
        match why {
            None => {
                fate.used += 1;
                fate.ever_used = true;
            }
            Some(RefusedReason::Duplicate) => self.found.duplicates += 1,
            Some(_) => fate.refused += 1,
        }
        if fate.used > 1 {
            return Err(Broken::UsedTwice.because(key));
        }
        Ok(())
    }

    /// A channel that is taken out of the configuration forgets what it has seen.
    fn forget_removed(&mut self, before: &Setup, after: &Setup) {
        for channel in &before.channels {
            if after.channels.iter().any(|it| it.name == channel.name) {
                continue;
            }
            let prefix = format!("channel {} at ", channel.name);
            for (key, fate) in &mut self.fates {
                if key.starts_with(&prefix) {
                    fate.used = 0;
                }
            }
        }
    }

    /// An order that was done is done once, and answered alike when it is told again. (What was
    /// refused changed nothing, and may be asked for again.)
    fn check_answer(&mut self, output: &Output) -> Result<(), Violation> {
        let Output::Answer(answer) = output else {
            return Ok(());
        };
        if !answer.accepted {
            return Ok(());
        }
        let text = output_text(output);
        let first = self
            .answers
            .entry(answer.id.clone())
            .or_insert(text.clone());
        if *first == text {
            return Ok(());
        }
        Err(Broken::UsedTwice.because(format!("first answered {first}, then {text}")))
    }

    fn compare_state(&self, state: &State, what: Broken) -> Result<(), Violation> {
        let (engine, wanted) = assemble(state).map_err(|why| what.because(why))?;
        self.compare(&whole(&engine, &wanted), what)
    }

    /// The state of a daemon that was just restored is that of one which was never interrupted.
    pub(crate) fn compare_restored(&mut self, state: &State) -> Result<(), Violation> {
        self.found.restored += 1;
        self.compare(state, Broken::Restored)
    }

    fn compare(&self, state: &State, what: Broken) -> Result<(), Violation> {
        let own = whole(&self.engine, &self.wanted);
        if own == *state {
            return Ok(());
        }
        let differing = own.iter().zip(state).find(|(own, other)| own != other);
        let part = differing.map(|((part, _), _)| part.clone());
        Err(what.because(format!("after input {}, in part {part:?}", self.position)))
    }

    /// Reads the documents that are new; each follows from an output, or clears a topic.
    fn read_documents(&mut self, day: &Day) -> Result<(), Violation> {
        let file = rusqlite::Connection::open_with_flags(
            day.path(),
            rusqlite::OpenFlags::SQLITE_OPEN_READ_ONLY,
        );
        let known = self.documents.keys().next_back().copied().unwrap_or(0);
        let read = |file: rusqlite::Connection| -> rusqlite::Result<Vec<(i64, Kept)>> {
            let mut statement = file.prepare(
                "SELECT number, topic, payload, retain, expires FROM documents
                 WHERE number > ?1 ORDER BY number",
            )?;
            let rows = statement.query_map([known], |row| {
                let kept = Kept {
                    topic: row.get(1)?,
                    payload: row.get(2)?,
                    retain: row.get(3)?,
                    expires: row.get::<_, Option<i64>>(4)?.map(Timestamp),
                };
                Ok((row.get(0)?, kept))
            })?;
            rows.collect()
        };
        let rows = file.and_then(read);
        let rows = rows.map_err(|error| Broken::Unreadable.because(error.to_string()))?;
        for (number, kept) in rows {
            let follows = self.rendered.contains(&named(&kept.topic, &kept.payload));
            if !follows && !kept.payload.is_empty() {
                return Err(Broken::Unfounded.because(kept.topic));
            }
            self.documents.insert(number, kept);
        }
        Ok(())
    }

    /// Everything that the broker knows of us is in the record.
    pub(crate) fn look_up(&mut self, broker: &Broker) -> Result<(), Violation> {
        for message in &broker.acknowledged[self.acknowledged..] {
            for key in message.content.keys() {
                let fate = self.fates.get(&key).copied().unwrap_or_default();
                if fate.rows == 0 {
                    return Err(Broken::AcknowledgedMissing.because(key));
                }
                let is_reading = key.starts_with("channel ") || key.starts_with("reference ");
                if is_reading && !fate.ever_used && fate.refused == 0 {
                    return Err(Broken::NeverUsed.because(key));
                }
            }
        }
        self.acknowledged = broker.acknowledged.len();
        self.look_up_published(broker)
    }

    /// Everything that the broker took is in the record.
    fn look_up_published(&mut self, broker: &Broker) -> Result<(), Violation> {
        for Published { number, document } in &broker.published[self.published..] {
            let kept = self.documents.get(number);
            let is_same = kept.is_some_and(|kept| {
                kept.topic == document.topic && kept.payload == document.payload
            });
            if !is_same {
                let text = format!("document {number} on {}", document.topic);
                return Err(Broken::PublishedMissing.because(text));
            }
        }
        self.published = broker.published.len();
        Ok(())
    }

    /// At rest the broker holds of each topic what was recorded last for it.
    pub(crate) fn compare_retained(
        &self,
        broker: &Broker,
        now: Timestamp,
    ) -> Result<(), Violation> {
        let mut newest: BTreeMap<&str, &Kept> = BTreeMap::new();
        for kept in self.documents.values().filter(|kept| kept.retain) {
            newest.insert(&kept.topic, kept);
        }
        let holds = |kept: &&Kept| {
            !kept.payload.is_empty() && kept.expires.is_none_or(|expires| expires > now)
        };
        let expected: BTreeMap<&str, &[u8]> = newest
            .into_iter()
            .filter(|(_, kept)| holds(kept))
            .map(|(topic, kept)| (topic, kept.payload.as_slice()))
            .collect();
        let held = broker.retained(now);
        if held == expected {
            return Ok(());
        }
        let differs = |topic: &&&str| held.get(**topic) != expected.get(**topic);
        let topic = held.keys().chain(expected.keys()).find(differs);
        let text = |documents: &BTreeMap<&str, &[u8]>| {
            let payload = topic.and_then(|topic| documents.get(topic));
            payload.map(|payload| String::from_utf8_lossy(payload).into_owned())
        };
        Err(Broken::Retained.because(format!(
            "on {topic:?} the broker holds {:?}, the record {:?}",
            text(&held),
            text(&expected)
        )))
    }

    /// Position of the last input that was followed.
    pub(crate) fn position(&self) -> i64 {
        self.position
    }
}

impl From<RecordError> for Violation {
    fn from(error: RecordError) -> Self {
        Broken::Unreadable.because(error.to_string())
    }
}

fn named(topic: &str, payload: &[u8]) -> Digest {
    Digest::of(&[topic.as_bytes(), &[0], payload].concat())
}

fn name_of(source: Source, setup: &Setup) -> Named {
    match source {
        Source::Indication(id) => Named::Channel(setup.channels[id.0 as usize].name.clone()),
        Source::Reference(id) => Named::Reference(setup.references[id.0 as usize].name.clone()),
        Source::Influence(id) => Named::Reference(format!("influence {}", id.0)),
    }
}

impl Found {
    /// Adds another run's.
    pub(crate) fn add(&mut self, other: &Self) {
        self.inputs += other.inputs;
        self.documents += other.documents;
        self.files += other.files;
        self.supplied += other.supplied;
        self.setups += other.setups;
        self.orders += other.orders;
        self.duplicates += other.duplicates;
        self.saved_states += other.saved_states;
        self.restored += other.restored;
    }
}
