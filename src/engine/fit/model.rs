//! Which terms a model of the error has, and where its columns stand.
//!
//! `e = zero(t) + span(t)·(x − centre) + Σ g_j·(q_j − centre_j)`: zero and span are polynomials in
//! time, x is the level (see [`crate::setup::FitSetup::span_side`]), the `q_j` are influence
//! quantities. Zero and span have their degrees for themselves, so "a zero that stays while the
//! span fades" is a model; it means the zero at the centre.

use crate::fit::basis::{Columns, MAX_INFLUENCES};
use serde::{Deserialize, Serialize};

/// The terms of a model.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Model {
    /// Degree of the zero in time.
    pub degree: u8,
    /// Degree of the span in time; `None`: no span terms.
    pub span: Option<u8>,
    /// Which influence quantities are in use.
    pub influences: [bool; MAX_INFLUENCES],
}

impl Model {
    /// All that these columns can hold.
    pub(crate) fn largest(columns: Columns) -> Self {
        // Lossless: degrees and counts of columns are at most 8.
        let small = |count: usize| count.to_le_bytes()[0];
        Self {
            degree: small(columns.time_degree()),
            span: small(columns.span_columns()).checked_sub(1),
            influences: std::array::from_fn(|j| j < columns.influence_columns()),
        }
    }

    /// Whether there are neither span terms nor influence quantities.
    #[must_use]
    pub fn is_zero_only(self) -> bool {
        self.span.is_none() && self.influences == [false; MAX_INFLUENCES]
    }

    /// How many span coefficients it has.
    pub(crate) fn span_terms(self) -> usize {
        self.span.map_or(0, |degree| usize::from(degree) + 1)
    }

    /// Places of its columns, in ascending order.
    pub(crate) fn places(self, columns: Columns) -> Vec<usize> {
        let time = 0..=usize::from(self.degree).min(columns.time_degree());
        let spans = self.span_terms().min(columns.span_columns());
        let span = (0..spans).map(|j| columns.span_place(j));
        let influences = (0..columns.influence_columns())
            .filter(|&j| self.influences[j])
            .map(|j| columns.influence_place(j));
        time.chain(span).chain(influences).collect()
    }
}
