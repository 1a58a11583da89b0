//! The published mean: weights, uncertainty, and how it relates to the plain fit of all rows.

use holdtrue_engine::fit::mean::Plain;
use holdtrue_engine::fit::{Fit, Published, Row};
use holdtrue_engine::setup::{FitSetup, WindowLength};
use holdtrue_engine::time::{Duration, Timestamp};
use proptest::prelude::*;

/// A second in nanoseconds.
const SECOND: i64 = 1_000_000_000;

fn setup(window: WindowLength, segments: u32, forced_degree: Option<u8>) -> FitSetup {
    FitSetup {
        window,
        segments,
        forced_degree,
        ..FitSetup::default()
    }
}

fn row(time: i64, error: f64) -> Row {
    Row {
        time: Timestamp(time),
        error,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; 2],
    }
}

/// Noise without a generator: the fractional parts of multiples of an irrational number.
fn jitter(i: u32) -> f64 {
    (f64::from(i) * 0.618_033_988_749_895).fract() - 0.5
}

fn standard_uncertainty(published: &Published, days: f64) -> f64 {
    let mut variance = 0.0;
    for (i, line) in published.covariance.iter().enumerate() {
        for (j, covariance) in line.iter().enumerate() {
            let power = i32::try_from(i + j).expect("small");
            variance += covariance * days.powi(power);
        }
    }
    variance.sqrt()
}

fn value(coefficients: &[f64], days: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * days + c)
}

fn assert_close(found: f64, expected: f64, tolerance: f64) {
    let scale = expected.abs().max(1.0);
    assert!(
        (found - expected).abs() <= tolerance * scale,
        "{found} is not {expected}"
    );
}

/// With equal counts every segment weighs the same, so a forced degree's curve is the plain one.
#[test]
fn equal_counts_and_a_forced_degree_are_the_plain_fit() {
    for degree in 0..=2_u8 {
        let mut fit = Fit::new(setup(WindowLength::Pairs(160), 16, Some(degree)));
        for i in 0..400 {
            let drift = 1e-4 * f64::from(i) * f64::from(i);
            fit.insert(row(i64::from(i) * 60 * SECOND, drift + jitter(i)));
        }
        assert!(fit.window().open().is_none(), "only whole segments");
        let published = fit.published().expect("rows");
        let Plain { coefficients, .. } = fit.plain(degree, published.origin).expect("rows");
        assert_eq!(published.degree, degree);
        assert_eq!(published.coefficients.len(), coefficients.len());
        for (found, expected) in published.coefficients.iter().zip(&coefficients) {
            assert_close(found / expected, 1.0, 1e-11);
        }
        assert_eq!(
            published.weights,
            (0..=degree)
                .map(|k| f64::from(u8::from(k == degree)))
                .collect::<Vec<_>>()
        );
    }
}

/// The price of a degree: variance of the curve at its newest row in units of the rows' variance,
/// for n even rows (textbook algebra of orthogonal polynomials).
#[test]
fn each_degree_costs_what_the_closed_forms_say() {
    for rows in [10_u32, 64, 100] {
        let mut fit = Fit::new(setup(WindowLength::Pairs(rows), rows, None));
        for i in 0..rows {
            fit.insert(row(i64::from(i) * 3600 * SECOND, jitter(i)));
        }
        let n = f64::from(rows);
        let newest = fit.window().newest().expect("rows");
        let prices = [
            1.0 / n,
            2.0 * (2.0 * n - 1.0) / (n * (n + 1.0)),
            3.0 * (3.0 * n * n - 3.0 * n + 2.0) / (n * (n + 1.0) * (n + 2.0)),
        ];
        for (degree, price) in (0..).zip(prices) {
            let plain = fit.plain(degree, newest).expect("rows");
            let found = plain.covariance[0][0] / (plain.residual_sd * plain.residual_sd);
            assert_close(found / price, 1.0, 1e-11);
        }
    }
}

#[test]
fn few_rows_give_a_wide_mean_or_nothing() {
    let mut fit = Fit::new(setup(WindowLength::Time(Duration(64 * SECOND)), 64, None));
    assert!(fit.published().is_none());
    fit.insert(row(0, 1.0));
    assert!(
        fit.published().is_none(),
        "one row says nothing about scatter"
    );
    let mut last = f64::INFINITY;
    for i in 1..8 {
        fit.insert(row(i * SECOND, if i % 2 == 0 { 1.0 } else { 2.0 }));
        fit.decide(true);
        let published = fit.published().expect("two rows");
        assert_eq!(published.coefficients.len(), 1, "degree 0 up to 8 segments");
        let u = standard_uncertainty(&published, 0.0);
        assert!(published.degrees_of_freedom >= 1.0);
        assert!(u > 0.3 / f64::from(i32::try_from(i).expect("small")).sqrt());
        last = last.min(u);
    }
    assert!(last < 1.0);
}

#[test]
fn a_time_with_many_rows_is_one_time() {
    let mut fit = Fit::new(setup(WindowLength::Pairs(64), 64, Some(2)));
    for i in 0..40 {
        fit.insert(row(5 * SECOND, jitter(i)));
    }
    let published = fit.published().expect("rows");
    assert_eq!(published.coefficients.len(), 1, "no line through one time");
}

proptest! {
    /// Whatever the rows: weights sum to 1, everything is finite, and u² is no less than the
    /// spread between the degrees allows.
    #[test]
    fn weights_and_covariance_hold_together(
        gaps in prop::collection::vec(1_i64..200, 2..300),
        size in -6_i32..6,
        level in -1e6_f64..1e6,
        curve in -3.0_f64..3.0,
        days in -1e-3_f64..1e-3,
    ) {
        let mut fit = Fit::new(setup(WindowLength::Time(Duration(2_000 * SECOND)), 32, None));
        let mut time = 0;
        for (i, gap) in (0..).zip(gaps) {
            time += gap * SECOND;
            let x = time as f64 / 2_000e9;
            let error = level + 10.0_f64.powi(size) * (jitter(i) + curve * x * x);
            fit.insert(row(time, error));
            fit.decide(true);
        }
        if let Some(published) = fit.published() {
            let sum: f64 = published.weights.iter().sum();
            prop_assert!((sum - 1.0).abs() < 1e-12);
            prop_assert!(published.weights.iter().all(|w| (0.0..=1.0).contains(w)));
            let highest = published.weights.len() - 1;
            prop_assert_eq!(published.coefficients.len(), highest + 1);
            prop_assert!(value(&published.coefficients, days).is_finite());
            prop_assert!(standard_uncertainty(&published, days) >= 0.0);
            for (i, line) in published.covariance.iter().enumerate() {
                prop_assert!(line[i] >= 0.0);
                for (j, entry) in line.iter().enumerate() {
                    prop_assert!(entry.is_finite());
                    let twin = published.covariance[j][i];
                    prop_assert!((entry - twin).abs() <= 1e-9 * entry.abs().max(twin.abs()));
                }
            }
        }
    }
}
