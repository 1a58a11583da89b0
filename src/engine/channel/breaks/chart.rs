//! Two one-sided cumulative sums (Page 1954; Lucas & Crosier, *Technometrics* 24 (1982) 199; from
//! memory): the sums of what exceeds a reference value k, up and down, never below zero. A sum
//! above the decision interval h signals; its last zero says when the change may have begun.

use serde::{Deserialize, Serialize};

/// k in standard deviations: half the smallest shift that is looked for.
pub(super) const REFERENCE_VALUE: f64 = 0.5;
/// h in standard deviations. With k = 0.5 the two-sided chart signals once in 1e5 white readings
/// (Siegmund's formula, see the tests), so that 200 hourly sensors give two signals in six weeks,
/// each of which must still be confirmed.
pub(super) const DECISION_INTERVAL: f64 = 10.36;
/// What one reading can add, in standard deviations: a lone outlier, and even two, cannot signal.
pub(super) const CLIP: f64 = 4.0;

/// One one-sided sum.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Arm {
    sum: f64,
    /// Readings since it was zero.
    readings: u32,
}

impl Arm {
    /// Takes a reading, positive in the arm's direction.
    fn take(&mut self, z: f64, k: f64) {
        let sum = self.sum + z - k;
        *self = if sum > 0.0 {
            Self {
                sum,
                readings: self.readings.saturating_add(1),
            }
        } else {
            Self::default()
        };
    }
}

/// Which way a shift goes, and since when.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Signal {
    /// Upwards.
    pub(super) up: bool,
    /// Readings since the arm's last zero, the newest included.
    pub(super) readings: u32,
}

/// The two sums.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Chart {
    up: Arm,
    down: Arm,
}

impl Chart {
    /// Takes a reading in standard deviations.
    pub(super) fn take(&mut self, z: f64, k: f64) {
        self.up.take(z, k);
        self.down.take(-z, k);
    }

    /// The arm above `h`; the longer-lasting of two.
    pub(super) fn signal(&self, h: f64) -> Option<Signal> {
        let arms = [true, false].map(|up| self.signal_of(up, h));
        arms.into_iter()
            .flatten()
            .max_by_key(|signal| signal.readings)
    }

    /// The same of one arm.
    pub(super) fn signal_of(&self, up: bool, h: f64) -> Option<Signal> {
        let arm = if up { self.up } else { self.down };
        (arm.sum > h).then_some(Signal {
            up,
            readings: arm.readings,
        })
    }

    /// Starts one arm anew.
    pub(super) fn forget(&mut self, up: bool) {
        *(if up { &mut self.up } else { &mut self.down }) = Arm::default();
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::exp;
    use rand_chacha::ChaCha12Rng;
    use rand_chacha::rand_core::SeedableRng as _;
    use rand_distr::{Distribution as _, StandardNormal};

    /// Mean number of readings until the chart signals, over so many runs.
    fn run_length(shift: f64, h: f64, signals: fn(&Chart, f64) -> bool, runs: u32) -> f64 {
        let mut random = ChaCha12Rng::seed_from_u64(1954);
        let mut readings = 0_u64;
        for _ in 0..runs {
            let mut chart = Chart::default();
            while !signals(&chart, h) {
                let z: f64 = StandardNormal.sample(&mut random);
                chart.take(z + shift, 0.5);
                readings += 1;
            }
        }
        readings as f64 / f64::from(runs)
    }

    /// Whether a chart signals at a decision interval.
    type Signals = fn(&Chart, f64) -> bool;

    fn either(chart: &Chart, h: f64) -> bool {
        chart.signal(h).is_some()
    }

    fn upper(chart: &Chart, h: f64) -> bool {
        chart.signal(h).is_some_and(|signal| signal.up)
    }

    /// Check values V21 and V22 (Lucas & Crosier 1982, Table 1; Brook & Evans 1972). Run lengths
    /// are nearly geometric, so 20 000 runs give the mean to 0.7 %; tolerated are four times that.
    #[test]
    fn run_lengths_are_those_of_the_tables() {
        let cases: [(f64, f64, Signals, f64); 6] = [
            (4.0, 0.0, either, 167.68),
            (4.0, 1.0, either, 8.38),
            (5.0, 0.0, either, 465.44),
            (5.0, 1.0, either, 10.38),
            (3.0, 0.0, upper, 117.60),
            (3.0, 1.5, upper, 3.75),
        ];
        for (h, shift, signals, expected) in cases {
            let found = run_length(shift, h, signals, 20_000);
            assert!(
                (found / expected - 1.0).abs() < 0.03,
                "h {h}, shift {shift}: {found} for {expected}"
            );
        }
    }

    /// Siegmund's approximation of a one-sided run length without shift: b = h + 1.166,
    /// (exp(2kb) − 2kb − 1) / (2k²).
    fn siegmund(k: f64, h: f64) -> f64 {
        let b = h + 1.166;
        (exp(2.0 * k * b) - 2.0 * k * b - 1.0) / (2.0 * k * k)
    }

    /// Check value V23: 338.09 and 938.22; and that the decision interval is what it is said to be.
    #[test]
    fn the_decision_interval_is_sized_by_siegmunds_formula() {
        assert!((siegmund(0.5, 4.0) - 338.09).abs() < 0.01);
        assert!((siegmund(0.5, 5.0) - 938.22).abs() < 0.01);
        let two_sided = 0.5 * siegmund(REFERENCE_VALUE, DECISION_INTERVAL);
        assert!((two_sided / 1e5 - 1.0).abs() < 0.02, "{two_sided}");
    }

    /// Check value V25 (the chart of EN 14181:2004: k = 0.501, h = 2.85; s = 1 and d = +1 at each
    /// check).
    #[test]
    fn a_constant_deviation_signals_at_the_sixth_check() {
        let mut chart = Chart::default();
        for (check, expected) in [0.499, 0.998, 1.497, 1.996, 2.495, 2.994]
            .iter()
            .enumerate()
        {
            assert_eq!(chart.signal(2.85), None);
            chart.take(1.0, 0.501);
            assert!((chart.up.sum - expected).abs() < 1e-12, "{check}");
            assert!(chart.down.sum.abs() < 1e-12);
        }
        let expected = Signal {
            up: true,
            readings: 6,
        };
        assert_eq!(chart.signal(2.85), Some(expected));
    }

    #[test]
    fn two_outliers_cannot_signal_and_the_last_zero_is_remembered() {
        let mut chart = Chart::default();
        for z in [-1.0, 0.2, CLIP, CLIP, -1.0] {
            chart.take(z, REFERENCE_VALUE);
            assert_eq!(chart.signal(DECISION_INTERVAL), None);
        }
        for _ in 0..9 {
            chart.take(-2.0, REFERENCE_VALUE);
        }
        let expected = Signal {
            up: false,
            readings: 10,
        };
        assert_eq!(chart.signal(DECISION_INTERVAL), Some(expected));
    }
}
