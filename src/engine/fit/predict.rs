//! The plain least-squares fit of a model to all rows of a window, evaluated anywhere: what pairs
//! are screened by, and what a step is measured against.

use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::factor::{Factor, PerColumn};
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::window::Window;
use crate::fit::{Fit, Model, Row};
use crate::time::Timestamp;
use std::borrow::Cow;

/// Rows that a model must have beyond its coefficients before a row is screened by it.
const LEAST_FREEDOM: f64 = 1.0;
/// The same before it is carried on past its window.
const LEAST_FREEDOM_AHEAD: f64 = 4.0;

/// What the plain fit of a model expects of a row.
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

/// A model fitted to all rows of a window, each with its own weight.
#[derive(Debug)]
pub struct Fitted<'a> {
    window: &'a Window,
    /// Of the model's columns, or of more where they are the first ones.
    factor: Cow<'a, Factor>,
    /// Where the model's columns stand among the window's; `None`: they are the first ones.
    places: Option<Vec<usize>>,
    /// How many columns the model has.
    count: usize,
    coefficients: PerColumn,
    /// Residual standard deviation of a row of weight 1.
    pub residual_sd: f64,
    /// n − p.
    pub degrees_of_freedom: f64,
}

impl Fit {
    /// What the plain fit of the announced model expects at `time`; `None` before there are more
    /// rows than coefficients, at enough different times. Terms that the rows can't tell apart yet
    /// are left out.
    #[must_use]
    pub fn predict(
        &self,
        time: Timestamp,
        x: f64,
        influences: [f64; MAX_INFLUENCES],
    ) -> Option<Prediction> {
        let row = Row {
            time,
            error: 0.0,
            weight: 1.0,
            x,
            influences,
        };
        self.fitted(self.model(), LEAST_FREEDOM)?.prediction(&row)
    }

    /// The largest model, carried on: all terms where the rows tell them apart, else those of time;
    /// `None` with fewer than four rows more than coefficients.
    #[must_use]
    pub fn ahead(&self) -> Option<Fitted<'_>> {
        let largest = Model::largest(self.window().columns());
        self.fitted(largest, LEAST_FREEDOM_AHEAD)
    }

    /// A model, or its terms in time alone where the rows can't tell it apart.
    fn fitted(&self, model: Model, least_freedom: f64) -> Option<Fitted<'_>> {
        let window = self.window();
        let zero = || Fitted::first(window, usize::from(model.degree) + 1, least_freedom);
        Fitted::of(window, model, least_freedom).or_else(zero)
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
        assert!(
            degree <= self.columns().time_degree(),
            "a degree of this window"
        );
        Fitted::first(self, degree + 1, LEAST_FREEDOM)?.prediction(&row_at(time))
    }

    /// The error that [`Window::predict`] expects, alone: a third of the work.
    ///
    /// # Panics
    /// If the window has no such degree.
    #[must_use]
    pub fn expected(&self, degree: usize, time: Timestamp) -> Option<f64> {
        assert!(
            degree <= self.columns().time_degree(),
            "a degree of this window"
        );
        if freedom(self, degree + 1) < LEAST_FREEDOM {
            return None;
        }
        let coefficients = self.total().solve(degree + 1)?;
        let mut entries = [0.0; MAX_WIDTH];
        self.coordinates().fill(&row_at(time), &mut entries);
        let pairs = entries[..=degree].iter().zip(&coefficients);
        let relative: f64 = pairs.map(|(entry, coefficient)| entry * coefficient).sum();
        Some(self.level() + relative + 0.0)
    }
}

/// A row of which only the time counts.
fn row_at(time: Timestamp) -> Row {
    Row {
        time,
        error: 0.0,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; MAX_INFLUENCES],
    }
}

impl<'a> Fitted<'a> {
    /// The plain fit of a model; `None` with fewer than `least_freedom` rows more than
    /// coefficients, or where its columns are not independent.
    fn of(window: &'a Window, model: Model, least_freedom: f64) -> Option<Self> {
        if model.is_zero_only() {
            return Self::first(window, usize::from(model.degree) + 1, least_freedom);
        }
        let places = model.places(window.columns());
        let degrees_of_freedom = freedom(window, places.len());
        if degrees_of_freedom < least_freedom {
            return None;
        }
        let factor = Cow::Owned(window.total().choose(&places));
        Self::solved(window, factor, places.len(), degrees_of_freedom).map(|fitted| Self {
            places: Some(places),
            ..fitted
        })
    }

    /// The same for the model of the first `count` columns, which needs no factor of its own.
    fn first(window: &'a Window, count: usize, least_freedom: f64) -> Option<Self> {
        let degrees_of_freedom = freedom(window, count);
        if degrees_of_freedom < least_freedom {
            return None;
        }
        Self::solved(
            window,
            Cow::Borrowed(window.total()),
            count,
            degrees_of_freedom,
        )
    }

    fn solved(
        window: &'a Window,
        factor: Cow<'a, Factor>,
        count: usize,
        degrees_of_freedom: f64,
    ) -> Option<Self> {
        let coefficients = factor.solve(count)?;
        let rss = factor.nested_rss()[count - 1];
        Some(Self {
            window,
            factor,
            places: None,
            count,
            coefficients,
            residual_sd: (rss / degrees_of_freedom).sqrt(),
            degrees_of_freedom,
        })
    }

    /// The entries of a row in the model's columns.
    fn entries(&self, row: &Row) -> [f64; MAX_WIDTH] {
        let mut all = [0.0; MAX_WIDTH];
        self.window.coordinates().fill(row, &mut all);
        let Some(places) = &self.places else {
            return all;
        };
        let mut own = [0.0; MAX_WIDTH];
        for (to, &place) in own.iter_mut().zip(places) {
            *to = all[place];
        }
        own
    }

    /// What the model expects of a row with these entries, counted from the window's level.
    fn relative(&self, entries: &[f64; MAX_WIDTH]) -> f64 {
        let pairs = entries[..self.count].iter().zip(&self.coefficients);
        pairs.map(|(entry, coefficient)| entry * coefficient).sum()
    }

    /// What the model expects of the row.
    #[must_use]
    pub fn expected(&self, row: &Row) -> f64 {
        self.window.level() + self.relative(&self.entries(row)) + 0.0
    }

    /// Error of the row beyond what the model expects of it.
    #[must_use]
    pub fn residual(&self, row: &Row) -> f64 {
        row.error - self.window.level() - self.relative(&self.entries(row))
    }

    /// φᵀ(ΦᵀWΦ)⁻¹φ of the rows' mean: the variance of the mean expectation, in units of a row's.
    #[must_use]
    pub fn leverage(&self, rows: &[Row]) -> Option<f64> {
        let mut mean = [0.0; MAX_WIDTH];
        for row in rows {
            for (sum, entry) in mean.iter_mut().zip(self.entries(row)) {
                *sum += entry / rows.len() as f64;
            }
        }
        self.factor.leverage(&mean[..self.count])
    }

    /// All that the model says of a row.
    fn prediction(&self, row: &Row) -> Option<Prediction> {
        let entries = self.entries(row);
        Some(Prediction {
            error: self.window.level() + self.relative(&entries) + 0.0,
            leverage: self.factor.leverage(&entries[..self.count])?,
            residual_sd: self.residual_sd,
            degrees_of_freedom: self.degrees_of_freedom,
        })
    }
}

/// n − p.
fn freedom(window: &Window, count: usize) -> f64 {
    // Counts of rows stay far below 2^53.
    window.rows() as f64 - count as f64
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};
    use approx::assert_relative_eq;

    const DAY: i64 = 86_400_000_000_000;

    /// A row of an error that depends on the level by −5 % and on a temperature by 0.02 a degree,
    /// with the level far from zero.
    fn row(day: u32) -> Row {
        let day_of = f64::from(day);
        // Fractional parts of multiples of irrational numbers: no pattern, and no generator.
        let x = 950.0 + 100.0 * (0.618_033_988_749_895 * day_of).fract();
        let temperature = 17.0 + 6.0 * (0.754_877_666_246_693 * day_of).fract();
        Row {
            time: Timestamp(1_700_000_000_000_000_000 + i64::from(day) * DAY),
            error: 0.25 - 0.05 * x + 0.02 * temperature + 0.001 * day_of,
            weight: 1.0,
            x,
            influences: [temperature, 0.0],
        }
    }

    fn fit(max_span_degree: Option<u8>, influences: u8, rows: u32) -> Fit {
        let mut fit = Fit::new(FitSetup {
            window: WindowLength::Pairs(256),
            segments: 64,
            max_degree: 2,
            forced_degree: None,
            criterion: Criterion::Bic,
            max_span_degree,
            influences,
            noise: PairNoise::default(),
        });
        for day in 0..rows {
            fit.insert(row(day));
        }
        fit
    }

    /// The error is exactly one of the largest model's, whatever its regressors count from: errors
    /// of 50 have their last digit at 7e-15, and a solve of seven columns loses some.
    #[test]
    fn the_largest_model_is_carried_on_with_level_and_temperature() {
        for rows in [24, 200, 700] {
            let fit = fit(Some(1), 1, rows);
            let ahead = fit.ahead().expect("rows enough");
            for day in [rows, rows + 1, rows + 40] {
                let row = row(day);
                assert!(ahead.residual(&row).abs() < 1e-9, "{rows} rows, {day}");
                assert_relative_eq!(ahead.expected(&row), row.error, max_relative = 1e-11);
            }
            // The mean of n rows fitted is known to 1/n: it is in the span of the constant.
            let held = u32::try_from(fit.window().rows()).expect("few");
            let fitted: Vec<Row> = (rows - held..rows).map(row).collect();
            let leverage = ahead.leverage(&fitted).expect("independent");
            assert_relative_eq!(leverage, 1.0 / f64::from(held), max_relative = 1e-9);
        }
    }

    #[test]
    fn terms_that_the_rows_do_not_tell_apart_are_left_out() {
        let mut fit = fit(Some(1), 1, 0);
        for day in 0..40 {
            let still = Row {
                x: 1000.0,
                influences: [20.0, 0.0],
                error: 7.0,
                ..row(day)
            };
            fit.insert(still);
        }
        let ahead = fit.ahead().expect("rows enough");
        assert_relative_eq!(ahead.degrees_of_freedom, 37.0);
        assert_relative_eq!(ahead.expected(&row(41)), 7.0, max_relative = 1e-12);
    }
}
