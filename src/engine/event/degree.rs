//! A change of the announced model in one term, with its evidence.

use crate::event::CriterionValues;
use crate::fit::{SpanRefusal, Term};
use crate::setup::ChannelId;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The announced model changed in one term: the degree of the zero, the span, or an influence
/// quantity. How rich a term is, is its grade: the degree of the zero; how many coefficients the
/// span has, none or its degree + 1; whether (1) or not (0) an influence quantity is in use.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct DegreeChange {
    /// Which channel.
    pub channel: ChannelId,
    /// When the engine changed it.
    pub at: Timestamp,
    /// Which term.
    pub term: Term,
    /// Grade before.
    pub from: u8,
    /// Grade after.
    pub to: u8,
    /// The numbers that decided it.
    pub evidence: Evidence,
    /// The span was withdrawn because it can no longer be told from other things, whatever it
    /// gains.
    pub refused: Option<SpanRefusal>,
}

/// The numbers that decided a grade.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// The criterion per grade of the term, given all other terms.
    pub criterion: CriterionValues,
    /// By how much the higher grade is better; the least of those in the run that decided.
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
    /// Weighted residual sum of squares per grade, of the between-segments problem.
    pub rss: Vec<f64>,
}
