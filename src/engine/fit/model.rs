//! Which terms a model of the error has, and where its columns stand.
//!
//! `e = zero(t) + span(t)·(x − centre) + Σ g_j·(q_j − centre_j)`: zero and span are polynomials in
//! time, x is the level (see [`crate::setup::FitSetup::span_side`]), the `q_j` are influence
//! quantities. Zero and span have their degrees for themselves, so "a zero that stays while the
//! span fades" is a model; it means the zero at the centre.

use crate::fit::Prediction;
use crate::fit::basis::{Columns, MAX_INFLUENCES};
use crate::fit::factor::MAX_COLUMNS;
use crate::fit::row::WindowRow;
use crate::fit::window::Window;
use crate::time::Timestamp;
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
    /// Whether there are neither span terms nor influence quantities.
    #[must_use]
    pub fn is_zero_only(self) -> bool {
        self.span.is_none() && self.influences == [false; MAX_INFLUENCES]
    }

    /// Places of its columns, in ascending order.
    pub(crate) fn places(self, columns: Columns) -> Vec<usize> {
        let time = 0..=usize::from(self.degree).min(columns.time_degree());
        let powers = self.span.map_or(0, |degree| usize::from(degree) + 1);
        let span = (0..powers.min(columns.span_columns())).map(|j| columns.span_place(j));
        let influences = (0..columns.influence_columns())
            .filter(|&j| self.influences[j])
            .map(|j| columns.influence_place(j));
        time.chain(span).chain(influences).collect()
    }

    /// The plain least-squares fit of this model to all rows of a window, evaluated for a row whose
    /// error is not looked at; `None` with no more rows than coefficients, or where its columns are
    /// not independent.
    pub(crate) fn predict(self, window: &Window, row: &WindowRow) -> Option<Prediction> {
        let columns = window.columns();
        let places = self.places(columns);
        let degrees_of_freedom = window.rows() as f64 - places.len() as f64;
        if degrees_of_freedom < 1.0 {
            return None;
        }
        let factor = window.total().choose(&places);
        let row = row.counted_from(window.centre());
        let mut all = [0.0; MAX_COLUMNS];
        let u = window.frame().scaled(row.time);
        columns.fill(u, row.x, row.influences, &mut all);
        let phi: Vec<f64> = places.iter().map(|&place| all[place]).collect();
        let coefficients = factor.solve(places.len())?;
        let leverage = factor.leverage(&phi)?;
        let relative: f64 = phi.iter().zip(&coefficients).map(|(p, c)| p * c).sum();
        let rss = factor.nested_rss()[places.len() - 1];
        Some(Prediction {
            error: window.level() + relative + 0.0,
            leverage,
            residual_sd: (rss / degrees_of_freedom).sqrt(),
            degrees_of_freedom,
        })
    }
}

impl Window {
    /// The plain least-squares fit of this degree in time to all rows, evaluated at `time`; `None`
    /// if there are no more rows than coefficients, or not at enough different times.
    ///
    /// # Panics
    /// If the window has no such degree.
    #[must_use]
    pub fn predict(&self, degree: usize, time: Timestamp) -> Option<Prediction> {
        let columns = degree + 1;
        assert!(
            columns <= self.columns().time_degree() + 1,
            "a degree of this window"
        );
        // Counts of rows stay far below 2^53.
        let degrees_of_freedom = self.rows() as f64 - columns as f64;
        if degrees_of_freedom < 1.0 {
            return None;
        }
        let coefficients = self.total().solve(columns)?;
        let phi = Columns::powers(degree, self.frame().scaled(time));
        let leverage = self.total().leverage(&phi[..columns])?;
        let relative: f64 = phi.iter().zip(&coefficients).map(|(p, c)| p * c).sum();
        let rss = self.total().nested_rss()[degree];
        Some(Prediction {
            error: self.level() + relative + 0.0,
            leverage,
            residual_sd: (rss / degrees_of_freedom).sqrt(),
            degrees_of_freedom,
        })
    }
}
