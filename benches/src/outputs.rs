//! What every way must give at every row, with the same code for the criteria.

use holdtrue_engine::math;

/// Degrees 0 … 5.
pub const DEGREES: usize = 6;

/// Six RSS, AICc and BIC of each, and the coefficients of the highest degree.
#[derive(Clone, Copy, Debug)]
pub struct Outputs {
    pub rss: [f64; DEGREES],
    pub aicc: [f64; DEGREES],
    pub bic: [f64; DEGREES],
    pub coefficients: [f64; DEGREES],
}

/// Adds the criteria (formulas as in the engine's criterion module, the logarithms shared).
#[inline]
pub fn outputs(n: usize, rss: [f64; DEGREES], coefficients: [f64; DEGREES]) -> Outputs {
    let n = n as f64;
    let log_n = math::ln(n);
    let (mut aicc, mut bic) = ([0.0; DEGREES], [0.0; DEGREES]);
    for degree in 0..DEGREES {
        let k = (degree + 2) as f64;
        let fit = n * (math::ln(rss[degree]) - log_n);
        aicc[degree] = fit + 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0);
        bic[degree] = fit + k * log_n;
    }
    Outputs {
        rss,
        aicc,
        bic,
        coefficients,
    }
}
