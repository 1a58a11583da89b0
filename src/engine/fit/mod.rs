//! Numbers only: what a stream of pairs says about the drift, without names, topics or alarms.
//!
//! Modules in reading order:
//! - [`factor`]: rows of a least-squares problem as one small triangle
//! - `kernel`: its inner loops
//! - [`basis`]: the columns of a row, and scaled time
//! - [`row`]: one row, and its entries
//! - [`cut`]: where segments close
//! - [`segment`]: rows that enter and leave together
//! - `spare`: used-up factors
//! - [`window`]: the sliding window
//! - [`criterion`]: information criteria as plain formulas
//! - [`correlation`]: what a correlated sample is worth
//! - `between`: segments of the window, each taken as one row
//! - `degree`: when the announced degree is raised and lowered
//! - [`mean`]: the published mean over degrees and its uncertainty

pub mod basis;
mod between;
pub mod correlation;
pub mod criterion;
pub mod cut;
mod degree;
pub mod factor;
mod kernel;
pub mod mean;
pub mod row;
pub mod segment;
mod spare;
pub mod window;

use crate::event::{CriterionValues, Evidence, WindowSeen};
use crate::fit::basis::{Columns, MAX_INFLUENCES, MAX_TIME_DEGREE};
use crate::fit::degree::DegreeState;
use crate::fit::window::{Cut, Window, WindowRow};
use crate::setup::{FitSetup, WindowLength};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The fit of one stretch of one channel.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Fit {
    setup: FitSetup,
    window: Window,
    degree: DegreeState,
}

/// Largest magnitude of an error that the fit takes: its square, times any weight and number of
/// rows, is still a float.
const LARGEST_ERROR: f64 = 1e120;
/// Largest weight of a row, and the smallest one's inverse.
const LARGEST_WEIGHT: f64 = 1e30;

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
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Inserted {
    /// At least one segment closed, or a late row changed a closed one: a decision is due.
    pub closed: bool,
    /// The row was older than everything in the window and was left out.
    pub too_old: bool,
    /// The row can't be computed with and was left out: an error beyond ±1e120 or a weight outside
    /// 1e-30 … 1e30.
    pub out_of_range: bool,
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
    /// An empty fit. Degree 0 is announced, or the forced one.
    #[must_use]
    pub fn new(setup: FitSetup) -> Self {
        let cut = match setup.window {
            WindowLength::Time(length) => Cut::time(length, setup.segments),
            WindowLength::Pairs(pairs) => Cut::rows(pairs, setup.segments),
        };
        let highest = setup.max_degree.max(setup.forced_degree.unwrap_or(0));
        let highest = highest.min(MAX_TIME_DEGREE);
        Self {
            setup,
            window: Window::new(Columns::time(highest), cut),
            degree: DegreeState::new(setup.forced_degree.map_or(0, |forced| forced.min(highest))),
        }
    }

    /// The window that the fit looks at.
    #[must_use]
    pub fn window(&self) -> &Window {
        &self.window
    }

    /// Takes one pair.
    pub fn insert(&mut self, row: Row) -> Inserted {
        let weights = 1.0 / LARGEST_WEIGHT..=LARGEST_WEIGHT;
        if !(row.error.abs() <= LARGEST_ERROR && weights.contains(&row.weight)) {
            return Inserted {
                out_of_range: true,
                ..Inserted::default()
            };
        }
        let Row {
            time,
            error,
            weight,
        } = row;
        let influences = [0.0; MAX_INFLUENCES];
        let inserted = self.window.insert(&WindowRow {
            time,
            error,
            weight,
            x: 0.0,
            influences,
        });
        Inserted {
            closed: inserted.closed,
            too_old: inserted.too_old,
            out_of_range: false,
        }
    }

    /// What the plain fit at the announced degree expects at `time`; `None` before there are more
    /// rows than coefficients, at enough different times.
    #[must_use]
    pub fn predict(&self, time: Timestamp) -> Option<Prediction> {
        self.window
            .predict(usize::from(self.degree.announced), time)
    }
}
