//! An indication that does not follow while the reference moves.
//!
//! Needs no declared noise, and tells where equality of neighbours is normal (resolution coarser
//! than the noise): a sensor that shows one and the same value over several pairs while the
//! reference value moved by many standard deviations of their scatter does not measure. What counts
//! is exact equality; the smallest movement of the indication begins anew.

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
    /// Lowest and highest reference value.
    reference: (f64, f64),
    /// How far the reference must move, as known when the run began.
    limit: f64,
}

impl Run {
    fn moved(&self) -> f64 {
        self.reference.1 - self.reference.0
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
                run.newest = pair.time;
                run.pairs = run.pairs.saturating_add(1);
                let (lowest, highest) = run.reference;
                run.reference = (lowest.min(pair.reference), highest.max(pair.reference));
                run
            }
            _ => {
                self.failed = false;
                let noise = scatter.unwrap_or(0.0).max(setup.noise);
                Run {
                    value: pair.indication,
                    newest: pair.time,
                    pairs: 1,
                    reference: (pair.reference, pair.reference),
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
        for (time, reference) in [(0, 1.0), (1, 3.0), (2, 6.0), (3, 7.5), (4, 1.0)] {
            fates.push(still.take(&pair(time, 5.0, reference), Some(1.0), &setup));
        }
        // 6 scatters are passed by the fourth pair; coming back proves nothing.
        assert!(fates[..3].iter().all(Option::is_none), "{fates:?}");
        let rejection = fates[3].expect("moved by 6.5");
        assert_eq!(rejection.reason, RefusedReason::Stuck);
        assert!((rejection.value - 6.5).abs() < 1e-12 && (rejection.threshold - 6.0).abs() < 1e-12);
        assert!(fates[4].is_some() && still.failed().is_some());
        assert!(still.take(&pair(5, 5.1, 1.0), Some(1.0), &setup).is_none());
        assert!(still.failed().is_none());
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
