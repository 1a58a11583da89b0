//! What a consumer makes of a correction document: the correction and its expanded uncertainty at
//! an instant, by the two loops that the documents ask for.

use holdtrue_engine::event::Correction;
use holdtrue_engine::time::Timestamp;

/// A document at work at one instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Applied {
    /// What is added to the indication.
    pub correction: f64,
    /// Its standard uncertainty.
    pub u: f64,
    /// Its expanded uncertainty.
    pub expanded: f64,
}

/// The correction of `document` for an indication at `at`; `None` where it does not hold.
#[must_use]
pub fn apply(document: &Correction, at: Timestamp) -> Option<Applied> {
    if at > document.valid_until {
        return None;
    }
    let days = |time: Timestamp| time.since(document.origin).days();
    let correction = horner(&document.zero, days(at));
    // u is stated at the newest pair; the covariance gives the fit's part there and elsewhere.
    let moved = variance(&document.covariance, days(at))
        - variance(&document.covariance, days(document.window.to));
    let stated = document.standard_uncertainty;
    let u = libm::sqrt((stated * stated + moved).max(0.0));
    // While a correction is suppressed its size is inside U beside k·u.
    let k = document.coverage_factor;
    let beside = document.expanded_uncertainty - k * stated;
    Some(Applied {
        correction,
        u,
        expanded: k * u + beside,
    })
}

/// A polynomial, constant first.
fn horner(coefficients: &[f64], t: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * t + c)
}

/// Variance of the polynomial at `t` days: Σ covariance[i][j]·t^(i+j).
fn variance(covariance: &[Vec<f64>], t: f64) -> f64 {
    let rows: Vec<f64> = covariance.iter().map(|row| horner(row, t)).collect();
    horner(&rows, t)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn polynomial_and_variance_take_their_values_by_hand() {
        assert!((horner(&[1.0, 2.0, 3.0], 2.0) - 17.0).abs() < 1e-12);
        // (1, t)·C·(1, t)ᵀ at t = 3: 4 + 2·3·(−1) + 9·2.
        let covariance = [vec![4.0, -1.0], vec![-1.0, 2.0]];
        assert!((variance(&covariance, 3.0) - 16.0).abs() < 1e-12);
    }
}
