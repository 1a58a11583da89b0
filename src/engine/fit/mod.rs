//! Numbers only: what a stream of pairs says about the drift, without names, topics or alarms.
//!
//! Modules in reading order:
//! - [`factor`]: rows of a least-squares problem as one small triangle
//! - `kernel`: its inner loops
//! - [`basis`]: the columns of a row, and scaled time
//! - `centre`: where the regressors of a row count from
//! - `row`: one row, and its entries
//! - [`cut`]: where segments close
//! - [`segment`]: rows that enter and leave together
//! - `spare`: used-up factors
//! - [`window`]: the sliding window; `check`: whether a stored fit can be one
//! - [`before`]: the window as it was before an instant
//! - [`predict`]: a model fitted to all its rows, evaluated anywhere
//! - [`criterion`]: information criteria as plain formulas
//! - [`correlation`]: what a correlated sample is worth
//! - `between`: segments of the window, each taken as one row
//! - `gain`: how much better the richer of nested models is
//! - `climb`: when a term of the announced model goes up and down a grade
//! - `degree`: when the announced model changes
//! - [`published`]: the form of what is published
//! - `curve`: the same at one level
//! - `weights`: how much competing models weigh
//! - `settled`: what closed segments say, kept until they change
//! - [`mean`]: the published mean over degrees and its uncertainty
//! - `turn`: what a drift that turned within the window would change
//! - [`mod@line`]: the straight line of recent pairs that forecasts rest on
//! - [`forecast`]: where a line with its band meets a limit
//! - [`cadence`]: how long a drift takes to be seen
//!
//! and where the error depends on more than time:
//! - `seen`: the levels and influence quantities in a window
//! - [`model`]: which terms a model has
//! - `contrast`: what a group of rows says about a regressor beyond its mean row
//! - `joint`: segments judged by their mean rows and their contrast rows
//! - `level_noise`: how much of what varies in the level is noise
//! - `claim`: when span terms and influence quantities are announced, and when refused
//! - `blend`: the published mean over all these models

pub mod basis;
pub mod before;
mod between;
mod blend;
pub mod cadence;
mod centre;
mod check;
mod claim;
mod climb;
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
mod level_noise;
pub mod line;
pub mod mean;
pub mod model;
pub mod predict;
pub mod published;
mod row;
mod seen;
pub mod segment;
mod settled;
mod spare;
mod turn;
mod weights;
pub mod window;

use crate::cached::Cached;
use crate::event::Evidence;
use crate::fit::basis::{Columns, MAX_SPAN_DEGREE, MAX_TIME_DEGREE, MOST_INFLUENCES};
pub use crate::fit::centre::Centre;
pub use crate::fit::curve::Curve;
use crate::fit::degree::Announced;
pub use crate::fit::model::Model;
pub use crate::fit::published::{ModelWeight, Published, SpanRefusal, Terms};
pub use crate::fit::row::{Inserted, Row};
pub use crate::fit::seen::Seen;
use crate::fit::settled::{ClosedMean, Settled};
use crate::fit::window::{Cut, Window};
use crate::setup::{FitSetup, WindowLength};
use serde::{Deserialize, Serialize};

/// The fit of one stretch of one channel.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Fit {
    setup: FitSetup,
    window: Window,
    announced: Announced,
    #[serde(skip)]
    settled: Cached<Settled>,
    #[serde(skip)]
    closed_mean: Cached<ClosedMean>,
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
    /// Its grade before, see [`crate::event::DegreeChange`].
    pub from: u8,
    /// Its grade after.
    pub to: u8,
    /// The numbers that decided it; values per grade of the term.
    pub evidence: Evidence,
    /// The span was withdrawn because it can no longer be told from other things.
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
            announced: Announced::new(
                setup.forced_degree.map_or(0, |forced| forced.min(highest)),
                columns,
            ),
            settled: Cached::default(),
            closed_mean: Cached::default(),
        }
    }

    /// Goes on under an edited setup that [has the same rows](FitSetup::has_same_rows).
    pub fn edit(&mut self, setup: FitSetup) {
        debug_assert!(self.setup.has_same_rows(&setup), "rows that mean the same");
        self.setup = setup;
        self.unsettle();
    }

    /// The window that the fit looks at.
    #[must_use]
    pub fn window(&self) -> &Window {
        &self.window
    }

    /// Takes one pair.
    pub fn insert(&mut self, row: Row) -> Inserted {
        if !row.can_be_held(self.window.columns()) {
            return Inserted {
                out_of_range: true,
                ..Inserted::default()
            };
        }
        let coordinates = self.window.coordinates();
        let inserted = self.window.insert(&row);
        if inserted.closed || coordinates != self.window.coordinates() {
            self.unsettle();
        }
        inserted
    }

    /// The forced degree, or the highest that may be announced.
    fn highest_degree(&self) -> usize {
        let degree = self.setup.forced_degree.unwrap_or(self.setup.max_degree);
        usize::from(degree).min(self.window.columns().time_degree())
    }

    /// The largest model that may be announced.
    fn richest(&self) -> Model {
        // Lossless: at most 5.
        let degree = self.highest_degree().to_le_bytes()[0];
        Model {
            degree,
            ..Model::largest(self.window.columns())
        }
    }

    /// What is known of the terms beside the numbers of the mean.
    fn terms(&self) -> Terms {
        Terms {
            announced: self.model(),
            span_side: self.setup.span_side(),
            centre: self.window.centre(),
            learned: self.seen(),
            span_refused: self.announced.claims.refused,
        }
    }
}
