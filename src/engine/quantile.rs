//! Quantiles of Student's t and of the normal distribution, over `libm`, so that they are the same
//! bits on every machine.

use crate::math::{exp, ln};

/// The normal quantile stands for t above this many degrees of freedom; at the 97.5 % point they
/// differ by 3e-6 there.
const PRACTICALLY_NORMAL: f64 = 1e6;
/// Steps at most; from the starting points used here one or two do, the rest is reserve.
const STEPS_MAX: usize = 60;
/// A step that converges at least quadratically and is smaller than this, relative to the value, is
/// the last: the next would be below the last digit.
const LAST_STEP: f64 = 1e-8;

/// Φ(x), the probability that a standard normal variable lies below x.
#[must_use]
pub fn normal_below(x: f64) -> f64 {
    0.5 * libm::erfc(-x * std::f64::consts::FRAC_1_SQRT_2)
}

/// The value that a standard normal variable stays below with probability `p`; `p` inside (0, 1).
///
/// Halley's method on Φ(x) = ½ erfc(−x/√2) (Abramowitz & Stegun 7.1.2, 26.2.29; Φ″ = −xΦ′), started
/// with the rational approximation 26.2.23 of the same book (error below 4.5e-4).
#[must_use]
pub fn normal(p: f64) -> f64 {
    if p > 0.5 {
        return -lower_normal(1.0 - p);
    }
    lower_normal(p)
}

fn lower_normal(p: f64) -> f64 {
    let p = p.max(f64::MIN_POSITIVE);
    let t = (-2.0 * ln(p)).sqrt();
    let numerator = 2.515_517 + t * (0.802_853 + t * 0.010_328);
    let denominator = 1.0 + t * (1.432_788 + t * (0.189_269 + t * 0.001_308));
    let mut x = numerator / denominator - t;
    for _ in 0..STEPS_MAX {
        let below = normal_below(x);
        let density = exp(-0.5 * x * x) / (2.0 * std::f64::consts::PI).sqrt();
        let newton = (below - p) / density;
        let step = newton / (1.0 + 0.5 * x * newton);
        x -= step;
        if step.abs() <= LAST_STEP * (1.0 + x.abs()) {
            break;
        }
    }
    x
}

/// The half width k of the interval ±k that holds `coverage` of Student's t distribution with `nu`
/// degrees of freedom (GUM G.3.2 and Table G.2: `t_p(ν)` with p = `coverage`). `nu` ≥ 1 need not be
/// whole; `coverage` inside (0, 1).
///
/// Newton's method on the probability outside ±t, kept inside a bracket. Started with the expansion
/// in powers of 1/ν of Abramowitz & Stegun 26.7.5.
#[must_use]
pub fn student(coverage: f64, nu: f64) -> f64 {
    let outside = 1.0 - coverage;
    let z = -lower_normal(0.5 * outside);
    if nu > PRACTICALLY_NORMAL {
        return z;
    }
    let density = Density::new(nu.max(1.0));
    let mut t = started(z, density.nu);
    let (mut low, mut high) = (0.0, f64::INFINITY);
    for _ in 0..STEPS_MAX {
        let at = density.at(t);
        let excess = density.both_tails(t, at) - outside;
        if excess > 0.0 {
            low = t;
        } else {
            high = t;
        }
        let newton = t + excess / (2.0 * at);
        let (next, enough) = if newton > low && newton < high {
            (newton, LAST_STEP)
        } else if high.is_finite() {
            (0.5 * (low + high), 4.0 * f64::EPSILON)
        } else {
            (2.0 * t.max(1.0), 0.0)
        };
        let done = (next - t).abs() <= enough * next;
        t = next;
        if done {
            break;
        }
    }
    t
}

/// First terms of the expansion of t in powers of 1/ν around the normal quantile.
fn started(z: f64, nu: f64) -> f64 {
    let square = z * z;
    let terms = [
        (square + 1.0) / 4.0,
        ((5.0 * square + 16.0) * square + 3.0) / 96.0,
        (((3.0 * square + 19.0) * square + 17.0) * square - 15.0) / 384.0,
        ((((79.0 * square + 776.0) * square + 1482.0) * square - 1920.0) * square - 945.0)
            / 92_160.0,
    ];
    let sum = terms.iter().rev().fold(0.0, |sum, term| (sum + term) / nu);
    z + z * sum
}

/// Student's density of ν degrees of freedom.
struct Density {
    nu: f64,
    /// ln of Γ((ν+1)/2) / (Γ(ν/2) √(νπ)).
    constant: f64,
}

impl Density {
    fn new(nu: f64) -> Self {
        let constant = libm::lgamma(0.5 * (nu + 1.0))
            - libm::lgamma(0.5 * nu)
            - 0.5 * ln(nu * std::f64::consts::PI);
        Self { nu, constant }
    }

    fn at(&self, t: f64) -> f64 {
        exp(self.constant - 0.5 * (self.nu + 1.0) * libm::log1p(t * t / self.nu))
    }

    /// Probability that |t| exceeds `t`, where the density there is `at`.
    ///
    /// It is `I_x(ν/2, 1/2)` with x = ν/(ν + t²) (Abramowitz & Stegun 26.7.1, 26.5.27). The factor
    /// `x^a (1 − x)^b / B(a, b)` of the continued fraction (26.5.8) is t times the density; swapped
    /// to `1 − I_{1−x}(1/2, ν/2)` where that converges faster (26.5.2).
    fn both_tails(&self, t: f64, at: f64) -> f64 {
        let square = t * t;
        let whole = self.nu + square;
        let (a, b) = (0.5 * self.nu, 0.5);
        let (x, rest) = (self.nu / whole, square / whole);
        if x < (a + 1.0) / (a + b + 2.0) {
            t * at * fraction(a, b, x) / a
        } else {
            1.0 - t * at * fraction(b, a, rest) / b
        }
    }
}

/// The continued fraction of the incomplete beta function `I_x(a, b)`, by Lentz's method.
fn fraction(a: f64, b: f64, x: f64) -> f64 {
    let away_from_zero = |value: f64| if value.abs() < 1e-300 { 1e-300 } else { value };
    let mut c = 1.0;
    let mut d = 1.0 / away_from_zero(1.0 - (a + b) * x / (a + 1.0));
    let mut value = d;
    for m in 1..500_u32 {
        let m = f64::from(m);
        let even = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
        d = 1.0 / away_from_zero(1.0 + even * d);
        c = away_from_zero(1.0 + even / c);
        value *= d * c;
        let odd = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0));
        d = 1.0 / away_from_zero(1.0 + odd * d);
        c = away_from_zero(1.0 + odd / c);
        let change = d * c;
        value *= change;
        if (change - 1.0).abs() < 1e-16 {
            break;
        }
    }
    value
}

#[cfg(test)]
mod tests {
    use super::*;

    /// GUM (JCGM 100:2008) Table G.2 and G.4.1; one-sided points expressed as the coverage between
    /// both.
    #[test]
    fn student_matches_the_table_to_its_digits() {
        let cases = [
            (0.95, 1.0, 12.706, 5e-4),
            (0.95, 5.0, 2.571, 5e-4),
            (0.95, 9.0, 2.262, 5e-4),
            (0.95, 10.0, 2.228, 5e-4),
            (0.95, 20.0, 2.086, 5e-4),
            (0.95, 30.0, 2.042, 5e-4),
            (0.90, 9.0, 1.833, 5e-4),
            (0.99, 9.0, 3.250, 5e-4),
            (0.95, 19.0, 2.09, 5e-3),
            (0.6827, 1.0, 1.84, 5e-3),
            (0.9973, 1.0, 235.80, 5e-1),
        ];
        for (coverage, nu, expected, half_digit) in cases {
            let got = student(coverage, nu);
            assert!(
                (got - expected).abs() <= half_digit,
                "{coverage} {nu}: {got}"
            );
        }
    }

    /// Closed forms: ν = 1 is tan(π p/2), ν = 2 is p √(2/(1−p²)) (both from inverting A&S 26.7.3
    /// and 26.7.4).
    #[test]
    fn student_matches_closed_forms_to_the_last_digits() {
        for coverage in [0.1, 0.5, 0.9, 0.95, 0.99, 0.9999] {
            let cauchy = libm::tan(0.5 * std::f64::consts::PI * coverage);
            let two = coverage * (2.0 / (1.0 - coverage * coverage)).sqrt();
            assert!((student(coverage, 1.0) / cauchy - 1.0).abs() < 1e-11);
            assert!((student(coverage, 2.0) / two - 1.0).abs() < 1e-11);
        }
    }

    #[test]
    fn student_falls_to_the_normal_quantile() {
        let mut last = f64::INFINITY;
        for nu in [1.0, 1.5, 2.0, 7.3, 40.0, 1e3, 1e5, 9e5, 1e9] {
            let k = student(0.95, nu);
            assert!(k < last, "{nu}: {k} after {last}");
            last = k;
        }
        assert!((last - 1.959_963_984_540_054).abs() < 1e-12);
    }

    /// Φ⁻¹(0.75) = 0.6744897501960817, whose inverse is the constant of the MAD (check value V26);
    /// IQR 1.348979500.
    #[test]
    fn normal_matches_known_points() {
        assert!((normal(0.75) - 0.674_489_750_196_081_7).abs() < 1e-15);
        assert!((2.0 * normal(0.75) - 1.348_979_500).abs() < 1e-9);
        assert!((normal(0.25) + normal(0.75)).abs() < 1e-15);
        assert!(normal(0.5).abs() < 1e-15);
        assert!((normal(1e-10) + 6.361_340_902_404_056).abs() < 1e-9);
    }
}
