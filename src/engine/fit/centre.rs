//! Where the regressors of a window count from.
//!
//! The level and the influence quantities count from a common centre: the first row's, then, once
//! there are [`SETTLED`] segments, the mean of the rows so far. It stays there for the life of the
//! window, so that a coefficient means the same from document to document, unless the rows are so
//! far off that their spread would lose digits beside their distance.

use crate::fit::basis::{Columns, MAX_INFLUENCES};
use crate::fit::factor::Factor;
use serde::{Deserialize, Serialize};

/// Closed segments of which the centre is the mean.
pub(crate) const SETTLED: usize = 8;
/// A centre so many standard deviations from the mean of the rows is moved there. A distance of d
/// of them costs about 2·log₁₀(d) of sixteen digits.
pub(crate) const FAR_OFF: f64 = 30.0;

/// Where the regressor of the span terms and the influence quantities count from: however far from
/// zero they are, it costs no digits.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Centre {
    /// Of x.
    pub x: f64,
    /// Of the influence quantities.
    pub influences: [f64; MAX_INFLUENCES],
}

impl Centre {
    /// The centre further on by `shift`.
    pub(crate) fn moved(self, shift: Self) -> Self {
        let [first, second] = self.influences;
        Self {
            x: self.x + shift.x,
            influences: [first + shift.influences[0], second + shift.influences[1]],
        }
    }
}

/// How far the mean of each regressor is from the centre where that is more than `tolerated`
/// standard deviations; 0 for the others.
pub(crate) fn shift_to_mean(total: &Factor, columns: Columns, tolerated: f64) -> Centre {
    let shift_of = |place: usize| {
        let mean = total.mean_row().map_or(0.0, |mean| mean[place]);
        let about_mean: f64 = (1..=place)
            .map(|i| total.entry(i, place) * total.entry(i, place))
            .sum();
        let spread = (about_mean / total.weight_sum()).sqrt();
        if mean.is_finite() && mean.abs() > tolerated * spread {
            mean
        } else {
            0.0
        }
    };
    let mut shift = Centre::default();
    if columns.span_columns() > 0 {
        shift.x = shift_of(columns.span_place(0));
    }
    for influence in 0..columns.influence_columns() {
        shift.influences[influence] = shift_of(columns.influence_place(influence));
    }
    shift
}
