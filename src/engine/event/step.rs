//! A step of the sensor, confirmed, with its evidence.

use crate::setup::ChannelId;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The error of a channel changed at once. The stretch before it is closed.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Step {
    /// Which channel.
    pub channel: ChannelId,
    /// When the engine recognised it.
    pub at: Timestamp,
    /// The change happened after this pair …
    pub last_before: Option<Timestamp>,
    /// … and before this one, most likely.
    pub first_after: Timestamp,
    /// The earliest pair that may have been the first after it (about 95 %).
    pub earliest: Timestamp,
    /// The latest pair that may have been the first after it.
    pub latest: Timestamp,
    /// By how much the error changed: the mean of the pairs after it less what the model of the
    /// pairs before it expects there, in the channel's unit.
    pub size: f64,
    /// Standard uncertainty of the size: extrapolation, mean, and the correlation of the noise.
    pub size_u: f64,
    /// The error just before, extrapolated to `first_after`.
    pub before: f64,
    /// The error just after: `before` + `size`.
    pub after: f64,
    /// |size|/u …
    pub ratio: f64,
    /// … and how much of it was needed.
    pub needed: f64,
    /// By how much of twice the log likelihood a step explains the pairs better than a bend.
    pub gain_over_bend: f64,
    /// The stretch that ended.
    pub ended_stretch: u32,
    /// Pairs since the change, with which the next stretch begins.
    pub pairs: u32,
    /// Of these, those that had been kept out of the fit.
    pub taken_back: u32,
}
