//! An indication that does not follow while the reference moves.
//!
//! Needs no declared noise, and tells where equality of neighbours is normal (resolution coarser
//! than the noise): a sensor that shows one and the same value over several pairs while the
//! reference value moved by many standard deviations of their scatter does not measure. What counts
//! is exact equality; the smallest movement of the indication begins anew. One reference value
//! alone proves no movement: it may be an outlier.

use super::super::pairing::Pair;
use super::Stuck;
use crate::event::{RefusedReason, Rejection};
use crate::setup::ChannelSetup;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Fewest pairs of one value.
const PAIRS: u32 = 3;
/// So many standard deviations of the fit's residuals the reference must have moved: white noise
/// of the reference alone spans as much in fewer than one in a thousand runs of ten …
const SCATTERS: f64 = 6.0;
/// … and so many steps of the indication's resolution: a reference that crossed two cells has left
/// the one that is shown.
const STEPS: f64 = 2.0;

/// The run of pairs with one indication.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Still {
    run: Option<Run>,
    failed: bool,
}

#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Run {
    value: f64,
    newest: Timestamp,
    pairs: u32,
    /// The two lowest reference values, the lowest first, and the two highest, the highest first.
    lowest: [f64; 2],
    highest: [f64; 2],
    /// How far the reference must move, as known when the run began.
    limit: f64,
}

impl Run {
    fn take(&mut self, pair: &Pair) {
        self.newest = pair.time;
        self.pairs = self.pairs.saturating_add(1);
        let value = pair.reference;
        let [lowest, second] = self.lowest;
        self.lowest = [lowest.min(value), second.min(value.max(lowest))];
        let [highest, second] = self.highest;
        self.highest = [highest.max(value), second.max(value.min(highest))];
    }

    /// How far the reference has moved, whichever one of its values is left out: an outlier of the
    /// reference is no movement.
    fn moved(&self) -> f64 {
        let without_highest = self.highest[1] - self.lowest[0];
        let without_lowest = self.highest[0] - self.lowest[1];
        without_highest.min(without_lowest).max(0.0)
    }
}

impl Still {
    /// Takes a pair; the rejection if the indication has stopped following. Late pairs count for
    /// nothing.
    pub(super) fn take(
        &mut self,
        pair: &Pair,
        scatter: Option<f64>,
        setup: &ChannelSetup,
    ) -> Option<Rejection> {
        if self.run.is_some_and(|run| pair.time < run.newest) {
            return None;
        }
        let run = match self.run {
            Some(mut run) if run.value.total_cmp(&pair.indication).is_eq() => {
                run.take(pair);
                run
            }
            _ => {
                self.failed = false;
                let noise = scatter.unwrap_or(0.0).max(setup.noise);
                Run {
                    value: pair.indication,
                    newest: pair.time,
                    pairs: 1,
                    lowest: [pair.reference, f64::MAX],
                    highest: [pair.reference, f64::MIN],
                    limit: (SCATTERS * noise).max(STEPS * setup.resolution),
                }
            }
        };
        self.run = Some(run);
        self.failed |= run.pairs >= PAIRS && run.limit > 0.0 && run.moved() > run.limit;
        self.failed.then_some(Rejection {
            reason: RefusedReason::Stuck,
            value: run.moved() + 0.0,
            threshold: run.limit,
        })
    }

    /// What has failed, if the newest pair has.
    pub(super) fn failed(&self) -> Option<Stuck> {
        let run = self.run.filter(|_| self.failed)?;
        Some(Stuck::Unmoved {
            value: run.value,
            reference_moved: run.moved(),
            limit: run.limit,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::testing::channel_setup;

    fn pair(time: i64, indication: f64, reference: f64) -> Pair {
        Pair::at(Timestamp(time), indication, reference)
    }

    #[test]
    fn a_moving_reference_unmasks_a_value_that_stands() {
        let setup = channel_setup();
        let mut still = Still::default();
        let mut fates = Vec::new();
        let moves = [1.0, 1.5, 6.0, 7.7, 8.0, 1.0];
        for (time, reference) in (0..).zip(moves) {
            fates.push(still.take(&pair(time, 5.0, reference), Some(1.0), &setup));
        }
        // 6 scatters are passed by the fourth pair, and by a second value with the fifth: 8.0 − 1.5
        // without the lowest, 7.7 − 1.0 without the highest. Coming back proves nothing.
        assert!(fates[..4].iter().all(Option::is_none), "{fates:?}");
        let rejection = fates[4].expect("moved by 6.5");
        assert_eq!(rejection.reason, RefusedReason::Stuck);
        assert!((rejection.value - 6.5).abs() < 1e-12 && (rejection.threshold - 6.0).abs() < 1e-12);
        assert!(fates[5].is_some() && still.failed().is_some());
        assert!(still.take(&pair(6, 5.1, 1.0), Some(1.0), &setup).is_none());
        assert!(still.failed().is_none());
    }

    #[test]
    fn one_outlier_of_the_reference_proves_nothing() {
        let setup = channel_setup();
        let mut still = Still::default();
        for (time, reference) in (0..).zip([1.0, 1.1, 50.0, 1.2, 0.9, -50.0, 1.0]) {
            // The second outlier lies on the other side: now there are two.
            let fate = still.take(&pair(time, 5.0, reference), Some(1.0), &setup);
            assert_eq!(fate.is_some(), time >= 5, "{time}");
        }
    }

    #[test]
    fn what_moves_a_little_or_faces_a_quiet_reference_is_not_stuck() {
        let setup = channel_setup();
        let mut still = Still::default();
        for time in 0..50 {
            let indication = if time % 2 == 0 { 5.0 } else { 5.01 };
            let reference = f64::from(u8::try_from(time).unwrap());
            assert!(
                still
                    .take(&pair(time, indication, reference), Some(1.0), &setup)
                    .is_none()
            );
        }
        for time in 50..100 {
            let reference = if time % 2 == 0 { 2.0 } else { -2.0 };
            assert!(
                still
                    .take(&pair(time, 5.0, reference), Some(1.0), &setup)
                    .is_none()
            );
        }
        // Nothing known of the noise: nothing is claimed.
        for time in 100..110 {
            let reference = f64::from(u8::try_from(time).unwrap());
            assert!(
                Still::default()
                    .take(&pair(time, 5.0, reference), None, &setup)
                    .is_none()
            );
        }
    }
}
