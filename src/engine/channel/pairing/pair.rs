//! A pair: one reference value with the indication that belongs to it, and what acted on the sensor
//! meanwhile.

use crate::fit::basis::MAX_INFLUENCES;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// One reference value with the indication that belongs to it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Pair {
    /// When the sensor showed it; the middle of the interval, where it stands for one.
    pub(crate) time: Timestamp,
    /// Indication, mean of indications, or interpolated indication.
    pub(crate) indication: f64,
    /// Reference value.
    pub(crate) reference: f64,
    /// Relative weight; 1 for a complete pair.
    pub(crate) weight: f64,
    /// The interval `[from, to)` that it stands for; empty for an instant.
    pub(super) interval: (Timestamp, Timestamp),
    /// The influence quantities, as many as the channel has; the rest is zero.
    pub(crate) influences: [f64; MAX_INFLUENCES],
}

impl Pair {
    /// A complete pair of an instant, before influence quantities are attached.
    pub(crate) fn at(time: Timestamp, indication: f64, reference: f64) -> Self {
        Self {
            time,
            indication,
            reference,
            weight: 1.0,
            interval: (time, time),
            influences: [0.0; MAX_INFLUENCES],
        }
    }

    /// The same for the mean over an interval.
    pub(super) fn over(
        (from, to): (Timestamp, Timestamp),
        indication: f64,
        reference: f64,
    ) -> Self {
        Self {
            interval: (from, to),
            ..Self::at(super::interval::middle((from, to)), indication, reference)
        }
    }

    /// The same with another relative weight.
    pub(crate) fn weighing(self, weight: f64) -> Self {
        Self { weight, ..self }
    }
}
