//! A change of the announced degree, with its evidence.

use crate::event::CriterionValues;
use crate::setup::ChannelId;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The announced degree changed.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct DegreeChange {
    /// Which channel.
    pub channel: ChannelId,
    /// When the engine changed it.
    pub at: Timestamp,
    /// Degree before.
    pub from: u8,
    /// Degree after.
    pub to: u8,
    /// The numbers that decided it.
    pub evidence: Evidence,
}

/// The numbers that decided a degree.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// The criterion per degree.
    pub criterion: CriterionValues,
    /// By how much the higher degree is better; the least of those in the run that decided.
    pub gain: f64,
    /// What the gain was judged by, in words: the configured criterion, or in a small sample more.
    pub judged_by: String,
    /// How much was needed.
    pub needed: f64,
    /// For how many segments in a row it held.
    pub held_segments: u32,
    /// For how many it had to hold.
    pub needed_segments: u32,
    /// Closed segments judged.
    pub segments: u32,
    /// `n_eff`.
    pub effective_sample_size: f64,
    /// r₁.
    pub lag_one: f64,
    /// Weighted residual sum of squares per degree, of the between-segments problem.
    pub rss: Vec<f64>,
}
