//! `Input` and `Output`: everything the engine can be told and everything it can say.
//!
//! Both are closed sets: a new variant forces every `match` to be looked at. They derive serde so
//! that the record can store them; what is published outside is rendered from them by the shell.
//!
//! A received time must not go backwards from one input to the next; if one does, the engine goes
//! on with its own now.

mod alarm;
mod answer;
mod correction;
mod degree;
mod input;
mod ladder;
mod notice;
mod order;
mod outlook;
mod pair;
mod step;
mod validation;

pub use alarm::{AlarmChange, AlarmKind, AlarmState};
pub use answer::{
    ComparedPoint, Comparison, Fouling, OrderAnswer, Quarantined, SawTooth, Serviced,
};
pub use correction::{
    Corrected, Correction, CriterionValues, InfluenceTerm, Superseding, WindowSeen, Zone,
};
pub use degree::{DegreeChange, Evidence};
pub use input::{Gate, Reading, Refused, RefusedReason, Source, Supplied};
pub use ladder::{Cause, Rung, Status};
pub use notice::Notice;
pub use order::{
    About, Act, CheckPoint, Interval, Order, Problem, Quarantine, Release, ReplyTo, ServiceEvent,
    Wish,
};
pub use outlook::{
    AsFound, Cadence, Conformity, Drift, NoStatement, Outlook, Recalibration, Staircase,
    TimeToLimit,
};
pub use pair::{Flag, PairFate, Rejection, SPIKE_FAILS};
pub use step::Step;
pub use validation::Validation;

use crate::setup::{ChannelId, InfluenceId, ReferenceId, Setup};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// One thing the engine is told.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Input {
    /// A configuration takes effect. Channels keep their state, by name, if their pairs and rows
    /// mean the same as before (unit, lag, fit; the reference's name, kind, interval and members;
    /// where influence quantities come from),
    /// and go on under whatever else was edited; the others start anew. What is said in return
    /// bears the positions of the configuration that is replaced.
    Setup(Box<Setup>),
    /// A value arrived.
    Reading(Reading),
    /// A `valid_when` condition was told.
    Gate(Gate),
    /// The shell got something it could not turn into a reading; counted here so that the record
    /// knows.
    Refused(Refused),
    /// Time passed.
    Tick {
        /// The clock's reading.
        now: Timestamp,
    },
    /// Recorded rows that the engine asked for with [`Output::Wanted`].
    Supplied(Supplied),
    /// A person told the daemon something.
    Order(Box<Order>),
}

/// One thing the engine says.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Output {
    /// A new correction is in force.
    Correction(Box<Correction>),
    /// The channel's correction no longer holds; the retained document is to be cleared.
    Withdrawn {
        /// Which channel.
        channel: ChannelId,
        /// When.
        at: Timestamp,
        /// Why, in words.
        why: String,
    },
    /// A corrected value (only where configured).
    Corrected(Corrected),
    /// What lies ahead of a channel changed notably.
    Outlook(Box<Outlook>),
    /// The channel's outlook no longer holds; the retained document is to be cleared.
    OutlookWithdrawn {
        /// Which channel.
        channel: ChannelId,
        /// When.
        at: Timestamp,
    },
    /// An alarm changed its state.
    Alarm(AlarmChange),
    /// The announced model changed in one term, with the evidence.
    Degree(Box<DegreeChange>),
    /// The sensor stepped: its stretch is closed and a new one begins.
    Step(Box<Step>),
    /// A pair was made, and this became of it.
    Pair(PairFate),
    /// Something that a person should be able to read about; limited in rate, with a count of what
    /// was held back.
    Notice(Notice),
    /// What became of an order.
    Answer(Box<OrderAnswer>),
    /// A service found what the model had expected, or something else.
    Validation(Box<Validation>),
    /// The engine needs recorded rows of this channel.
    Wanted {
        /// Whose rows.
        channel: ChannelId,
        /// From (inclusive).
        from: Timestamp,
        /// To (exclusive).
        to: Timestamp,
    },
}

/// What every refusal is about, what every alarm and notice is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Subject {
    /// The whole node.
    Node,
    /// A channel.
    Channel(ChannelId),
    /// A reference.
    Reference(ReferenceId),
    /// A source of an influence quantity.
    Influence(InfluenceId),
}
