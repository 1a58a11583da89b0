//! A correction and what it rests on.

use crate::event::{Cause, Rung};
use crate::fit::SpanRefusal;
use crate::setup::{ChannelId, DecisionRule, SpanSide};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// A correction: c = −ê as polynomials in time with its uncertainty (VIM 2.53; sign as in VIM
/// 2.16).
///
/// Where the span is a function of the reference value, an indication i is corrected by
/// `c = (zero(t) + Σ influences + span(t)·(i − centre)) / (1 − span(t))`; where it is one of the
/// indication, without the division.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Correction {
    /// Which channel.
    pub channel: ChannelId,
    /// Counts the channel's documents from 1.
    pub issue_number: u64,
    /// When it was issued (now, not phenomenon time).
    pub issued: Timestamp,
    /// From when on it holds.
    pub valid_from: Timestamp,
    /// Until when it holds.
    pub valid_until: Timestamp,
    /// Where on the fail-safe ladder it was issued: [`Rung::Advise`] or [`Rung::Hold`].
    pub rung: Rung,
    /// Why it is not [`Rung::Advise`].
    pub because: Option<Cause>,
    /// Zero of the polynomial's time.
    pub origin: Timestamp,
    /// The announced degree.
    pub degree: u8,
    /// Weight of each degree 0 … maximum in the mean; they sum to 1.
    pub weights: Vec<f64>,
    /// Coefficients of c at the span's centre, constant first, t in days from `origin`.
    pub zero: Vec<f64>,
    /// Coefficients of −span(t), constant first; empty where no span is claimed.
    pub span: Vec<f64>,
    /// The level at which the span terms vanish.
    pub span_centre: f64,
    /// Which side of a pair the span is a function of.
    pub span_side: SpanSide,
    /// Why no span is claimed; `None` where one is, where none is configured, and where one could
    /// be but the evidence has not lasted yet.
    pub span_refused: Option<SpanRefusal>,
    /// What acts on the error, in the order of the channel's influences.
    pub influences: Vec<InfluenceTerm>,
    /// Whether the dead zone suppresses the correction: then `zero`, `span` and the influences'
    /// coefficients are all zeros and |ĉ| is inside U.
    pub suppressed: bool,
    /// The level at which the error is judged and to which what follows belongs: the worst of those
    /// seen where a span is claimed, else the middle.
    pub judged_at: f64,
    /// c at the newest pair; while held, at issue.
    pub correction: f64,
    /// Standard uncertainty of the corrected value's systematic part at the newest pair; while
    /// held, at issue.
    pub standard_uncertainty: f64,
    /// k.
    pub coverage_factor: f64,
    /// U = k·u (and |ĉ| while suppressed).
    pub expanded_uncertainty: f64,
    /// Effective degrees of freedom behind k.
    pub degrees_of_freedom: f64,
    /// Covariance of `zero`, `span` and the influences' coefficients, in this order, row by row; of
    /// the fit alone. Without influences in force it ends before them.
    pub covariance: Vec<Vec<f64>>,
    /// By what rule the error is accepted or not.
    pub rule: DecisionRule,
    /// Where the uncorrected error stands against the maximum permissible error; `None` where no
    /// conformity can be stated (see [`Conformity`](crate::event::Conformity)).
    pub zone: Option<Zone>,
    /// Whether the uncorrected error is accepted under the rule; `None` like the zone.
    pub accepted: Option<bool>,
    /// The same for the corrected value.
    pub corrected_zone: Option<Zone>,
    /// What the fit looked at.
    pub window: WindowSeen,
    /// The criterion per degree.
    pub criterion: CriterionValues,
    /// Residual standard deviation of the largest model.
    pub residual_sd: f64,
    /// Counts the channel's stretches from 1.
    pub stretch: u32,
    /// Lowest and highest level in the window, on the side of the span: the correction was learned
    /// there.
    pub range: (f64, f64),
    /// Why earlier documents no longer hold, where this one was made anew because of a quarantine
    /// or its release.
    pub supersedes: Option<Superseding>,
}

/// A correction made anew after an order changed which values count.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Superseding {
    /// The newest document that it takes the place of; so it does of all before it whose windows
    /// hold part of the order's interval.
    pub issue_number: u64,
    /// The order's id.
    pub order: String,
}

/// What an influence quantity does to the correction.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct InfluenceTerm {
    /// Whether it is claimed: told from drift and level, and so in the correction.
    pub in_force: bool,
    /// Correction per unit of the quantity; 0 while it is not in force or suppressed.
    pub coefficient: f64,
    /// Where the quantity counts from.
    pub centre: f64,
    /// Lowest and highest value in the stretch.
    pub range: (f64, f64),
}

/// What a fit looked at.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct WindowSeen {
    /// Oldest pair.
    pub from: Timestamp,
    /// Newest pair.
    pub to: Timestamp,
    /// Pairs.
    pub pairs: u64,
    /// Closed segments.
    pub segments: u32,
    /// `n_eff`, from the closed segments and their lag-1 correlation.
    pub effective_sample_size: f64,
    /// r₁, the lag-1 correlation of the segments' residuals.
    pub lag_one: f64,
}

/// The criterion of each degree; empty until it can be judged.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct CriterionValues {
    /// `BIC` or `AICc`.
    pub name: String,
    /// Per degree 0 … maximum.
    pub values: Vec<f64>,
}

/// Where ê ± U stands against the maximum permissible error (ILAC-G8:09/2019, 4.2.3).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Zone {
    /// |e| + U ≤ MPE.
    Pass,
    /// |e| ≤ MPE < |e| + U.
    ConditionalPass,
    /// |e| − U ≤ MPE < |e|.
    ConditionalFail,
    /// |e| − U > MPE.
    Fail,
}

/// An indication with the correction in force applied.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Corrected {
    /// Which channel.
    pub channel: ChannelId,
    /// The indication's phenomenon time.
    pub phenomenon: Timestamp,
    /// The indication as it came.
    pub indication: f64,
    /// The correction added.
    pub correction: f64,
    /// indication + correction.
    pub corrected: f64,
    /// Its expanded uncertainty.
    pub expanded_uncertainty: f64,
    /// The level or an influence quantity lies beyond what the window holds: nothing was learned
    /// about the error there.
    pub beyond_range: bool,
    /// Influence quantities in force that were not told near this time, by their places: each was
    /// taken at its centre, and what it may do is inside U.
    pub influences_assumed: Vec<u8>,
    /// The correction's issue number.
    pub issue_number: u64,
}
