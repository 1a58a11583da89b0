//! How long a drift takes to stand out of correlated noise: can this cadence of pairs ever see the
//! drift that matters?
//!
//! Weatherhead et al., *Journal of Geophysical Research* 103 (1998) 17149 (formula from memory):
//! n* = [3.3·σ/|ω|·√((1+φ)/(1−φ))]^⅔ units of time, after which a drift of ω per unit is found with
//! probability 90 % by a test at the 95 % level. It is stated for twelve values per unit (months in
//! years): the standard uncertainty of a slope over n units of twelve values is σ·n^(−3/2). So the
//! unit for values at any other spacing is twelve spacings.

use crate::math;

/// 2 for the 95 % level and 1.3 for the probability of 90 %, as published.
const SEEN: f64 = 3.3;
/// Values in the unit of time that the formula is stated for.
pub const VALUES_PER_UNIT: f64 = 12.0;

/// n*, the units of time (of twelve values each) needed to see a drift of `drift` per unit in noise
/// of standard deviation `noise` with lag-1 correlation `phi` (below 1) between values; infinite
/// for no drift.
#[must_use]
pub fn units_needed(noise: f64, drift: f64, phi: f64) -> f64 {
    let ratio = noise / drift.abs() * ((1.0 + phi) / (1.0 - phi)).sqrt();
    if ratio.is_nan() {
        return f64::INFINITY;
    }
    math::pow(SEEN * ratio, 2.0 / 3.0)
}

/// The same in days: how long values `spacing` days apart must be collected to see a drift of
/// `drift` per day.
#[must_use]
pub fn days_needed(noise: f64, drift: f64, phi: f64, spacing: f64) -> f64 {
    let unit = VALUES_PER_UNIT * spacing;
    unit * units_needed(noise, drift * unit, phi)
}

/// The widest spacing, in days, of values that see within `days` a drift of `drift` per day in
/// independent noise: [`days_needed`] solved for it. Infinite without noise.
#[must_use]
pub fn widest_spacing(noise: f64, drift: f64, days: f64) -> f64 {
    let ratio = drift / (SEEN * noise);
    days * days * days * ratio * ratio / VALUES_PER_UNIT
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    /// Check value V30: σ/ω = 10. Tolerance: half its last digit.
    #[test]
    fn published_numbers() {
        assert!((units_needed(10.0, 1.0, 0.0) - 10.29).abs() < 5e-3);
        assert!((units_needed(10.0, -1.0, 0.5) - 14.84).abs() < 5e-3);
    }

    /// After the time needed, the slope of so many values is 3.3 of its standard uncertainties: the
    /// textbook variance 12σ²/(N³Δ²) of a slope of many evenly spaced values.
    #[test]
    fn the_slope_then_stands_out() {
        for (noise, drift, spacing) in [(0.4, 0.01, 0.25), (3.0, 0.2, 7.0)] {
            let values = days_needed(noise, drift, 0.0, spacing) / spacing;
            let u = noise * (12.0 / (values * values * values)).sqrt() / spacing;
            assert_relative_eq!(drift / u, 3.3, max_relative = 1e-12);
        }
    }

    #[test]
    fn the_widest_spacing_needs_all_of_the_time() {
        let spacing = widest_spacing(0.4, 0.01, 30.0);
        assert_relative_eq!(
            days_needed(0.4, 0.01, 0.0, spacing),
            30.0,
            max_relative = 1e-12
        );
    }

    #[test]
    fn no_drift_is_never_seen_and_no_noise_hides_none() {
        assert!(days_needed(1.0, 0.0, 0.0, 1.0).is_infinite());
        assert!(days_needed(0.0, 0.0, 0.0, 1.0).is_infinite());
        assert_relative_eq!(days_needed(0.0, 1.0, 0.0, 1.0), 0.0);
        assert!(widest_spacing(0.0, 1.0, 30.0).is_infinite());
    }
}
