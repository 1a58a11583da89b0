//! The engine with its record and its outbox: one input in, everything that follows from it noted
//! for the next commit.

use super::Error;
use super::outbox::Outbox;
use super::restore::{self, Restored, Wanted, note_wanted};
use crate::broker::Message;
use crate::configuration::Configuration;
use crate::document::topic::Topics;
use crate::document::{self, Document};
use crate::payload::{Intake, OrderIntake, OrderMessage};
use crate::record::{Batch, Record, RecordError};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Source, Supplied};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use std::sync::atomic::AtomicBool;

/// Recorded rows given back to the engine at once, at most; the newest are left out.
const SUPPLIED_MAX: usize = 100_000;

/// The engine and what must stay in step with it.
pub(super) struct Shell {
    pub(super) setup: Setup,
    pub(super) engine: Engine,
    pub(super) record: Record,
    pub(super) outbox: Outbox,
    intake: Intake,
    orders: OrderIntake,
    filters: Vec<String>,
    batch: Batch,
    wanted: Vec<Wanted>,
    /// Kept to save allocations.
    inputs: Vec<Input>,
    outputs: Vec<Output>,
}

impl Shell {
    /// Opens the record, restores the engine, and lets the configuration take effect if it is new.
    /// `None` when `stop` was set meanwhile.
    pub(super) fn start(
        configuration: &Configuration,
        now: Timestamp,
        stop: &AtomicBool,
    ) -> Result<Option<Self>, Error> {
        let folder = &configuration.record.folder;
        let Some((mut record, restored)) = restore::open(folder, now, stop)? else {
            return Ok(None);
        };
        record.begin_session(now, env!("CARGO_PKG_VERSION"))?;
        let Restored {
            engine,
            setup,
            wanted,
            ..
        } = restored;
        let outbox = Outbox::new(record.outbox()?);
        let unchanged = setup.as_ref() == Some(&configuration.setup);
        let mut shell = Self {
            setup: setup.unwrap_or_else(|| configuration.setup.clone()),
            engine,
            batch: record.batch(),
            record,
            outbox,
            filters: filters(configuration),
            intake: Intake::new(&configuration.intake),
            orders: OrderIntake::new(&configuration.setup.node),
            wanted,
            inputs: Vec::new(),
            outputs: Vec::new(),
        };
        if !unchanged {
            shell.adopt(&configuration.setup)?;
        }
        shell.commit()?;
        shell.answer_wanted()?;
        Ok(Some(shell))
    }

    /// Lets a configuration take effect. What this says bears the old one's positions.
    fn adopt(&mut self, setup: &Setup) -> Result<(), Error> {
        tracing::info!(
            channels = setup.channels.len(),
            references = setup.references.len(),
            fingerprint = %setup.fingerprint,
            "configuration takes effect"
        );
        // From here on positions mean other channels: what was asked for by the old ones is
        // answered first.
        self.answer_wanted()?;
        self.take(&Input::Setup(Box::new(setup.clone())), &[]);
        self.setup = setup.clone();
        let topics = Topics::new(&self.setup.node);
        for standing in self.record.standing()? {
            if topics.is_orphan(&standing.topic, &self.setup) {
                self.outbox
                    .add(document::cleared(standing.topic), &mut self.batch);
            }
        }
        Ok(())
    }

    /// What to subscribe to: the sources' topics, and orders.
    pub(super) fn filters(&self) -> &[String] {
        &self.filters
    }

    /// Decodes a message and takes what it holds.
    pub(super) fn take_message(&mut self, message: &Message, received: Timestamp) {
        let mut inputs = std::mem::take(&mut self.inputs);
        inputs.clear();
        let Message {
            topic,
            payload,
            retained,
            ..
        } = message;
        if let Some(verb) = self.orders.verb(topic) {
            let order = OrderMessage {
                verb,
                payload,
                retained: *retained,
                reply_to: message.reply_to.as_ref(),
            };
            inputs.extend(self.orders.take(&order, received));
        } else {
            self.intake
                .take(topic, payload, *retained, received, &mut inputs);
        }
        for input in &inputs {
            self.take(input, &[]);
        }
        self.inputs = inputs;
    }

    /// Steps the engine and notes what followed. `positions`: of supplied rows.
    pub(super) fn take(&mut self, input: &Input, positions: &[i64]) {
        let mut outputs = std::mem::take(&mut self.outputs);
        outputs.clear();
        self.engine.step(input, &mut outputs);
        self.batch.add(input, positions, &outputs);
        note_wanted(input, &outputs, &mut self.wanted);
        for output in &outputs {
            if let Some(document) = document::render(output, &self.setup) {
                if matches!(input, Input::Tick { .. }) {
                    self.outbox.make_room_for(&document, &mut self.batch);
                }
                self.outbox.add(document, &mut self.batch);
            }
        }
        self.outputs = outputs;
    }

    /// Writes what was noted since the last commit. Then its documents may go and its messages may
    /// be acknowledged. On failure nothing is lost: the same will be tried again.
    pub(super) fn commit(&mut self) -> Result<(), RecordError> {
        if !self.batch.is_empty() {
            self.record.commit(&self.batch)?;
            self.batch = self.record.batch();
        }
        self.outbox.release();
        Ok(())
    }

    /// Answers what the engine has asked for so far. Only that: an engine that asks again and again
    /// must not stop the daemon. To be called right after a commit: the record can be searched only
    /// for what is in it.
    pub(super) fn answer_wanted(&mut self) -> Result<(), RecordError> {
        for wanted in self.wanted.clone() {
            self.supply(wanted)?;
        }
        Ok(())
    }

    /// Inputs noted since the last commit.
    pub(super) fn uncommitted(&self) -> usize {
        self.batch.inputs()
    }

    /// Whether a commit has something to write.
    pub(super) fn has_news(&self) -> bool {
        !self.batch.is_empty()
    }

    /// The broker has a document.
    pub(super) fn accepted(&mut self, number: i64) {
        self.outbox.accepted(number, &mut self.batch);
    }

    /// The broker will never take a document, or it is no longer worth sending.
    pub(super) fn settle(&mut self, number: i64) -> Option<Document> {
        self.outbox.remove(number, &mut self.batch)
    }

    /// Puts every retained document into the outbox again: the broker has lost its memory.
    pub(super) fn publish_standing(&mut self, now: Timestamp) -> Result<usize, RecordError> {
        let mut count = 0;
        for document in self.record.standing()? {
            let expired = document.expires.is_some_and(|expires| expires <= now);
            if !expired && !self.outbox.holds_topic(&document.topic) {
                self.outbox.add(document, &mut self.batch);
                count += 1;
            }
        }
        Ok(count)
    }

    /// Gives the engine recorded rows that it asked for.
    fn supply(&mut self, wanted: Wanted) -> Result<(), RecordError> {
        let Wanted { channel, from, to } = wanted;
        let mut sources = vec![Source::Indication(channel)];
        let setup = self.setup.channels.get(channel.0 as usize);
        if let Some(setup) = setup {
            sources.push(Source::Reference(setup.reference));
            let influences = setup.influences.iter();
            sources.extend(influences.map(|influence| Source::Influence(influence.source)));
        }
        let rows = self.record.readings(&sources, from, to, SUPPLIED_MAX)?;
        let (positions, readings): (Vec<i64>, Vec<_>) = rows.into_iter().unzip();
        let supplied = Supplied {
            channel,
            from,
            to,
            readings,
        };
        self.take(&Input::Supplied(supplied), &positions);
        Ok(())
    }
}

/// The sources' topics, and orders.
fn filters(configuration: &Configuration) -> Vec<String> {
    let orders = Topics::new(&configuration.setup.node).orders();
    let sources = configuration.intake.filters.iter().cloned();
    sources.chain([orders]).collect()
}
