//! Orders: what a person tells the daemon, and the answer.

use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What a person tells the daemon.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Order {
    /// When the daemon got it.
    pub received: Timestamp,
    /// Names the order, chosen by its sender: told twice, it is done once and answered alike. Empty
    /// where the message had none.
    pub id: String,
    /// Where the answer is wanted; `None`: on the common topic.
    pub reply_to: Option<ReplyTo>,
    /// What is wanted.
    pub wish: Wish,
}

/// Where an answer goes (MQTT 5.0, 4.10, request and response).
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct ReplyTo {
    /// Response topic.
    pub topic: String,
    /// Correlation data, given back as they came.
    pub correlation: Option<Vec<u8>>,
}

/// What an order wants.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Wish {
    /// Something was done to an instrument.
    Service(ServiceEvent),
    /// What a source gave in an interval is declared bad after the fact.
    Quarantine(Quarantine),
    /// A quarantine is taken back.
    Release(Release),
    /// The message can't be used; it is recorded and answered all the same.
    Unusable(Vec<Problem>),
}

/// One thing that is wrong with an order.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Problem {
    /// The field; empty: the whole message.
    pub field: String,
    /// What stands there, shortened.
    pub value: String,
    /// What is wrong and what to write instead.
    pub way_out: String,
}

/// Something was done to an instrument.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ServiceEvent {
    /// Who did it.
    pub by: String,
    /// To what.
    pub about: About,
    /// When it was done: what was sampled from then on is shown by a changed instrument. `None`:
    /// when the order came. (Not filled in: an order told again must equal the first.)
    pub at: Option<Timestamp>,
    /// What was done.
    pub act: Act,
    /// Readings before anything was changed.
    pub as_found: Vec<CheckPoint>,
    /// Readings after it.
    pub as_left: Vec<CheckPoint>,
    /// Serial number of the instrument that is in place afterwards.
    pub serial: Option<String>,
    /// Identifies the calibration certificate.
    pub certificate: Option<String>,
    /// Whatever else a successor should know.
    pub note: String,
}

/// What a source gave in an interval is not to be used: neither what has come nor what comes.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Quarantine {
    /// Who says so.
    pub by: String,
    /// Whose values.
    pub about: About,
    /// The phenomenon times that are bad; without an end, until it is released.
    pub interval: Interval,
    /// Why.
    pub note: String,
}

/// A span of phenomenon time.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Interval {
    /// Its first instant.
    pub from: Timestamp,
    /// The first instant after it; `None`: it has no end yet.
    pub to: Option<Timestamp>,
}

impl Interval {
    /// Whether an instant lies in it.
    #[must_use]
    pub fn holds(&self, time: Timestamp) -> bool {
        self.from <= time && self.to.is_none_or(|to| time < to)
    }
}

/// A quarantine is taken back: its values count again.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Release {
    /// Who says so.
    pub by: String,
    /// The id of the order that began the quarantine.
    pub quarantine: String,
    /// Why.
    pub note: String,
}

/// What an instrument is to the node, by its configured name.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum About {
    /// A channel's sensor.
    Channel(String),
    /// A reference.
    Reference(String),
    /// A source of an influence quantity: its topic and place, or the name that channels give it.
    Influence(String),
}

impl About {
    /// The configured name.
    #[must_use]
    pub fn name(&self) -> &str {
        match self {
            Self::Channel(name) | Self::Reference(name) | Self::Influence(name) => name,
        }
    }
}

/// What was done to an instrument. Each ends the stretch.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Act {
    /// Adjusted (VIM 3.11): made to show other values.
    Adjusted,
    /// Cleaned: fouling was taken off.
    Cleaned,
    /// Another instrument, or another sensing element, took its place: nothing is inherited.
    Replaced,
    /// Calibrated (VIM 2.39), with whatever adjustment belongs to the laboratory's routine.
    Calibrated,
}

impl Act {
    /// The fixed word of payloads, documents and texts.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Adjusted => "adjusted",
            Self::Cleaned => "cleaned",
            Self::Replaced => "replaced",
            Self::Calibrated => "calibrated",
        }
    }
}

/// An indication beside the value that it should have shown.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct CheckPoint {
    /// What the sensor showed, in the channel's unit.
    pub indication: f64,
    /// The reference value.
    pub reference: f64,
    /// Expanded uncertainty (k = 2) of the reference value; `None`: as the channel's reference.
    pub expanded_uncertainty: Option<f64>,
}

impl CheckPoint {
    /// indication − reference value.
    #[must_use]
    pub fn error(&self) -> f64 {
        self.indication - self.reference + 0.0
    }
}
