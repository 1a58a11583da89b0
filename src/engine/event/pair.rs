//! A pair and its fate.

use crate::event::RefusedReason;
use crate::setup::ChannelId;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// A pair and its fate.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PairFate {
    /// Which channel.
    pub channel: ChannelId,
    /// The pair's phenomenon time.
    pub phenomenon: Timestamp,
    /// Mean or interpolated indication.
    pub indication: f64,
    /// Reference value.
    pub reference: f64,
    /// `None`: entered the fit. Otherwise what kept it out.
    pub rejected: Option<Rejection>,
}

/// What kept a pair out of the fit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Rejection {
    /// The test.
    pub reason: RefusedReason,
    /// The value it looked at.
    pub value: f64,
    /// The threshold it failed.
    pub threshold: f64,
}
