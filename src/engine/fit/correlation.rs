//! How much a correlated sample is worth: lag-1 correlation, and the sample size it leaves.
//!
//! Neighbouring segments of a drifting, noisy sensor resemble one another, and S such segments say
//! less than S independent ones would. The estimate from few residuals is too low on average (the
//! fit has taken part of the correlation with it) and uncertain besides; both make a criterion
//! raise a degree for nothing. So a cautious value is used: the estimate, plus its bias, plus a
//! share of its standard error.

/// Highest correlation that is used. At 0.9 nineteen segments are worth one; nothing beyond that
/// can be told from a drift within one window.
const HIGHEST: f64 = 0.9;

/// How many cautious additions of each kind enter the estimate of a lag-1 correlation.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Caution {
    /// Multiples of p/S, p fitted coefficients and S segments. The bias of r₁ after fitting is
    /// about −(p + …·ρ)/S: one multiple is right in white noise, three or so in strong correlation
    /// (Marriott & Pope, *Biometrika* 41 (1954) 390; from memory).
    pub bias: f64,
    /// Multiples of that bias's growth with ρ: it is about −(p + (p + 3)ρ)/S in all (each of p
    /// fitted coefficients takes (1 + ρ)/S, the quotient of two sums 3ρ/S more; for p = 1 it is
    /// Kendall's −(1 + 4ρ)/S, *Biometrika* 41 (1954) 403; from memory). What is found beyond zero
    /// is multiplied by 1 + x + x², x = (p + 3)/S, the first orders of its inverse; and the
    /// standard error below is taken as √((1 − ρ²)/S).
    pub growth: f64,
    /// Multiples of 1/√S, the standard error of r₁ in white noise (Bartlett, *Supplement to the
    /// Journal of the Royal Statistical Society* 8 (1946) 27; from memory).
    pub spread: f64,
}

/// Lag-1 correlation r₁ = Σ rⱼrⱼ₊₁ / Σ rⱼ² of residuals in order of time, in −1 … 1; 0 where all
/// residuals vanish (Box & Jenkins, *Time Series Analysis*, estimate of the autocorrelation
/// function, with the mean already taken out by the fit; from memory).
#[must_use]
pub fn lag_one(residuals: &[f64]) -> f64 {
    let power: f64 = residuals.iter().map(|r| r * r).sum();
    let product: f64 = residuals.windows(2).map(|pair| pair[0] * pair[1]).sum();
    if power > 0.0 { product / power } else { 0.0 }
}

/// The lag-1 correlation to count with, 0 … 0.9: `lag_one` of `segments` residuals that are left
/// after fitting `coefficients`, with the caution added.
#[must_use]
pub fn cautious(lag_one: f64, coefficients: usize, segments: usize, caution: Caution) -> f64 {
    let count = segments.max(1) as f64;
    let bias = caution.bias * coefficients as f64 / count;
    let found = lag_one + bias;
    let lost = (coefficients as f64 + 3.0) / count;
    let grown = caution.growth * (lost + lost * lost) * found.max(0.0);
    let narrowed = (1.0 - caution.growth * found * found).max(0.0).sqrt();
    let spread = caution.spread * narrowed / count.sqrt();
    (found + grown + spread).clamp(0.0, HIGHEST)
}

/// n_eff = n(1 − r)/(1 + r): how many independent values a mean of `count` values with lag-1
/// correlation `r` is worth, for a first-order autoregression (Bayley & Hammersley, *Supplement to
/// the Journal of the Royal Statistical Society* 8 (1946) 184; from memory).
#[must_use]
pub fn effective_sample_size(count: f64, r: f64) -> f64 {
    count * (1.0 - r) / (1.0 + r)
}

/// (1 + r)/(1 − r): by how much correlation inflates the variance of a fitted mean.
#[must_use]
pub fn variance_inflation(r: f64) -> f64 {
    (1.0 + r) / (1.0 - r)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    /// Recomputed from the formula (check value V29).
    #[test]
    fn a_correlated_sample_is_worth_less() {
        for (count, r, worth) in [
            (100.0, 0.5, 100.0 / 3.0),
            (288.0, 0.8, 32.0),
            (64.0, 0.0, 64.0),
        ] {
            assert_relative_eq!(effective_sample_size(count, r), worth, max_relative = 1e-14);
            let inflation = variance_inflation(r);
            assert_relative_eq!(inflation, count / worth, max_relative = 1e-14);
        }
        assert_relative_eq!(
            variance_inflation(0.5).sqrt(),
            1.732_050_807_568_877,
            max_relative = 1e-15
        );
    }

    #[test]
    fn lag_one_tells_alternation_from_waves() {
        assert_relative_eq!(lag_one(&[1.0, -1.0, 1.0, -1.0]), -0.75);
        assert_relative_eq!(lag_one(&[1.0, 1.0, -1.0, -1.0]), 0.25);
        assert_relative_eq!(lag_one(&[0.0, 0.0]), 0.0);
        assert_relative_eq!(lag_one(&[]), 0.0);
    }

    #[test]
    fn caution_stays_within_its_limits_and_fades_with_the_sample() {
        let caution = Caution {
            bias: 1.0,
            growth: 0.0,
            spread: 1.0,
        };
        let few = cautious(0.3, 3, 16, caution);
        let many = cautious(0.3, 3, 64, caution);
        assert_relative_eq!(few, 0.3 + 3.0 / 16.0 + 0.25);
        assert!(0.3 < many && many < few);
        assert_relative_eq!(cautious(-1.0, 3, 64, caution), 0.0);
        let grown = Caution {
            growth: 1.0,
            ..caution
        };
        let (found, lost): (f64, f64) = (0.2 + 3.0 / 64.0, 6.0 / 64.0);
        let expected = found * (1.0 + lost + lost * lost) + 0.125 * (1.0 - found * found).sqrt();
        assert_relative_eq!(cautious(0.2, 3, 64, grown), expected, max_relative = 1e-14);
        // Where no correlation was found, nothing grows.
        assert!(cautious(-0.1, 3, 64, grown) <= cautious(-0.1, 3, 64, caution));
        assert_relative_eq!(cautious(0.0, 3, 0, caution), HIGHEST);
    }
}
