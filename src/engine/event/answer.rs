//! What became of an order.

use crate::event::{About, Act, Interval, Problem, ReplyTo};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What became of an order. An order told again is answered alike.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct OrderAnswer {
    /// When it was answered first.
    pub at: Timestamp,
    /// The order's own id; empty where it had none.
    pub id: String,
    /// Where the answer is wanted.
    pub reply_to: Option<ReplyTo>,
    /// Whether it was done.
    pub accepted: bool,
    /// What was done, or that nothing was, in a sentence.
    pub text: String,
    /// Everything that stands in its way; empty if accepted.
    pub problems: Vec<Problem>,
    /// What a service event led to, if accepted.
    pub service: Option<Serviced>,
    /// What a quarantine or its release sets going.
    pub quarantine: Option<Quarantined>,
}

/// What a quarantine, or its release, sets going.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Quarantined {
    /// The id of the order that began the quarantine.
    pub quarantine: String,
    /// Whose values.
    pub about: About,
    /// The phenomenon times that are, or were, bad.
    pub interval: Interval,
    /// The values count again.
    pub released: bool,
    /// The channels that rest on these values, by name: corrections of theirs, from windows that
    /// hold part of the interval, are to be looked at.
    pub channels: Vec<String>,
    /// Those of them whose present fit is made anew from the record; each holds until then.
    pub refitted: Vec<String>,
}

/// What a service event led to.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Serviced {
    /// What was served.
    pub about: About,
    /// What was done.
    pub act: Act,
    /// When it was done.
    pub performed: Timestamp,
    /// The channels whose stretch ended with it, by name, with the number of the new stretch.
    pub stretches: Vec<(String, u32)>,
    /// What the as-found readings say of the model.
    pub comparison: Option<Comparison>,
    /// Fouling and drift apart, as far as the readings tell.
    pub fouling: Option<Fouling>,
    /// The sensor's cleanings so far.
    pub saw_tooth: Option<SawTooth>,
}

/// As-found readings beside what the model expected (field check of the model).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Comparison {
    /// Error that the model expected of the deciding reading, in the channel's unit.
    pub predicted_error: f64,
    /// Its expanded uncertainty (95 %).
    pub predicted_uncertainty: f64,
    /// One entry for each as-found reading.
    pub points: Vec<ComparedPoint>,
    /// Eₙ of the deciding reading: the one with the largest |Eₙ|.
    pub en: f64,
    /// |Eₙ| ≤ 1 at every point.
    pub satisfactory: bool,
}

/// One as-found reading beside what the model expected.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct ComparedPoint {
    /// What the sensor showed.
    pub indication: f64,
    /// The reference value.
    pub reference: f64,
    /// As-found error.
    pub error: f64,
    /// Expanded uncertainty (k = 2) of the as-found error.
    pub uncertainty: f64,
    /// Error that the model expected at this instant and level.
    pub predicted_error: f64,
    /// Its expanded uncertainty (95 %).
    pub predicted_uncertainty: f64,
    /// Eₙ = (predicted − found) / √(U² + Uᵣ²) (ISO 13528, from memory).
    pub en: f64,
}

/// The two errors of a fouled sensor, signed as errors: what was found is the sum of both.
///
/// The two-error idea of USGS Techniques and Methods 1-D3 (from memory). That protocol states
/// corrections, (after − before) − ambient change, so its signs are the opposite of these.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Fouling {
    /// The part of the error that went with the cleaning: error before − error after. Each error
    /// is against the reference value of its own moment, so that a change of the ambient value
    /// during the service drops out.
    pub fouling_error: f64,
    /// The error that remained: found in a standard after the cleaning, at the same visit; `None`
    /// while none has been told.
    pub drift_error: Option<f64>,
}

/// A sensor's cleanings so far. (Their errors run as the teeth of a saw.)
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct SawTooth {
    /// Cleanings told.
    pub cleanings: u64,
    /// Mean fouling error of those with readings before and after; `None` without any.
    pub mean_fouling: Option<f64>,
    /// Mean time between two cleanings, days; `None` before there are two.
    pub mean_interval_days: Option<f64>,
}
