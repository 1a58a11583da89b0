//! How much competing models weigh in the published mean, and in its uncertainty.
//!
//! A model that may be wrong costs the mean its noise, but leaving it out of the uncertainty costs
//! an interval that misses the truth. So ê is the mean by weights that charge a coefficient
//! [`PRICE`], and u² gathers the disagreement with ê by Akaike's weights, which charge
//! [`SPREAD_PRICE`] and give the richer models their due sooner. Both are exp(−½(n ln RSS +
//! price·p)) over their sum, n the effective sample size, p the model's coefficients.

use crate::fit::between::LARGEST_LN_RATIO;
use crate::math;

/// What a coefficient costs a model in the mean, as a penalty on −2 ln of the likelihood. It is
/// Schwarz's ln n of n = 55, about a window of 64 segments in white noise; kept where correlation
/// makes the sample smaller, since there too the mean must not wander with the noise. Simulated
/// without drift: RMS error 0.039σ in white noise and 0.118σ in AR(1) 0.8, against 0.052σ and
/// 0.151σ at Akaike's 2, where a degree 0 that knew would make 0.031σ and 0.094σ.
const PRICE: f64 = 4.0;
/// The same for the weights by which disagreement counts in u²: Akaike's.
const SPREAD_PRICE: f64 = 2.0;

/// A model that competes.
#[derive(Clone, Copy, Debug)]
pub(super) struct Rival {
    /// Residual sum of squares with its possible rounding.
    pub(super) rss: f64,
    /// How many coefficients it has.
    pub(super) coefficients: usize,
}

/// The weights of models, each in their order and summing to 1.
#[derive(Clone, Debug)]
pub(super) struct Weights {
    /// In ê.
    pub(super) mean: Vec<f64>,
    /// In u².
    pub(super) spread: Vec<f64>,
    /// ln of `spread`, where the first model's is 0.
    pub(super) logarithms: Vec<f64>,
}

impl Weights {
    /// Of models that compete on a sample of `effective` rows. Where nothing is left to compare,
    /// the plainest have it.
    pub(super) fn of(rivals: &[Rival], effective: f64) -> Self {
        let of_spread = logarithms(rivals, effective, SPREAD_PRICE);
        Self {
            mean: normed(&logarithms(rivals, effective, PRICE)),
            spread: normed(&of_spread),
            logarithms: of_spread,
        }
    }

    /// All weight on the last of `count` models.
    pub(super) fn all_on_last(count: usize) -> Self {
        let mut only = vec![0.0; count];
        if let Some(last) = only.last_mut() {
            *last = 1.0;
        }
        Self {
            mean: only.clone(),
            spread: only,
            logarithms: vec![0.0; count],
        }
    }
}

/// −½(n ln(RSS/RSS₀) + price·(p − p₀)), with the first model's RSS₀ and p₀.
fn logarithms(rivals: &[Rival], effective: f64, price: f64) -> Vec<f64> {
    let least = rivals
        .iter()
        .fold(f64::INFINITY, |least, rival| least.min(rival.rss));
    let logarithm = |rival: &Rival| {
        let ln_ratio = if least > 0.0 {
            math::ln(rival.rss / least).min(LARGEST_LN_RATIO)
        } else {
            0.0
        };
        -0.5 * (effective * ln_ratio + price * rival.coefficients as f64)
    };
    let first = rivals.first().map_or(0.0, logarithm);
    rivals
        .iter()
        .map(|rival| logarithm(rival) - first)
        .collect()
}

/// Weights that sum to 1, from their logarithms.
fn normed(logarithms: &[f64]) -> Vec<f64> {
    let highest = logarithms.iter().copied().fold(f64::MIN, f64::max);
    let weights: Vec<f64> = logarithms
        .iter()
        .map(|logarithm| math::exp(logarithm - highest))
        .collect();
    let sum: f64 = weights.iter().sum();
    weights.iter().map(|weight| weight / sum).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    fn rivals(of: &[(f64, usize)]) -> Vec<Rival> {
        of.iter()
            .map(|&(rss, coefficients)| Rival { rss, coefficients })
            .collect()
    }

    #[test]
    fn the_mean_charges_a_coefficient_more_than_the_spread_does() {
        let models = rivals(&[(5.0, 1), (4.0, 2), (4.0, 3)]);
        let weights = Weights::of(&models, 20.0);
        // n ln(5/4) less the price of one coefficient, as twice the logarithm.
        let gain = 20.0 * math::ln(1.25);
        let ratio = |weights: &[f64]| 2.0 * math::ln(weights[1] / weights[0]);
        assert_relative_eq!(ratio(&weights.mean), gain - 4.0, max_relative = 1e-12);
        assert_relative_eq!(ratio(&weights.spread), gain - 2.0, max_relative = 1e-12);
        assert_relative_eq!(
            2.0 * weights.logarithms[1],
            gain - 2.0,
            max_relative = 1e-12
        );
        for weights in [&weights.mean, &weights.spread] {
            assert_relative_eq!(weights.iter().sum::<f64>(), 1.0, max_relative = 1e-12);
            assert!(weights[2] < weights[1], "a coefficient for nothing");
        }
    }

    #[test]
    fn without_anything_left_the_plainest_weighs_most() {
        let weights = Weights::of(&rivals(&[(0.0, 1), (0.0, 2)]), 60.0);
        assert!(weights.mean[0] > 0.8 && weights.spread[0] > 0.7);
        let certain = Weights::of(&rivals(&[(1e300, 1), (1e-300, 2)]), 60.0);
        assert!(certain.mean.iter().all(|weight| weight.is_finite()));
        assert!(certain.mean[1] > 0.999_999);
    }
}
