//! The information criteria that compare degrees, as plain formulas.
//!
//! n is the sample size (or its effective value), `rss` the residual sum of squares and K the
//! number of estimated parameters: coefficients and the residual variance. Values compare only
//! between models of the same rows. The smaller is the better.

use crate::math;

/// AIC = n ln(RSS/n) + 2K (Akaike 1974, for Gaussian residuals of estimated variance; from memory).
///
/// `None` where it is undefined: RSS ≤ 0 or not finite, or n ≤ K + 1.
#[must_use]
pub fn aic(n: f64, rss: f64, parameters: usize) -> Option<f64> {
    let k = parameters as f64;
    fit_term(n, rss, k).map(|term| term + 2.0 * k)
}

/// AICc = AIC + 2K(K+1)/(n − K − 1) (Hurvich & Tsai 1989; Burnham & Anderson, *Model Selection and
/// Multimodel Inference*, 2nd ed., §2.4; from memory). `None` as for [`aic`].
#[must_use]
pub fn aicc(n: f64, rss: f64, parameters: usize) -> Option<f64> {
    let k = parameters as f64;
    aic(n, rss, parameters).map(|aic| aic + 2.0 * k * (k + 1.0) / (n - k - 1.0))
}

/// BIC = n ln(RSS/n) + K ln n (Schwarz 1978; from memory). `None` as for [`aic`].
#[must_use]
pub fn bic(n: f64, rss: f64, parameters: usize) -> Option<f64> {
    let k = parameters as f64;
    fit_term(n, rss, k).map(|term| term + k * math::ln(n))
}

/// n ln(RSS/n) where the criteria are defined.
fn fit_term(n: f64, rss: f64, k: f64) -> Option<f64> {
    (rss > 0.0 && rss.is_finite() && n > k + 1.0).then(|| n * math::ln(rss / n))
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    type Formula = fn(f64, f64, usize) -> Option<f64>;

    /// Values of `formula` for degrees 0, 1, … (K = degree + 2) against expected ones, to the six
    /// decimals or so that those were published with.
    fn check(formula: Formula, n: f64, rss: &[f64], expected: &[f64], tolerance: f64) {
        assert_eq!(rss.len(), expected.len());
        for (degree, (&rss, &expected)) in rss.iter().zip(expected).enumerate() {
            let found = formula(n, rss, degree + 2).expect("defined");
            assert_abs_diff_eq!(found, expected, epsilon = tolerance);
        }
    }

    /// Recomputed by hand from the formulas (check values V12 and V13).
    #[test]
    fn small_invented_cases() {
        let rss = [10.0, 6.0, 5.5];
        check(
            aic,
            20.0,
            &rss,
            &[-9.862_944, -18.079_456, -17.819_684],
            1e-6,
        );
        check(
            aicc,
            20.0,
            &rss,
            &[-9.157_061, -16.579_456, -15.153_017],
            1e-6,
        );
        check(
            bic,
            20.0,
            &rss,
            &[-7.871_479, -15.092_259, -13.836_755],
            1e-6,
        );
        let rss = [4.0, 1.0, 0.9];
        check(
            aicc,
            10.0,
            &rss,
            &[-3.448_622, -13.025_851, -8.079_456],
            1e-6,
        );
        check(
            bic,
            10.0,
            &rss,
            &[-4.557_737, -16.118_096, -14.869_116],
            1e-6,
        );
    }

    /// GUM H.3 thermometer data (JCGM 100:2008, Table H.6), degrees 0 … 3, n = 11.
    #[test]
    fn thermometer_corrections_stay_a_line_under_a_margin_of_six() {
        let rss = [2.407_273e-4, 1.100_966e-4, 6.589_069e-5, 6.569_973e-5];
        check(
            aic,
            11.0,
            &rss,
            &[-114.0272, -120.6325, -124.2795, -122.3114],
            1e-4,
        );
        check(
            aicc,
            11.0,
            &rss,
            &[-112.5272, -117.2040, -117.6128, -110.3114],
            1e-4,
        );
        let bics = [-113.2314, -119.4388, -122.6879, -120.3219];
        check(bic, 11.0, &rss, &bics, 1e-4);
        let gain = bics[1] - bics[2];
        assert!(
            0.0 < gain && gain < 6.0,
            "degree 2 gains {gain}, less than the margin"
        );
    }

    #[test]
    fn undefined_values_are_none() {
        for formula in [aic, aicc, bic] as [Formula; 3] {
            assert_eq!(formula(10.0, 0.0, 2), None);
            assert_eq!(formula(10.0, f64::INFINITY, 2), None);
            assert_eq!(formula(10.0, f64::NAN, 2), None);
            assert_eq!(formula(3.0, 1.0, 2), None);
            assert!(formula(3.5, 1.0, 2).is_some());
        }
    }
}
