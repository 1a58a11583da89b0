//! What the largest model fitted to a window says of rows that the window does not hold.

use crate::fit::basis::Columns;
use crate::fit::factor::PerColumn;
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::window::Window;
use crate::fit::{Fit, Row};

/// Rows that a model must have beyond its coefficients before it is carried on past its window.
const LEAST_FREEDOM: f64 = 4.0;

/// The largest model of a window, carried on.
#[derive(Debug)]
pub struct Ahead<'a> {
    window: &'a Window,
    /// Columns of the model: all of the window's, or those of time alone.
    columns: usize,
    coefficients: PerColumn,
    /// Residual standard deviation of a row of weight 1.
    pub residual_sd: f64,
    /// n − p.
    pub degrees_of_freedom: f64,
}

impl Fit {
    /// The largest model, carried on: all columns where the rows tell them apart, else those of
    /// time; `None` with fewer than four rows more than coefficients.
    #[must_use]
    pub fn ahead(&self) -> Option<Ahead<'_>> {
        let window = self.window();
        let columns = window.columns();
        [columns.count(), columns.time_degree() + 1]
            .into_iter()
            .find_map(|count| Ahead::new(window, count))
    }
}

impl<'a> Ahead<'a> {
    fn new(window: &'a Window, columns: usize) -> Option<Self> {
        let total = window.total();
        let degrees_of_freedom = total.rows() as f64 - columns as f64;
        if degrees_of_freedom < LEAST_FREEDOM {
            return None;
        }
        let coefficients = total.solve(columns)?;
        let rss = total.nested_rss()[columns - 1];
        Some(Self {
            window,
            columns,
            coefficients,
            residual_sd: (rss / degrees_of_freedom).sqrt(),
            degrees_of_freedom,
        })
    }

    fn regressors(&self, row: &Row) -> [f64; MAX_WIDTH] {
        let mut phi = [0.0; MAX_WIDTH];
        let columns: Columns = self.window.columns();
        let u = self.window.frame().scaled(row.time);
        columns.fill(u, row.x, row.influences, &mut phi);
        phi
    }

    /// Error of the row beyond what the model expects of it.
    #[must_use]
    pub fn residual(&self, row: &Row) -> f64 {
        let phi = self.regressors(row);
        let pairs = phi[..self.columns].iter().zip(&self.coefficients);
        let expected: f64 = pairs.map(|(p, c)| p * c).sum();
        row.error - self.window.level() - expected
    }

    /// What the model expects of the row.
    #[must_use]
    pub fn expected(&self, row: &Row) -> f64 {
        row.error - self.residual(row)
    }

    /// φᵀ(ΦᵀWΦ)⁻¹φ of the rows' mean: the variance of the mean expectation, in units of a row's.
    #[must_use]
    pub fn leverage(&self, rows: &[Row]) -> Option<f64> {
        let mut mean = [0.0; MAX_WIDTH];
        for row in rows {
            for (sum, entry) in mean.iter_mut().zip(self.regressors(row)) {
                *sum += entry / rows.len() as f64;
            }
        }
        self.window.total().leverage(&mean[..self.columns])
    }
}
