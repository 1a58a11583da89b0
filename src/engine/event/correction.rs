//! A correction and what it rests on.

use crate::event::{Cause, Rung};
use crate::setup::{ChannelId, DecisionRule};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// A correction: c(t) = −ê(t) as a polynomial with its uncertainty (VIM 2.53; sign as in VIM 2.16).
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
    /// Coefficients of c(t), constant first, t in days from `origin`.
    pub zero: Vec<f64>,
    /// Whether the dead zone suppresses the correction: then `zero` is all zeros and |ĉ| is inside
    /// U.
    pub suppressed: bool,
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
    /// Covariance of `zero` (row by row, unit² per day^(i+j)), of the fit alone.
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
    /// Lowest and highest reference value in the stretch.
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
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
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
    /// The correction's issue number.
    pub issue_number: u64,
}
