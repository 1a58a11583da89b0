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
//! - [`before`]: the window as it was before an instant
//! - [`criterion`]: information criteria as plain formulas
//! - [`correlation`]: what a correlated sample is worth
//! - `between`: segments of the window, each taken as one row
//! - `degree`: when the announced degree is raised and lowered
//! - [`mean`]: the published mean over degrees and its uncertainty
//! - [`line`]: the straight line of recent pairs that forecasts rest on
//! - [`forecast`]: where a line with its band meets a limit
//! - [`cadence`]: how long a drift takes to be seen

pub mod basis;
pub mod before;
mod between;
pub mod cadence;
pub mod correlation;
pub mod criterion;
pub mod cut;
mod degree;
pub mod factor;
pub mod forecast;
mod kernel;
pub mod line;
pub mod mean;
pub mod row;
pub mod segment;
mod spare;
pub mod window;

use crate::event::{CriterionValues, Evidence, WindowSeen};
use crate::fit::basis::{
    Columns, MAX_INFLUENCES, MAX_SPAN_DEGREE, MAX_TIME_DEGREE, MOST_INFLUENCES,
};
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
    seen: Seen,
}

/// Largest magnitude of an error or a regressor that the fit takes: its square, times any weight and number of
/// rows, is still a float.
const LARGEST_VALUE: f64 = 1e120;
/// Largest weight of a row, and the smallest one's inverse.
const LARGEST_WEIGHT: f64 = 1e30;

/// Lowest and highest regressors that entered a stretch; `None` before the first row.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Seen {
    /// Of x.
    pub x: Option<(f64, f64)>,
    /// Of each influence quantity.
    pub influences: [Option<(f64, f64)>; MAX_INFLUENCES],
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
    /// What the span terms are a function of: the reference value or the indication, as
    /// [`FitSetup::span_side`] says.
    pub x: f64,
    /// The influence quantities, as many as the setup says; the rest is not looked at.
    pub influences: [f64; MAX_INFLUENCES],
}

/// What an insertion did.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Inserted {
    /// At least one segment closed, or a late row changed a closed one: a decision is due.
    pub closed: bool,
    /// The row was older than everything in the window and was left out.
    pub too_old: bool,
    /// The row can't be computed with and was left out: an error or a regressor in use beyond
    /// ±1e120, or a weight outside 1e-30 … 1e30.
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
        let span_columns = setup
            .max_span_degree
            .map_or(0, |degree| degree.min(MAX_SPAN_DEGREE).min(highest) + 1);
        let influences = setup.influences.min(MOST_INFLUENCES);
        let columns = Columns::new(highest, span_columns, influences);
        Self {
            setup,
            window: Window::new(columns, cut),
            degree: DegreeState::new(setup.forced_degree.map_or(0, |forced| forced.min(highest))),
            seen: Seen::default(),
        }
    }

    /// Goes on under an edited setup that [has the same rows](FitSetup::has_same_rows).
    pub fn edit(&mut self, setup: FitSetup) {
        debug_assert!(self.setup.has_same_rows(&setup), "rows that mean the same");
        self.setup = setup;
    }

    /// The window that the fit looks at.
    #[must_use]
    pub fn window(&self) -> &Window {
        &self.window
    }

    /// Takes one pair.
    pub fn insert(&mut self, row: Row) -> Inserted {
        if !self.can_hold(&row) {
            return Inserted {
                out_of_range: true,
                ..Inserted::default()
            };
        }
        let Row {
            time,
            error,
            weight,
            x,
            influences,
        } = row;
        let inserted = self.window.insert(&WindowRow {
            time,
            error,
            weight,
            x,
            influences,
        });
        if !inserted.too_old {
            self.seen.take(&row, self.window.columns());
        }
        Inserted {
            closed: inserted.closed,
            too_old: inserted.too_old,
            out_of_range: false,
        }
    }

    /// Whether the row can be computed with.
    fn can_hold(&self, row: &Row) -> bool {
        let weights = 1.0 / LARGEST_WEIGHT..=LARGEST_WEIGHT;
        let columns = self.window.columns();
        let x = (columns.span_columns() > 0).then_some(row.x);
        let influences = row.influences.into_iter().take(columns.influence_columns());
        let mut values = [row.error].into_iter().chain(x).chain(influences);
        values.all(|value| value.abs() <= LARGEST_VALUE) && weights.contains(&row.weight)
    }

    /// What the plain fit of the announced model expects at `time`; `None` before there are more
    /// rows than coefficients, at enough different times.
    #[must_use]
    pub fn predict(
        &self,
        time: Timestamp,
        _x: f64,
        _influences: [f64; MAX_INFLUENCES],
    ) -> Option<Prediction> {
        self.window
            .predict(usize::from(self.degree.announced), time)
    }
}

impl Seen {
    /// Takes a row that entered.
    fn take(&mut self, row: &Row, columns: Columns) {
        widen(&mut self.x, row.x);
        let influences = self.influences.iter_mut().zip(row.influences);
        for (range, value) in influences.take(columns.influence_columns()) {
            widen(range, value);
        }
    }
}

fn widen(range: &mut Option<(f64, f64)>, value: f64) {
    if value.is_finite() {
        let (lowest, highest) = range.unwrap_or((value, value));
        *range = Some((lowest.min(value) + 0.0, highest.max(value) + 0.0));
    }
}
