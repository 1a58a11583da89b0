//! Numbers only: what a stream of pairs says about the drift, without names, topics or alarms.
//!
//! Modules in reading order:
//! - [`factor`]: rows of a least-squares problem as one small triangle
//! - `kernel`: its inner loops

pub mod factor;
mod kernel;

use crate::event::{CriterionValues, Evidence, WindowSeen};
use crate::setup::FitSetup;
use crate::time::Timestamp;

/// The fit of one stretch of one channel.
#[derive(Clone, Debug)]
pub struct Fit {
    setup: FitSetup,
}

/// One pair as the fit sees it.
#[derive(Clone, Copy, Debug)]
pub struct Row {
    /// Phenomenon time.
    pub time: Timestamp,
    /// e = indication − reference.
    pub error: f64,
    /// Relative weight of the row, > 0; 1 for equal rows.
    pub weight: f64,
}

/// What an insertion did.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Inserted {
    /// At least one segment closed: a decision is due.
    pub closed: bool,
    /// The row was older than everything in the window and was left out.
    pub too_old: bool,
}

/// What the plain fit at the announced degree expects at an instant.
#[derive(Clone, Copy, Debug)]
pub struct Prediction {
    /// Expected error.
    pub error: f64,
    /// φᵀ(ΦᵀWΦ)⁻¹φ: variance of the expectation in units of the residual variance.
    pub leverage: f64,
    /// Residual standard deviation of the plain fit.
    pub residual_sd: f64,
    /// Degrees of freedom behind it.
    pub degrees_of_freedom: f64,
}

/// The announced degree changed.
#[derive(Clone, Debug)]
pub struct Change {
    /// Before.
    pub from: u8,
    /// After.
    pub to: u8,
    /// The numbers that decided it.
    pub evidence: Evidence,
}

/// The mean over degrees: ê(t) with its covariance.
#[derive(Clone, Debug)]
pub struct Published {
    /// Zero of the polynomial's time: the newest pair.
    pub origin: Timestamp,
    /// The announced degree.
    pub degree: u8,
    /// Weight of each degree 0 … maximum.
    pub weights: Vec<f64>,
    /// Coefficients of ê(t), constant first, t in days from `origin`; as many as the highest degree
    /// with weight needs.
    pub coefficients: Vec<f64>,
    /// Covariance of the coefficients, between-model spread included: u²(t) = φᵀ C φ.
    pub covariance: Vec<Vec<f64>>,
    /// Degrees of freedom of the fit's part of u.
    pub degrees_of_freedom: f64,
    /// Residual standard deviation of the rows under the largest model.
    pub residual_sd: f64,
    /// Criterion per degree.
    pub criterion: CriterionValues,
    /// What it looked at.
    pub window: WindowSeen,
}

impl Fit {
    /// An empty fit.
    #[must_use]
    pub fn new(setup: FitSetup) -> Self {
        Self { setup }
    }

    /// Takes one pair.
    pub fn insert(&mut self, _row: Row) -> Inserted {
        unimplemented!()
    }

    /// What the plain fit at the announced degree expects at `time`; `None` before there are enough
    /// rows.
    #[must_use]
    pub fn predict(&self, _time: Timestamp) -> Option<Prediction> {
        let _ = self.setup;
        unimplemented!()
    }

    /// Judges the degree after a segment closed. `may_raise` is false while the screen is locked
    /// out or the reference is suspect. At most one step up or down.
    pub fn decide(&mut self, _may_raise: bool) -> Option<Change> {
        unimplemented!()
    }

    /// The mean over degrees as of the newest pair; `None` before there are enough rows.
    #[must_use]
    pub fn published(&self) -> Option<Published> {
        unimplemented!()
    }
}
