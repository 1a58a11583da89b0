//! The engine kept in step with its record and its outbox: one input in, everything that follows
//! from it noted; then one commit, after which documents may go and messages may be acknowledged.
//!
//! Nothing here waits, reads a clock or knows a broker: the daemon drives it, and so do imports and
//! simulations. Modules in reading order:
//! - `restore`: from the record to the engine's state, at the start
//! - `saved`: the engine's state as it stands in the record
//! - `outbox`: documents that the broker has not acknowledged
//! - `rhythm`: when the state is saved and when a day turns
//! - `keeping`: old files go
//! - `impact`: what a quarantine touches

mod impact;
mod keeping;
mod outbox;
mod restore;
mod rhythm;
mod saved;

pub use outbox::Outbox;
pub use restore::{RestoreError, Wanted, note_wanted};
pub use rhythm::Pace;
pub use saved::{assemble, part_of, whole};

use crate::document::topic::Topics;
use crate::document::{self, Document};
use crate::record::{DayName, Disk, Head, Record, RecordError, Retention, Settled, State, Turn};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Source, Supplied};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceKind, Setup};
use holdtrue_engine::time::Timestamp;
use restore::Restored;
use rhythm::Rhythm;
use std::collections::BTreeSet;
use std::path::Path;
use std::sync::atomic::AtomicBool;

/// Recorded rows given back to the engine at once, at most; the newest are left out.
pub(crate) const SUPPLIED_MAX: usize = 1_000_000;

/// The engine and what must stay in step with it. `T` is what an acknowledgement needs.
pub struct Keeper<T = ()> {
    engine: Engine,
    record: Record,
    outbox: Outbox,
    /// The configuration in force.
    setup: Setup,
    wanted: Vec<Wanted>,
    /// What is to be acknowledged after the next commit, in the order in which it came.
    owed: Vec<T>,
    rhythm: Rhythm,
    retention: Retention,
    /// A file may have become too old, or the record too large.
    may_be_old: bool,
    /// Kept to save allocations.
    outputs: Vec<Output>,
}

impl<T> Keeper<T> {
    /// Opens the record in `folder`, restores the engine, and opens a file to write to if there is
    /// none. `None` when `stop` was set meanwhile.
    ///
    /// # Errors
    /// When the record can't be used, or says otherwise than this program would.
    pub fn open(
        folder: &Path,
        now: Timestamp,
        stop: &AtomicBool,
    ) -> Result<Option<Self>, RestoreError> {
        Self::over(Record::open(folder)?, now, stop)
    }

    /// The same over a disk that is watched or simulated.
    ///
    /// # Errors
    /// As [`Keeper::open`].
    ///
    /// # Panics
    /// Never: nobody can set the flag to stop.
    pub fn open_on(
        folder: &Path,
        disk: Box<dyn Disk>,
        now: Timestamp,
    ) -> Result<Self, RestoreError> {
        let kept = Self::over(Record::open_on(folder, disk)?, now, &AtomicBool::new(false))?;
        Ok(kept.expect("nobody set the flag to stop"))
    }

    fn over(
        mut record: Record,
        now: Timestamp,
        stop: &AtomicBool,
    ) -> Result<Option<Self>, RestoreError> {
        let Some(restored) = restore::restore(&record, now, stop)? else {
            return Ok(None);
        };
        let Restored {
            engine,
            setup,
            wanted,
            saved_input,
            part_bytes,
            ..
        } = restored;
        record.adopt(&setup);
        let outbox = Outbox::new(record.outbox()?);
        let mut keeper = Self {
            engine,
            record,
            outbox,
            setup,
            wanted,
            owed: Vec::new(),
            rhythm: Rhythm::new(now, saved_input, part_bytes),
            retention: Retention::default(),
            may_be_old: true,
            outputs: Vec::new(),
        };
        // The first file waits for the first commit: which day it is of may not be known yet.
        if !keeper.record.is_new() && keeper.is_turn_due(now) {
            keeper.turn(now)?;
        }
        keeper.record.note_start();
        Ok(Some(keeper))
    }

    /// Saves the state and turns recordings' files at another pace than the default.
    #[must_use]
    pub fn at_pace(mut self, now: Timestamp, pace: Pace) -> Self {
        self.rhythm.set_pace(now, pace);
        self
    }

    /// Lets a configuration take effect. What this says bears the old one's positions.
    ///
    /// # Errors
    /// When the record can't be read.
    pub fn adopt(&mut self, setup: &Setup) -> Result<(), RecordError> {
        // From here on positions mean other channels: what was asked for by the old ones is
        // answered first.
        self.answer_wanted()?;
        self.take(&Input::Setup(Box::new(setup.clone())));
        self.setup = setup.clone();
        let topics = Topics::new(&self.setup.node);
        for standing in self.record.standing()? {
            if topics.is_orphan(&standing.topic, &self.setup) {
                self.outbox
                    .add(document::cleared(standing.topic), self.record.batch());
            }
        }
        Ok(())
    }

    /// Steps the engine and notes what followed.
    pub fn take(&mut self, input: &Input) {
        self.take_with(input, &[]);
    }

    /// `positions`: of supplied rows.
    fn take_with(&mut self, input: &Input, positions: &[i64]) {
        if let Some(received) = Self::looks_back(input) {
            match self.commit(received) {
                // What is owed goes with the caller's next commit, in its order.
                Ok(owed) => self.owed = owed,
                // The next commit tells of it; until then the list may lack the newest.
                Err(error) => tracing::warn!(%error, "a quarantine comes before a commit"),
            }
        }
        let mut outputs = std::mem::take(&mut self.outputs);
        outputs.clear();
        self.engine.step(input, &mut outputs);
        let batch = self.record.batch();
        batch.add(input, positions, &outputs);
        note_wanted(input, &outputs, &mut self.wanted);
        for output in &outputs {
            if let Some(document) = document::render(output, &self.setup) {
                if matches!(input, Input::Tick { .. }) {
                    self.outbox.make_room_for(&document, batch);
                }
                self.outbox.add(document, batch);
            }
        }
        self.list_impact(&outputs);
        self.outputs = outputs;
    }

    /// What is owed for the inputs that were just taken: an acknowledgement after the next commit.
    pub fn owe(&mut self, ticket: T) {
        self.owed.push(ticket);
    }

    /// How many acknowledgements wait for the next commit.
    #[must_use]
    pub fn owed(&self) -> usize {
        self.owed.len()
    }

    /// Writes what was noted since the last commit. Then its documents may go, and what is
    /// returned may be acknowledged. On failure nothing is lost: the same will be tried again.
    ///
    /// # Errors
    /// When the record can't be written.
    pub fn commit(&mut self, now: Timestamp) -> Result<Vec<T>, RecordError> {
        if self.record.is_new() {
            // Nothing is lost with what was noted so far: it came from no message.
            let day_is_unknown = self.setup.clock == Clock::Readings && self.engine.now().is_none();
            if self.owed.is_empty() && day_is_unknown {
                return Ok(Vec::new());
            }
            self.begin(now)?;
        }
        self.save_if_due(now);
        self.remove_old(now);
        self.record.commit(now)?;
        if self.rhythm.committed(now, self.record.last_input()) {
            self.engine.mark_saved();
        }
        self.outbox.release();
        // Between two batches the engine's state is the record's.
        if self.is_turn_due(now)
            && self.rhythm.may_try_turn(now)
            && let Err(error) = self.turn(now)
        {
            tracing::warn!(%error, "no new file can be begun; going on in the one of before");
            self.rhythm.turn_failed(now);
        }
        Ok(std::mem::take(&mut self.owed))
    }

    /// Adds what changed of the engine's state to the batch, where that is due.
    fn save_if_due(&mut self, now: Timestamp) {
        if !self.record.has_news() {
            return;
        }
        let inputs = self.record.batch().last_input();
        if self.rhythm.is_save_due(now, inputs, &self.engine) {
            let state = saved::changed(&self.engine, &self.wanted);
            self.rhythm.saving(&state);
            self.record.batch().add_state(state);
        }
    }

    /// The instant that says which day it is.
    fn day_instant(&self, now: Timestamp) -> Timestamp {
        match self.setup.clock {
            Clock::Live => now,
            Clock::Readings => self.engine.now().unwrap_or(now),
        }
    }

    fn is_turn_due(&self, now: Timestamp) -> bool {
        let day = self.day_instant(now);
        let is_due = self.record.is_turn_due(day);
        match self.setup.clock {
            Clock::Live => is_due,
            // Sparse recordings would make a file for every few readings.
            Clock::Readings => {
                is_due
                    && (self.record.is_turn_due(Timestamp(i64::MIN))
                        || self.record.live_inputs() >= self.rhythm.inputs_of_a_file())
            }
        }
    }

    /// Begins the first file, with an engine that was told nothing.
    fn begin(&mut self, now: Timestamp) -> Result<(), RecordError> {
        let state = saved::whole(&Engine::new(), &[]);
        self.rhythm.opening(&state);
        self.record.turn(Turn {
            now,
            day: self.day_instant(now),
            setup: &Setup::default(),
            state,
            waiting: Vec::new(),
        })
    }

    fn turn(&mut self, now: Timestamp) -> Result<(), RecordError> {
        let state = self.state();
        self.rhythm.opening(&state);
        self.record.turn(Turn {
            now,
            day: self.day_instant(now),
            setup: &self.setup,
            state,
            waiting: self.outbox.all(),
        })?;
        self.engine.mark_saved();
        self.rhythm.turned(now, self.record.last_input());
        self.may_be_old = true;
        Ok(())
    }

    /// Answers what the engine has asked for so far. Only that: an engine that asks again and again
    /// must not stop the caller. To be called right after a commit: the record can be searched only
    /// for what is in it.
    ///
    /// # Errors
    /// When the record can't be read; what is unanswered stays.
    pub fn answer_wanted(&mut self) -> Result<(), RecordError> {
        for wanted in self.wanted.clone() {
            self.supply(wanted)?;
        }
        Ok(())
    }

    /// Gives the engine recorded rows that it asked for.
    fn supply(&mut self, wanted: Wanted) -> Result<(), RecordError> {
        let Wanted { channel, from, to } = wanted;
        let sources = sources_of(channel, &self.setup);
        let rows = self.record.readings(&sources, from, to, SUPPLIED_MAX)?;
        let (positions, readings): (Vec<i64>, Vec<_>) = rows.into_iter().unzip();
        let supplied = Supplied {
            channel,
            from,
            to,
            readings,
        };
        self.take_with(&Input::Supplied(supplied), &positions);
        Ok(())
    }

    /// Ends the writing: commits and seals.
    ///
    /// # Errors
    /// When the record can't be written.
    pub fn finish(&mut self, now: Timestamp) -> Result<Vec<T>, RecordError> {
        let owed = self.commit(now)?;
        if !self.record.is_new() {
            self.record.finish(now)?;
        }
        Ok(owed)
    }

    /// The engine.
    #[must_use]
    pub fn engine(&self) -> &Engine {
        &self.engine
    }

    /// The whole state, as a day would open with it now.
    #[must_use]
    pub fn state(&self) -> State {
        saved::whole(&self.engine, &self.wanted)
    }

    /// The configuration in force.
    #[must_use]
    pub fn setup(&self) -> &Setup {
        &self.setup
    }

    /// The outbox.
    #[must_use]
    pub fn outbox(&self) -> &Outbox {
        &self.outbox
    }

    /// The outbox, to hand documents over.
    pub fn outbox_mut(&mut self) -> &mut Outbox {
        &mut self.outbox
    }

    /// Inputs noted since the last commit.
    #[must_use]
    pub fn uncommitted(&self) -> usize {
        self.record.uncommitted()
    }

    /// Whether a commit has something to write.
    #[must_use]
    pub fn has_news(&self) -> bool {
        self.record.has_news()
    }

    /// Inputs in the record.
    #[must_use]
    pub fn inputs(&self) -> i64 {
        self.record.last_input()
    }

    /// The newest link of the record's chain, and the file it is in.
    #[must_use]
    pub fn head(&self) -> (Head, Option<DayName>) {
        (self.record.head(), self.record.live())
    }

    /// The topic filters that the broker last confirmed.
    #[must_use]
    pub fn subscriptions(&self) -> &BTreeSet<String> {
        self.record.subscriptions()
    }

    /// Notes the confirmed topic filters, for the next commit.
    pub fn set_subscriptions(&mut self, filters: BTreeSet<String>) {
        self.record.set_subscriptions(filters);
    }

    /// The broker has a document.
    pub fn accepted(&mut self, number: i64) {
        self.outbox.accepted(number, self.record.batch());
    }

    /// A document waits no longer.
    pub fn settle(&mut self, number: i64, how: Settled) -> Option<Document> {
        self.outbox.remove(number, how, self.record.batch())
    }

    /// A document is too old to be handed over. What it would have replaced at the broker must not
    /// stand in its stead: an older correction can hold longer than the one that followed it.
    pub fn expire(&mut self, number: i64) {
        let expired = self.settle(number, Settled::Expired);
        if let Some(document) = expired.filter(|it| it.retain)
            && !self.outbox.holds_topic(&document.topic)
        {
            self.publish(document::cleared(document.topic));
        }
    }

    /// Puts every retained document into the outbox again: the broker has lost its memory.
    ///
    /// # Errors
    /// When the record can't be read.
    pub fn publish_standing(&mut self, now: Timestamp) -> Result<usize, RecordError> {
        let mut count = 0;
        for document in self.record.standing()? {
            let expired = document.expires.is_some_and(|expires| expires <= now);
            if !expired && !self.outbox.holds_topic(&document.topic) {
                self.outbox.add(document, self.record.batch());
                count += 1;
            }
        }
        Ok(count)
    }

    /// Adds a document that the engine did not cause.
    pub fn publish(&mut self, document: Document) {
        self.outbox.add(document, self.record.batch());
    }
}

/// Whose rows can serve a channel.
#[must_use]
pub fn sources_of(id: ChannelId, setup: &Setup) -> Vec<Source> {
    let mut sources = vec![Source::Indication(id)];
    let Some(channel) = setup.channels.get(id.0 as usize) else {
        return sources;
    };
    sources.push(Source::Reference(channel.reference));
    let influences = channel.influences.iter();
    sources.extend(influences.map(|influence| Source::Influence(influence.source)));
    let reference = setup.references.get(channel.reference.0 as usize);
    if let Some(ReferenceKind::Group { members }) = reference.map(|it| &it.kind) {
        let others = members.iter().filter(|&&member| member != id);
        sources.extend(others.copied().map(Source::Indication));
    }
    sources
}
