//! The `state` document: whether the daemon lives, what it is doing, and what it had to refuse.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::{RefusedReason, Subject};
use holdtrue_engine::setup::ChannelSetup;
use holdtrue_engine::standing::{AlarmStanding, ChannelStanding};
use holdtrue_engine::time::Timestamp;
use serde::Serialize;
use std::fmt;

/// What the daemon is doing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Doing {
    /// Taking readings, publishing corrections.
    Running,
    /// The record can't be written: nothing is taken or acknowledged until it can; the broker
    /// queues.
    RecordPaused,
    /// Told to end; published as the last word.
    Stopped,
    /// Left with the broker as the will: published when the connection breaks.
    Lost,
}

/// The state document.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct StateDocument {
    schema_version: u32,
    node: String,
    state: &'static str,
    /// When this was written; in a will: when the connection was made that it speaks for.
    at: String,
    program: &'static str,
    configuration: String,
    /// Why, where the state needs a reason.
    #[serde(skip_serializing_if = "Option::is_none")]
    why: Option<String>,
    /// What was there to say; not in a will.
    #[serde(skip_serializing_if = "Option::is_none")]
    standing: Option<Standing>,
}

/// Figures of a living daemon.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Standing {
    /// Inputs in the record.
    pub inputs: i64,
    /// The newest link of the record's hash chain. A copy kept elsewhere proves later that nothing
    /// was cut off.
    pub chain: ChainHead,
    /// Documents that the broker has not acknowledged.
    pub outbox: usize,
    /// Documents that the broker refused (no permission, too large) or that were dropped since
    /// the outbox was full, since the start.
    pub documents_refused: u64,
    /// Messages sent without delivery guarantee (quality of service 0) that were dropped while
    /// nothing could be taken, since the start.
    pub messages_dropped: u64,
    /// Connections made since the start.
    pub connections: u64,
    /// Subscriptions that the broker refuses: nothing comes in from there.
    pub subscriptions_refused: Vec<RefusedSubscription>,
    /// What came in and was not used, by subject and reason, since the record began.
    pub refused: Vec<RefusedCount>,
    /// Each channel; left out where the broker takes no document of that size.
    pub channels: Option<Vec<ChannelState>>,
}

/// The newest link of the record's hash chain.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize)]
pub struct ChainHead {
    /// Number of the batch; 0 before the first.
    pub batch: i64,
    /// Its SHA-256 digest, lower-case hexadecimal.
    pub digest: String,
    /// The record file that it is in.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub file: Option<String>,
}

/// A subscription that the broker refuses.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct RefusedSubscription {
    /// The topic filter.
    pub filter: String,
    /// What the broker said.
    pub why: String,
}

/// How one channel stands.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ChannelState {
    channel: String,
    last_indication: Option<String>,
    last_pair: Option<String>,
    pairs: u64,
    degree: Option<u8>,
    correction: Option<f64>,
    standard_uncertainty: Option<f64>,
    zone: Option<&'static str>,
    decision_rule: Option<String>,
    accepted: Option<bool>,
    corrected_zone: Option<&'static str>,
    limit_not_before: Option<String>,
    issue_number: Option<u64>,
    valid_until: Option<String>,
    locked_out: bool,
    ladder: &'static str,
    because: Option<&'static str>,
    status: &'static str,
    statuses: Vec<&'static str>,
    alarms: Vec<&'static str>,
}

impl ChannelState {
    /// Of one channel, set up so, with the alarms among `alarms` that stand on it.
    #[must_use]
    pub fn new(channel: &ChannelStanding, setup: &ChannelSetup, alarms: &[AlarmStanding]) -> Self {
        let own = |alarm: &&AlarmStanding| alarm.subject == Subject::Channel(channel.channel);
        Self {
            channel: setup.name.clone(),
            last_indication: channel.last_indication.map(word::time),
            last_pair: channel.last_pair.map(word::time),
            pairs: channel.pairs,
            degree: channel.degree,
            correction: channel.correction,
            standard_uncertainty: channel.standard_uncertainty,
            zone: channel.zone.map(word::zone),
            decision_rule: channel
                .zone
                .map(|_| word::decision_rule(setup.decision_rule)),
            accepted: channel.accepted,
            corrected_zone: channel.corrected_zone.map(word::zone),
            limit_not_before: channel.limit_not_before.map(word::time),
            issue_number: channel.issue_number,
            valid_until: channel.valid_until.map(word::time),
            locked_out: channel.locked_out,
            ladder: word::rung(channel.rung),
            because: channel.because.map(word::cause),
            status: word::status(channel.status()),
            statuses: channel.statuses.iter().copied().map(word::status).collect(),
            alarms: alarms.iter().filter(own).map(|it| it.kind.code()).collect(),
        }
    }
}

/// How often one thing was not used for one reason.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct RefusedCount {
    subject: &'static str,
    name: String,
    reason: &'static str,
    count: u64,
}

impl RefusedCount {
    /// `count` refusals of what came for `subject`, called `name`.
    #[must_use]
    pub fn new(subject: Subject, name: &str, reason: RefusedReason, count: u64) -> Self {
        Self {
            subject: word::subject(subject),
            name: name.to_owned(),
            reason: word::refused_reason(reason),
            count,
        }
    }
}

impl fmt::Display for RefusedCount {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self {
            subject,
            name,
            reason,
            count,
        } = self;
        write!(out, "{subject} {name}: {count} {reason}")
    }
}

impl StateDocument {
    /// With the least that every state document says.
    #[must_use]
    pub fn new(node: &str, fingerprint: &str, doing: Doing, at: Timestamp) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            node: node.to_owned(),
            state: match doing {
                Doing::Running => "running",
                Doing::RecordPaused => "record-paused",
                Doing::Stopped => "stopped",
                Doing::Lost => "lost",
            },
            at: word::time(at),
            program: env!("CARGO_PKG_VERSION"),
            configuration: fingerprint.to_owned(),
            why: None,
            standing: None,
        }
    }

    /// Says why.
    #[must_use]
    pub fn because(mut self, why: Option<String>) -> Self {
        self.why = why;
        self
    }

    /// Adds figures.
    #[must_use]
    pub fn with(mut self, standing: Standing) -> Self {
        self.standing = Some(standing);
        self
    }

    /// The payload.
    #[must_use]
    pub fn to_json(&self) -> Vec<u8> {
        super::to_json(self)
    }
}
