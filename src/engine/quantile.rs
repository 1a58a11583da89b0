//! Quantiles of Student's t and of the normal distribution, over `libm`, so that they are the same
//! bits on every machine.

use crate::math::{exp, ln};

/// The normal quantile stands for t above this many degrees of freedom; at the 97.5 % point they
/// differ by 3e-6 there.
const PRACTICALLY_NORMAL: f64 = 1e6;
/// Newton steps; from the starting points used here five reach the last digits, the rest is
/// reserve.
const STEPS_MAX: usize = 60;

/// Φ(x), the probability that a standard normal variable lies below x.
#[must_use]
pub fn normal_below(x: f64) -> f64 {
    0.5 * libm::erfc(-x * std::f64::consts::FRAC_1_SQRT_2)
}

/// The value that a standard normal variable stays below with probability `p`; `p` inside (0, 1).
///
/// Newton's method on Φ(x) = ½ erfc(−x/√2) (Abramowitz & Stegun 7.1.2, 26.2.29), started with the
/// rational approximation 26.2.23 of the same book (error below 4.5e-4).
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
        let step = (below - p) / density;
        x -= step;
        if step.abs() <= 1e-15 * (1.0 + x.abs()) {
            break;
        }
    }
    x
}

/// The half width k of the interval ±k that holds `coverage` of Student's t distribution with `nu`
/// degrees of freedom (GUM G.3.2 and Table G.2: `t_p(ν)` with p = `coverage`). `nu` ≥ 1 need not be
/// whole; `coverage` inside (0, 1).
///
/// Newton's method on the probability outside ±t, which is `I_x(ν/2, 1/2)` with x = ν/(ν + t²)
/// (Abramowitz & Stegun 26.7.1, 26.5.27), kept inside a bracket. Started with their expansion
/// 26.7.5.
#[must_use]
pub fn student(coverage: f64, nu: f64) -> f64 {
    let outside = 1.0 - coverage;
    let z = -lower_normal(0.5 * outside);
    if nu > PRACTICALLY_NORMAL {
        return z;
    }
    let nu = nu.max(1.0);
    let mut t = started(z, nu);
    let (mut low, mut high) = (0.0, f64::INFINITY);
    // ln of the density's constant Γ((ν+1)/2) / (Γ(ν/2) √(νπ)).
    let constant = libm::lgamma(0.5 * (nu + 1.0))
        - libm::lgamma(0.5 * nu)
        - 0.5 * ln(nu * std::f64::consts::PI);
    for _ in 0..STEPS_MAX {
        let excess = both_tails(t, nu) - outside;
        if excess > 0.0 {
            low = t;
        } else {
            high = t;
        }
        let density = exp(constant - 0.5 * (nu + 1.0) * ln(1.0 + t * t / nu));
        let newton = t + excess / (2.0 * density);
        let next = if newton > low && newton < high {
            newton
        } else if high.is_finite() {
            0.5 * (low + high)
        } else {
            2.0 * t.max(1.0)
        };
        let done = (next - t).abs() <= 4.0 * f64::EPSILON * next;
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
    let first = z * (square + 1.0) / 4.0;
    let second = z * ((5.0 * square + 16.0) * square + 3.0) / 96.0;
    z + first / nu + second / (nu * nu)
}

/// Probability that |t| exceeds `t`.
fn both_tails(t: f64, nu: f64) -> f64 {
    incomplete_beta(0.5 * nu, 0.5, nu / (nu + t * t))
}

/// Regularised incomplete beta function `I_x(a, b)` by its continued fraction (Abramowitz & Stegun
/// 26.5.8, evaluated by Lentz's method; swapped to `1 − I_{1−x}(b, a)` where that converges faster,
/// 26.5.2).
fn incomplete_beta(a: f64, b: f64, x: f64) -> f64 {
    if x <= 0.0 {
        return 0.0;
    }
    if x >= 1.0 {
        return 1.0;
    }
    let front = exp(libm::lgamma(a + b) - libm::lgamma(a) - libm::lgamma(b)
        + a * ln(x)
        + b * libm::log1p(-x));
    if x < (a + 1.0) / (a + b + 2.0) {
        front * fraction(a, b, x) / a
    } else {
        1.0 - front * fraction(b, a, 1.0 - x) / b
    }
}

/// The continued fraction of [`incomplete_beta`].
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
