//! What a group of rows says about a regressor beyond its mean row: one *contrast row* for each.
//!
//! A mean row loses the movement of the level inside its segment, a daily swing in segments of half
//! a day. With R′ the rows of the group's factor below the first (its rows about their mean), and c
//! the unit vector along the regressor's column of R′, the row cᵀR′ holds all that the group can
//! tell about that regressor's effect, in one number of the same variance as one row has. So
//! groups count by these numbers as they count by their means, and how far they scatter from group
//! to group is what they are worth, whatever the correlation of the noise inside groups.
//!
//! The contrast of a second regressor is made orthogonal to the first's, so that their noise is
//! independent in white noise. The columns x·u^j, j ≥ 1, need none of their own: time hardly moves
//! inside a group.

use crate::fit::basis::{Columns, MAX_INFLUENCES};
use crate::fit::factor::Factor;
use crate::fit::kernel::MAX_WIDTH;

/// Regressors that can have a contrast: x, and each influence quantity.
pub(crate) const KINDS: usize = 1 + MAX_INFLUENCES;
/// A regressor that moves less inside a group than this part of its size is constant there, but for
/// rounding.
const LEAST_MOVEMENT: f64 = 1e-10;

/// One contrast row of one group.
#[derive(Clone, Debug)]
pub(crate) struct Contrast {
    /// Which regressor's: 0 for x, 1 + j for influence quantity j.
    pub(crate) kind: usize,
    /// cᵀR′, one entry per column and the error's.
    pub(crate) row: [f64; MAX_WIDTH],
    /// By how much noise of variance 1 in each row's regressor adds to the sum of squares of that
    /// regressor about its mean: the group's weight less one row's.
    pub(crate) noise: f64,
}

/// A group's rows about their mean, taken apart.
#[derive(Clone, Debug, Default)]
pub(crate) struct Apart {
    /// One row per regressor that moves.
    pub(crate) contrasts: Vec<Contrast>,
    /// What is left beside them.
    pub(crate) rest: Vec<[f64; MAX_WIDTH]>,
}

impl Apart {
    /// Takes the factor of a group with these columns apart.
    pub(crate) fn of(factor: &Factor, columns: Columns) -> Self {
        let width = factor.columns() + 1;
        let mut rest: Vec<[f64; MAX_WIDTH]> = (1..width)
            .map(|i| {
                let mut row = [0.0; MAX_WIDTH];
                for (j, entry) in row.iter_mut().enumerate().take(width) {
                    *entry = factor.entry(i, j);
                }
                row
            })
            .collect();
        let rows = factor.rows() as f64;
        let noise = factor.weight_sum() * (rows - 1.0) / rows;
        let mut contrasts = Vec::new();
        for (kind, place) in regressors(columns) {
            let own = length(factor, place);
            let column: Vec<f64> = rest.iter().map(|row| row[place]).collect();
            let norm = column.iter().map(|x| x * x).sum::<f64>().sqrt();
            if norm.is_nan() || norm <= LEAST_MOVEMENT * own {
                continue;
            }
            let mut row = [0.0; MAX_WIDTH];
            for (entries, x) in rest.iter().zip(&column) {
                for (to, entry) in row.iter_mut().zip(entries) {
                    *to += x / norm * entry;
                }
            }
            for (entries, x) in rest.iter_mut().zip(&column) {
                for (entry, taken) in entries.iter_mut().zip(&row) {
                    *entry -= x / norm * taken;
                }
            }
            contrasts.push(Contrast { kind, row, noise });
        }
        Self { contrasts, rest }
    }
}

/// The regressors that can have a contrast: kind and place.
fn regressors(columns: Columns) -> impl Iterator<Item = (usize, usize)> {
    let span = (columns.span_columns() > 0).then(|| (0, columns.span_place(0)));
    let influences =
        (0..columns.influence_columns()).map(move |j| (1 + j, columns.influence_place(j)));
    span.into_iter().chain(influences)
}

/// Length of a column.
fn length(factor: &Factor, place: usize) -> f64 {
    let squares: f64 = (0..=place)
        .map(|i| factor.entry(i, place) * factor.entry(i, place))
        .sum();
    squares.sqrt()
}
