//! What the configuration says about topics: which of them are wanted and what each carries.

use crate::payload::Pointer;
use holdtrue_engine::setup::{ChannelId, InfluenceId, ReferenceId};
use std::collections::BTreeMap;

/// Everything that [`crate::payload::Intake`] is built from.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Tables {
    /// What to subscribe to, sorted: topics, or the wildcard filters that cover them.
    pub filters: Vec<String>,
    /// What each topic carries. All uses of one topic have the same [`Format`] variant; gates stand
    /// first, then references, influence quantities and indications, so that a payload which tells
    /// them all opens its gate before its values arrive, and an indication finds what belongs to
    /// it.
    pub topics: BTreeMap<String, Vec<Use>>,
    /// Largest payload that is looked at, bytes.
    pub max_payload: usize,
}

/// One thing that a topic carries.
#[derive(Clone, Debug, PartialEq)]
pub struct Use {
    /// Whom it is for.
    pub target: Target,
    /// Where it stands in the payload.
    pub format: Format,
}

/// Whom a value is for.
#[derive(Clone, Debug, PartialEq)]
pub enum Target {
    /// A channel's indication.
    Indication(ChannelId),
    /// A reference's value.
    Reference(ReferenceId),
    /// A value of an influence quantity.
    Influence(InfluenceId),
    /// A `valid_when` condition.
    Gate {
        /// The reference that it opens and shuts.
        reference: ReferenceId,
        /// It is open while the value is one of these.
        open: Vec<Scalar>,
        /// The gate has a topic of its own. Then a retained message is taken: it tells a state, not
        /// a new value. Inside an indication's payload it is refused with the indication.
        own_topic: bool,
    },
}

/// Where a value stands in a payload.
#[derive(Clone, Debug, PartialEq)]
pub enum Format {
    /// The payload is the value.
    Plain,
    /// In a JSON document.
    Json(JsonPlace),
    /// In a SenML pack (RFC 8428, JSON).
    Senml(SenmlPlace),
}

/// A value and what belongs to it in a JSON document.
#[derive(Clone, Debug, PartialEq)]
pub struct JsonPlace {
    /// The value.
    pub value: Pointer,
    /// Its phenomenon time; without, the received time is taken.
    pub time: Option<Pointer>,
    /// Unit of a time that is a number.
    pub time_unit: TimeUnit,
    /// The sender's running number.
    pub sequence: Option<Pointer>,
    /// The sender's status.
    pub status: Option<Status<Pointer>>,
}

/// A value and what belongs to it in a SenML pack.
#[derive(Clone, Debug, PartialEq)]
pub struct SenmlPlace {
    /// Resolved name of the record.
    pub name: String,
    /// Take the record's sum (`s`) instead of its value (`v`).
    pub sum: bool,
    /// The unit that the resolved record must bear; `None`: not looked at.
    pub unit: Option<String>,
    /// The sender's status: another record of the same pack, by its resolved name.
    pub status: Option<Status<String>>,
}

/// A status field: the reading is excluded unless the field is there and holds one of the good
/// values.
#[derive(Clone, Debug, PartialEq)]
pub struct Status<Place> {
    /// Where it stands.
    pub place: Place,
    /// What it says when all is well.
    pub good: Vec<Scalar>,
}

/// A text, a number or a truth value, as a status field or a gate may hold.
#[derive(Clone, Debug, PartialEq)]
pub enum Scalar {
    /// A text, compared exactly.
    Text(String),
    /// A number, compared by value.
    Number(f64),
    /// A truth value.
    Truth(bool),
}

/// Unit of a time that is given as a number since 1970-01-01T00:00:00Z.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum TimeUnit {
    /// Seconds.
    #[default]
    Seconds,
    /// Milliseconds.
    Milliseconds,
    /// Microseconds.
    Microseconds,
    /// Nanoseconds.
    Nanoseconds,
}
