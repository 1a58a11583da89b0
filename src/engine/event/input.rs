//! What the engine is told, piece by piece: readings, gates, what was refused, recorded rows.

use crate::setup::{ChannelId, InfluenceId, ReferenceId};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Whose value a reading is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Source {
    /// A channel's indication.
    Indication(ChannelId),
    /// A reference's value.
    Reference(ReferenceId),
    /// A value of an influence quantity.
    Influence(InfluenceId),
}

/// A value with its times. Every number is finite.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Reading {
    /// Whose value.
    pub source: Source,
    /// When the daemon got it.
    pub received: Timestamp,
    /// When it was sampled; the received time if the payload told none.
    pub phenomenon: Timestamp,
    /// The value, in the channel's unit, or in the influence quantity's own.
    pub value: f64,
    /// The sender's running number, where configured; part of what makes a duplicate.
    pub sequence: Option<i64>,
    /// The sender's own status field says that the value is not to be used.
    pub excluded: bool,
}

/// A `valid_when` condition for a gated constant reference.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Gate {
    /// Which reference.
    pub reference: ReferenceId,
    /// When the daemon got it.
    pub received: Timestamp,
    /// From when on it holds.
    pub phenomenon: Timestamp,
    /// Whether the reference value holds from then on.
    pub open: bool,
}

/// Something the shell could not turn into a reading.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Refused {
    /// When the daemon got it.
    pub received: Timestamp,
    /// The topic it came on.
    pub topic: String,
    /// Whose value it would have been, where the topic tells.
    pub source: Option<Source>,
    /// Why.
    pub reason: RefusedReason,
    /// What a person needs to find the fault: the pointer, the first bytes, the value.
    pub detail: String,
}

/// Why something that came in was not used. Each has a counter.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum RefusedReason {
    /// The topic matches a subscription but no channel, reference or gate.
    UnknownTopic,
    /// Nothing in the payload.
    Empty,
    /// Larger than the limit.
    Oversize,
    /// Neither JSON, SenML nor a number, or not UTF-8.
    Unreadable,
    /// A configured pointer or record name leads nowhere.
    Missing,
    /// The pointer leads to something of another type.
    WrongType,
    /// Not a number that can be held: NaN, infinite, 1e400.
    NotFinite,
    /// The time can't be read.
    BadTime,
    /// A retained message: the broker's memory, not a new value.
    Retained,
    /// Before 1970.
    NegativeTime,
    /// Further ahead of now than clocks may differ.
    Future,
    /// Later than the channel's lateness allows.
    Late,
    /// The same value for the same instant came before.
    Duplicate,
    /// The sender's status says that it is not to be used.
    StatusExcluded,
    /// Outside the sensor's range.
    OutOfRange,
    /// Too far from what the fit expects.
    InnovationGate,
    /// No indication near enough in time to pair with.
    NoPartner,
    /// Fewer than three other members of the group had a value.
    GroupTooSmall,
    /// The sensor repeats one value, or does not follow its reference.
    Stuck,
    /// The value has changed faster than the measurand can.
    TooFast,
    /// No value of an influence quantity near enough in time to enter the fit with the pair.
    NoInfluence,
    /// Its reference value is not to be trusted: all channels of the reference disagree with it.
    ReferenceDoubted,
    /// Somebody declared the values of its source bad for that time.
    Quarantined,
}

/// Rows from the record, given back: the answer to one
/// [`Output::Wanted`](crate::event::Output::Wanted). The shell answers each once, with whatever the
/// record holds (maybe nothing), and before the next [`Input::Setup`](crate::event::Input::Setup).
///
/// They serve the reading on whose behalf they were asked for, or the refit that a quarantine set
/// going, however late they are, and nothing else: time does not move, and what was refused when it
/// first came is passed over. All sources that a channel rests on belong to its rows: its
/// indications, its reference's values, its influence quantities', its group's indications.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Supplied {
    /// Whose rows.
    pub channel: ChannelId,
    /// As it was wanted: from (inclusive).
    pub from: Timestamp,
    /// As it was wanted: to (exclusive).
    pub to: Timestamp,
    /// The readings, in the order in which they were first taken.
    pub readings: Vec<Reading>,
}
