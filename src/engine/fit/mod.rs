//! Numbers only: what a stream of pairs says about the drift, without names, topics or alarms.
//!
//! Modules in reading order:
//! - [`factor`]: rows of a least-squares problem as one small triangle
//! - `kernel`: its inner loops
//! - [`basis`]: the columns of a row, and scaled time
//! - `centre`: where the regressors of a row count from
//! - [`row`]: one row, and its entries
//! - [`cut`]: where segments close
//! - [`segment`]: rows that enter and leave together
//! - `spare`: used-up factors
//! - [`window`]: the sliding window
//! - [`before`]: the window as it was before an instant
//! - [`ahead`]: its largest model carried on past it
//! - [`criterion`]: information criteria as plain formulas
//! - [`correlation`]: what a correlated sample is worth
//! - `between`: segments of the window, each taken as one row
//! - `gain`: how much better the richer of nested models is
//! - `ladder`: when a term of the announced model is raised and lowered
//! - `degree`: when the announced model changes
//! - [`published`]: the form of what is published
//! - `curve`: the same at one level
//! - [`mean`]: the published mean over degrees and its uncertainty
//! - `turn`: what a drift that turned within the window would change
//! - [`mod@line`]: the straight line of recent pairs that forecasts rest on
//! - [`forecast`]: where a line with its band meets a limit
//! - [`cadence`]: how long a drift takes to be seen
//!
//! and where the error depends on more than time:
//! - [`seen`]: the levels and influence quantities that a stretch has seen
//! - [`model`]: which terms a model has
//! - `contrast`: what a group of rows says about a regressor beyond its mean row
//! - `joint`: segments judged by their mean rows and their contrast rows
//! - `level_noise`: how much of what varies in the level is noise
//! - `claim`: when span terms and influence quantities are announced, and when refused
//! - `blend`: the published mean over all these models

pub mod ahead;
pub mod basis;
pub mod before;
mod between;
mod blend;
pub mod cadence;
mod centre;
mod claim;
mod contrast;
pub mod correlation;
pub mod criterion;
mod curve;
pub mod cut;
mod degree;
pub mod factor;
pub mod forecast;
mod gain;
mod joint;
mod kernel;
mod ladder;
mod level_noise;
pub mod line;
pub mod mean;
pub mod model;
pub mod published;
pub mod row;
pub mod seen;
pub mod segment;
mod spare;
mod turn;
pub mod window;

use crate::event::Evidence;
use crate::fit::basis::{
    Columns, MAX_INFLUENCES, MAX_SPAN_DEGREE, MAX_TIME_DEGREE, MOST_INFLUENCES,
};
pub use crate::fit::centre::Centre;
pub use crate::fit::curve::Curve;
use crate::fit::degree::Announced;
pub use crate::fit::model::Model;
pub use crate::fit::published::{ModelWeight, Published, SpanRefusal, Terms};
pub use crate::fit::seen::Seen;
use crate::fit::window::{Cut, Window, WindowRow};
use crate::setup::{FitSetup, WindowLength};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The fit of one stretch of one channel.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Fit {
    setup: FitSetup,
    window: Window,
    announced: Announced,
    seen: Seen,
}

/// Largest magnitude of an error or a regressor that the fit takes: its square, times any weight
/// and number of rows, is still a float.
const LARGEST_VALUE: f64 = 1e120;
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

/// One term of the announced model.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Term {
    /// The degree of the zero in time.
    Zero,
    /// The span.
    Span,
    /// The influence quantity at this place.
    Influence(u8),
}

/// The announced model changed in one term.
#[derive(Clone, Debug)]
pub struct Change {
    /// Which.
    pub term: Term,
    /// Before: the degree of the zero; how many span coefficients (none, or degree + 1); whether
    /// (1) or not (0) an influence quantity is in use.
    pub from: u8,
    /// After.
    pub to: u8,
    /// The numbers that decided it; values per rung of the term.
    pub evidence: Evidence,
    /// A span was withdrawn because it can no longer be told from other things.
    pub refused: Option<SpanRefusal>,
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
            announced: Announced::new(setup.forced_degree.map_or(0, |forced| forced.min(highest))),
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
        x: f64,
        influences: [f64; MAX_INFLUENCES],
    ) -> Option<Prediction> {
        let model = self.model();
        let zero = || self.window.predict(usize::from(model.degree), time);
        if model.is_zero_only() {
            return zero();
        }
        let row = WindowRow {
            time,
            error: 0.0,
            weight: 1.0,
            x,
            influences,
        };
        model.predict(&self.window, &row).or_else(zero)
    }

    /// What is known of the terms beside the numbers of the mean.
    fn terms(&self) -> Terms {
        Terms {
            announced: self.model(),
            span_side: self.setup.span_side(),
            centre: self.window.centre(),
            learned: self.seen,
            span_refused: self.announced.claims.refused,
        }
    }
}
