//! What the fit publishes: the mean over models with its covariance, and what is known of its
//! terms.

use crate::event::{CriterionValues, WindowSeen};
use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::centre::Centre;
use crate::fit::model::Model;
use crate::fit::seen::Seen;
use crate::setup::SpanSide;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Why a span can't be claimed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum SpanRefusal {
    /// There are not enough segments yet.
    FewSegments,
    /// The level does not vary beyond what time and the influence quantities explain.
    NoSpread,
    /// Noise in the level would move the slope by more than half of its uncertainty.
    RegressorNoise,
}

/// A model's share in the mean.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct ModelWeight {
    /// Which.
    pub model: Model,
    /// Its weight; all sum to 1.
    pub weight: f64,
}

/// What is known of the terms beside the numbers of the mean.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Terms {
    /// The announced model.
    pub announced: Model,
    /// Which side of a pair the span is a function of.
    pub span_side: SpanSide,
    /// Where the level and the influence quantities count from.
    pub centre: Centre,
    /// Levels and influence quantities that the stretch has seen: the mean is valid there.
    pub learned: Seen,
    /// Why a span can't be claimed as of the last judgement; `None` where it can, or where none is
    /// configured.
    pub span_refused: Option<SpanRefusal>,
}

/// The mean over models: ê(t, x, q) with its covariance.
///
/// `ê = Σ_k coefficients_k·t^k + (x − centre)·Σ_k span_k·t^k + Σ_j influences_j·(q_j − centre_j)`.
/// Until span terms or influence quantities are claimed, it is a mean over degrees of the zero,
/// with no `span` and no `influences`.
#[derive(Clone, Debug)]
pub struct Published {
    /// Zero of the polynomials' time: the newest pair.
    pub origin: Timestamp,
    /// The announced degree.
    pub degree: u8,
    /// Weight of each degree 0 … maximum of the zero.
    pub weights: Vec<f64>,
    /// Weight of each model.
    pub models: Vec<ModelWeight>,
    /// Coefficients of the zero, constant first, t in days from `origin`; as many as the highest
    /// degree with weight needs.
    pub coefficients: Vec<f64>,
    /// Coefficients of the span, constant first; empty where none is claimed.
    pub span: Vec<f64>,
    /// Effect of each configured influence quantity per unit of it; empty where none is claimed.
    pub influences: Vec<f64>,
    /// Covariance of `coefficients`, `span` and `influences`, in this order, between-model spread
    /// included: u² = φᵀ C φ.
    pub covariance: Vec<Vec<f64>>,
    /// What a drift that turned within the window adds to u² at the newest pair, beyond φᵀCφ: see
    /// `turn`. Zero with a forced degree, and where span terms or influence quantities are claimed.
    pub turn_variance: f64,
    /// Degrees of freedom of the fit's part of u.
    pub degrees_of_freedom: f64,
    /// Residual standard deviation of the rows under the largest model.
    pub residual_sd: f64,
    /// Criterion per degree.
    pub criterion: CriterionValues,
    /// What it looked at.
    pub window: WindowSeen,
    /// What is known of its terms.
    pub terms: Terms,
}

impl Published {
    /// ê and its variance at an instant, a level (on the side that [`Terms::span_side`] names) and
    /// influence quantities. Beyond [`Terms::learned`] it extrapolates.
    #[must_use]
    pub fn evaluate(
        &self,
        time: Timestamp,
        x: f64,
        influences: [f64; MAX_INFLUENCES],
    ) -> (f64, f64) {
        let t = time.since(self.origin).days();
        let centre = self.terms.centre;
        let powers = |count: usize, first: f64| {
            std::iter::successors(Some(first), move |power| Some(power * t)).take(count)
        };
        let phi: Vec<f64> = powers(self.coefficients.len(), 1.0)
            .chain(powers(self.span.len(), x - centre.x))
            .chain((0..self.influences.len()).map(|j| influences[j] - centre.influences[j]))
            .collect();
        let all = self
            .coefficients
            .iter()
            .chain(&self.span)
            .chain(&self.influences);
        let error: f64 = all.zip(&phi).map(|(value, phi)| value * phi).sum();
        let variance: f64 = self
            .covariance
            .iter()
            .zip(&phi)
            .map(|(row, own)| own * row.iter().zip(&phi).map(|(c, phi)| c * phi).sum::<f64>())
            .sum();
        (error + 0.0, variance.max(0.0))
    }
}
