//! Noise that grows while the mean stays: a chart of the precision.
//!
//! `v = ½(z₁ − z₂)²` of two innovations in a row estimates their variance whatever the drift does
//! (the statistic of the precision chart in EN 14181:2004, second-hand). Taken from pairs that do
//! not overlap, so that white noise makes independent values. The chart is a one-sided CUSUM of v
//! over its own baseline, S ← max(0, S + v/v₀ − k).
//!
//! *k*: the reference value that tells r² from 1 soonest is r² ln r² / (r² − 1) (log-likelihood
//! ratio of two variances); 1.85 for a doubled standard deviation, as EN 14181:2004 has it. *h*:
//! sized for a fleet. The time between false signals grows as exp(h(1 − 1/r²)/2); by simulation on
//! other seeds than the tests', with a baseline known well, 2,000,000 pairs brought 14 false
//! signals at h = 20, one at 24 and none at 28 (five and none in AR(1) noise of 0.9). *Baseline*:
//! the mean of v; it goes on slowly, and not while the chart stands high. While it is young, k
//! counts from two of its standard deviations up. Outliers, which the screen keeps out, are no
//! noise and do not count at all; what passes counts at most as much as a spike may. (Noise that
//! has doubled mostly passes the gate: at five scales, now two and a half standard deviations.)

use super::super::screening::Innovation;
use crate::setup::ChannelSetup;
use serde::{Deserialize, Serialize};

/// k, in baselines.
const REFERENCE_VALUE: f64 = 1.85;
/// h, in baselines.
const DECISION: f64 = 30.0;
/// S is kept below this, so that the signal ends soon after the noise is back.
const HIGHEST: f64 = 1.25 * DECISION;
/// Largest v that counts, in baselines: that of a difference of 4.2 standard deviations.
const CLIP: f64 = 9.0;
/// Values of v before the chart starts.
const ENOUGH: u32 = 100;
/// The baseline is the mean of so many values of v; then it follows with that memory.
const MEMORY: u32 = 5_000;

/// The state of the chart.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Precision {
    /// The first innovation of a pair that waits for its second.
    waiting: Option<f64>,
    /// Values of v in the baseline, up to [`MEMORY`].
    count: u32,
    /// v₀.
    baseline: f64,
    /// S.
    sum: f64,
    /// Mean of recent v, for what is told.
    recent: f64,
    grown: bool,
}

impl Precision {
    /// Takes the innovation of a pair that entered the fit.
    pub(super) fn take(&mut self, innovation: Innovation, setup: &ChannelSetup) {
        let z = innovation.value / innovation.spread;
        let Some(before) = self.waiting.take() else {
            self.waiting = Some(z);
            return;
        };
        // A resolution coarser than the noise makes v zero most of the time and large now and then.
        let floor = setup.resolution * setup.resolution / 12.0;
        let v = 0.5 * (z - before) * (z - before) + floor;
        if !v.is_finite() {
            return;
        }
        if self.count < ENOUGH {
            self.found_baseline(v);
            return;
        }
        if self.baseline <= 0.0 {
            // A sensor that showed one value all the time has told nothing about its noise.
            *self = Self::default();
            return;
        }
        let relative = (v / self.baseline).min(CLIP);
        // A young baseline may be low by chance: k counts from two of its standard deviations up.
        let doubt = 2.0 * (2.0 / f64::from(self.count)).sqrt();
        let reference_value = REFERENCE_VALUE * (1.0 + doubt);
        self.sum = (self.sum + relative - reference_value).clamp(0.0, HIGHEST);
        self.recent += (relative - self.recent) / 20.0;
        if self.sum > DECISION {
            self.grown = true;
        } else if self.sum <= 0.0 {
            self.grown = false;
        }
        if self.sum <= 0.5 * DECISION {
            self.count = (self.count + 1).min(MEMORY);
            self.baseline *= 1.0 + (relative - 1.0) / f64::from(self.count);
        }
    }

    /// The mean of the first values, each clipped at what the others make of it.
    fn found_baseline(&mut self, v: f64) {
        let known = if self.count >= ENOUGH / 4 {
            v.min(CLIP * self.baseline)
        } else {
            v
        };
        self.count += 1;
        self.baseline += (known - self.baseline) / f64::from(self.count);
        self.recent = 1.0;
    }

    /// Whether the noise counts as grown.
    pub(crate) fn has_grown(&self) -> bool {
        self.grown
    }

    /// Standard deviation of a complete pair's noise as it was, in the channel's unit.
    pub(crate) fn usual_sd(&self) -> f64 {
        self.baseline.sqrt()
    }

    /// The same of late.
    pub(crate) fn recent_sd(&self) -> f64 {
        (self.baseline * self.recent).sqrt()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::testing::channel_setup;
    use crate::time::Timestamp;
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::SeedableRng;
    use rand_distr::{Distribution, StandardNormal};

    fn innovation(value: f64) -> Innovation {
        Innovation {
            time: Timestamp(0),
            value,
            spread: 1.0,
            residual_sd: 1.0,
        }
    }

    struct Noise {
        source: ChaCha8Rng,
        memory: f64,
        last: f64,
    }

    impl Noise {
        fn new(seed: u64, memory: f64) -> Self {
            Self {
                source: ChaCha8Rng::seed_from_u64(seed),
                memory,
                last: 0.0,
            }
        }

        fn next(&mut self) -> f64 {
            let fresh: f64 = StandardNormal.sample(&mut self.source);
            self.last = self.memory * self.last + (1.0 - self.memory * self.memory).sqrt() * fresh;
            self.last
        }
    }

    fn run(memory: f64, seed: u64, steady: u32, then: (u32, f64)) -> Option<u32> {
        let setup = channel_setup();
        let mut chart = Precision::default();
        let mut noise = Noise::new(seed, memory);
        for pair in 0..steady {
            chart.take(innovation(noise.next()), &setup);
            assert!(
                !chart.has_grown(),
                "memory {memory}, seed {seed}: pair {pair}"
            );
        }
        (1..=then.0).find(|_| {
            chart.take(innovation(then.1 * noise.next()), &setup);
            chart.has_grown()
        })
    }

    #[test]
    fn steady_noise_signals_nothing_and_doubled_noise_soon() {
        for memory in [0.0, 0.5, 0.9] {
            let mut delays: Vec<u32> = (0..100)
                .map(|seed| {
                    let found = run(memory, 500 + seed, 2_000, (400, 2.0));
                    found.expect("doubled noise is found")
                })
                .collect();
            delays.sort_unstable();
            assert!(delays[95] <= 130, "memory {memory}: {}", delays[95]);
        }
    }

    #[test]
    fn long_quiet_spells_stay_quiet() {
        for memory in [0.0, 0.5, 0.8, 0.97] {
            run(memory, 77, 400_000, (0, 1.0));
        }
    }

    #[test]
    fn single_outliers_and_a_drift_signal_nothing() {
        let setup = channel_setup();
        let mut chart = Precision::default();
        let mut noise = Noise::new(9, 0.0);
        for pair in 0..20_000_u32 {
            let outlier = if pair % 40 == 39 { 30.0 } else { 0.0 };
            let drift = 1e-3 * f64::from(pair);
            chart.take(innovation(noise.next() + outlier + drift), &setup);
            assert!(!chart.has_grown(), "{pair}");
        }
    }

    /// A sensor that showed one value at first has a baseline once it moves.
    #[test]
    fn a_quiet_start_disables_nothing() {
        let setup = channel_setup();
        let mut chart = Precision::default();
        for _ in 0..300 {
            chart.take(innovation(0.0), &setup);
        }
        let mut noise = Noise::new(11, 0.0);
        for _ in 0..1_000 {
            chart.take(innovation(noise.next()), &setup);
            assert!(!chart.has_grown(), "what began is no growth");
        }
        let found = (0..200).find(|_| {
            chart.take(innovation(3.0 * noise.next()), &setup);
            chart.has_grown()
        });
        assert!(found.is_some());
    }

    #[test]
    fn the_signal_ends_after_the_noise_is_back() {
        let setup = channel_setup();
        let mut chart = Precision::default();
        let mut noise = Noise::new(3, 0.0);
        let mut feed = |chart: &mut Precision, count, scale: f64| {
            for _ in 0..count {
                chart.take(innovation(scale * noise.next()), &setup);
            }
        };
        feed(&mut chart, 1_000, 1.0);
        feed(&mut chart, 300, 3.0);
        assert!(chart.has_grown());
        assert!(
            (chart.usual_sd() - 1.0).abs() < 0.15,
            "{}",
            chart.usual_sd()
        );
        assert!(chart.recent_sd() > 1.5, "{}", chart.recent_sd());
        feed(&mut chart, 200, 1.0);
        assert!(!chart.has_grown());
    }
}
