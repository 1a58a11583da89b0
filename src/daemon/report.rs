//! When and how the `state` document is published: on every change, and every half minute.

use crate::broker::Ticket;
use crate::document::state::{
    ChainHead, ChannelState, Doing, RefusedCount, Standing, StateDocument,
};
use crate::document::topic::subject_name;
use crate::keeper::Keeper;
use holdtrue_engine::time::Timestamp;
use std::time::Duration;
use tokio::time::Instant;

/// A state document comes at least this often: whoever sees none for longer knows that nobody
/// maintains the corrections.
const PERIOD: Duration = Duration::from_secs(30);

/// Figures that only the loop knows.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct LoopFigures {
    pub(super) documents_refused: u64,
    pub(super) messages_dropped: u64,
    pub(super) connections: u64,
}

/// The rhythm of the state document. Of these only the newest is worth sending.
pub(super) struct StateRhythm {
    due: Instant,
    on_its_way: bool,
}

impl StateRhythm {
    pub(super) fn new() -> Self {
        Self {
            due: Instant::now(),
            on_its_way: false,
        }
    }

    /// Something changed that the document tells.
    pub(super) fn change(&mut self) {
        self.due = Instant::now();
    }

    /// When to publish next; `None` while the last one is not answered.
    pub(super) fn due(&self) -> Option<Instant> {
        (!self.on_its_way).then_some(self.due)
    }

    /// One was handed over.
    pub(super) fn handed(&mut self) {
        self.on_its_way = true;
        self.due = Instant::now() + PERIOD;
    }

    /// The broker answered it, or the connection is gone.
    pub(super) fn answered(&mut self) {
        self.on_its_way = false;
    }

    /// Whether one waits for the broker's answer.
    pub(super) fn is_on_its_way(&self) -> bool {
        self.on_its_way
    }
}

/// The state document as of now.
pub(super) fn state_document(
    keeper: &Keeper<Ticket>,
    doing: Doing,
    why: Option<String>,
    figures: LoopFigures,
    now: Timestamp,
) -> (StateDocument, Standing) {
    let engine = keeper.engine().standing();
    let setup = keeper.setup();
    let refused = engine
        .counters
        .all()
        .iter()
        .filter_map(|count| {
            let name = subject_name(count.subject, setup)?;
            Some(RefusedCount::new(
                count.subject,
                name,
                count.reason,
                count.count,
            ))
        })
        .collect();
    let channels = engine
        .channels
        .iter()
        .filter_map(|channel| {
            let channel_setup = setup.channels.get(channel.channel.0 as usize)?;
            Some(ChannelState::new(channel, channel_setup, &engine.alarms))
        })
        .collect();
    let (head, file) = keeper.head();
    let standing = Standing {
        inputs: keeper.inputs(),
        chain: ChainHead {
            batch: head.batch,
            digest: head.digest.to_string(),
            file: file.map(|name| name.to_string()),
        },
        outbox: keeper.outbox().len(),
        documents_refused: figures.documents_refused + keeper.outbox().pushed_out(),
        messages_dropped: figures.messages_dropped,
        connections: figures.connections,
        subscriptions_refused: Vec::new(),
        refused,
        channels: Some(channels),
    };
    let document = StateDocument::new(&setup.node, &setup.fingerprint, doing, now).because(why);
    (document, standing)
}
