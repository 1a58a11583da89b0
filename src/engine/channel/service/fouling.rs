//! Fouling and drift apart, and what the cleanings of a sensor have in common.
//!
//! Readings before and after a cleaning tell fouling; what remains in a standard after it, at the
//! same visit, tells drift (two errors, as in USGS Techniques and Methods 1-D3, from memory).

use crate::channel::stepping::VISIT;
use crate::event::{CheckPoint, Fouling, SawTooth};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// What the cleanings of one sensor have in common.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Cleanings {
    count: u64,
    first: Option<Timestamp>,
    last: Option<Timestamp>,
    /// Of the last cleaning: its fouling error, where told.
    last_fouling: Option<f64>,
    /// Cleanings with readings before and after, and the sum of their fouling errors.
    measured: u64,
    fouling_sum: f64,
}

impl Cleanings {
    /// Takes note of a cleaning; its fouling error, where the readings tell.
    pub(super) fn note(
        &mut self,
        performed: Timestamp,
        as_found: &[CheckPoint],
        as_left: &[CheckPoint],
    ) -> Option<Fouling> {
        let fouling = fouling(as_found, as_left);
        self.count += 1;
        self.first = Some(self.first.map_or(performed, |first| first.min(performed)));
        if self.last.is_none_or(|last| performed >= last) {
            self.last = Some(performed);
            self.last_fouling = fouling;
        }
        if let Some(fouling) = fouling {
            self.measured += 1;
            self.fouling_sum += fouling;
        }
        fouling.map(|fouling_error| Fouling {
            fouling_error,
            drift_error: None,
        })
    }

    /// What a check in a standard says if a cleaning went before it at the same visit.
    pub(super) fn check(&self, performed: Timestamp, as_found: &[CheckPoint]) -> Option<Fouling> {
        let after = performed.since(self.last?);
        let same_visit = Duration::ZERO <= after && after <= VISIT;
        same_visit.then_some(Fouling {
            fouling_error: self.last_fouling?,
            drift_error: Some(mean_error(as_found)?),
        })
    }

    /// What they have in common; `None` before the first.
    pub(super) fn saw_tooth(&self) -> Option<SawTooth> {
        let (first, last) = (self.first?, self.last?);
        let between = self.count.checked_sub(1).filter(|between| *between > 0);
        Some(SawTooth {
            cleanings: self.count,
            mean_fouling: (self.measured > 0).then(|| self.fouling_sum / self.measured as f64),
            mean_interval_days: between.map(|between| last.since(first).days() / between as f64),
        })
    }
}

/// error before − error after = −((after − before) − ambient change); `None` unless both were read.
fn fouling(as_found: &[CheckPoint], as_left: &[CheckPoint]) -> Option<f64> {
    Some(mean_error(as_found)? - mean_error(as_left)? + 0.0)
}

/// Mean error of some readings; `None` without any.
pub(super) fn mean_error(points: &[CheckPoint]) -> Option<f64> {
    let sum: f64 = points.iter().map(CheckPoint::error).sum();
    (!points.is_empty()).then(|| sum / points.len() as f64 + 0.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn point(indication: f64, reference: f64) -> CheckPoint {
        CheckPoint {
            indication,
            reference,
            expanded_uncertainty: None,
        }
    }

    fn day(day: i64) -> Timestamp {
        Timestamp(0).plus(Duration::from_seconds(86_400 * day))
    }

    /// By hand: turbidity reads 12.0 FNU before and 9.0 after, while a field meter beside it rises
    /// from 8.0 to 8.5. (after − before) − ambient change = −3.0 − 0.5 = −3.5: the fouling made it
    /// read 3.5 too high.
    #[test]
    fn a_change_of_the_ambient_value_is_no_fouling() {
        let split = Cleanings::default().note(day(0), &[point(12.0, 8.0)], &[point(9.0, 8.5)]);
        assert_eq!(
            split,
            Some(Fouling {
                fouling_error: 3.5,
                drift_error: None,
            })
        );
    }

    #[test]
    fn a_check_at_the_same_visit_tells_drift_and_a_later_one_does_not() {
        let mut cleanings = Cleanings::default();
        cleanings.note(day(3), &[point(12.0, 8.0)], &[point(9.0, 8.5)]);
        let hour = Duration::from_seconds(3600);
        let check = [point(10.25, 10.0), point(100.75, 100.0)];
        let split = cleanings.check(day(3).plus(hour), &check);
        assert_eq!(
            split,
            Some(Fouling {
                fouling_error: 3.5,
                drift_error: Some(0.5),
            })
        );
        assert_eq!(cleanings.check(day(4), &check), None);
        assert_eq!(cleanings.check(day(3).minus(hour), &check), None);
        assert_eq!(cleanings.check(day(3), &[]), None);
        assert_eq!(Cleanings::default().check(day(3), &check), None);
    }

    #[test]
    fn the_teeth_of_the_saw() {
        let mut cleanings = Cleanings::default();
        assert_eq!(cleanings.saw_tooth(), None);
        for (at, found) in [(0, Some(3.0)), (10, None), (24, Some(2.0))] {
            let found: Vec<_> = found.map(|found| point(found, 0.0)).into_iter().collect();
            cleanings.note(day(at), &found, &[point(1.0, 0.0)]);
            if at == 0 {
                let teeth = cleanings.saw_tooth().expect("one");
                assert_eq!(teeth.mean_interval_days, None);
            }
        }
        assert_eq!(
            cleanings.saw_tooth(),
            Some(SawTooth {
                cleanings: 3,
                mean_fouling: Some(1.5),
                mean_interval_days: Some(12.0),
            })
        );
    }
}
