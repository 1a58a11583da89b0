//! A change faster than the measurand can make.
//!
//! A value is compared with its accepted neighbours in time: what would have had to change by more
//! than the limit allows in the time between is not believed. After a real change of the sensor's
//! level the allowance grows with the time since the last accepted value, so that the check cannot
//! shut a sensor out for good.

use crate::setup::RateLimit;
use crate::time::Timestamp;
use crate::track::Track;

/// Whether a value would have jumped from one of its neighbours in the track; by how much, and how
/// much was allowed.
pub(crate) fn jumps(
    track: &Track,
    time: Timestamp,
    value: f64,
    limit: RateLimit,
) -> Option<(f64, f64)> {
    let neighbours = [track.last_until(time), track.first_after(time)];
    neighbours.into_iter().flatten().find_map(|neighbour| {
        let seconds = time.since(neighbour.time).seconds().abs();
        // Within the limit's own time the whole change is allowed: noise is no slope.
        let times = (seconds / limit.within.seconds()).max(1.0);
        let (change, allowed) = ((value - neighbour.value).abs(), limit.change * times);
        (change > allowed).then_some((change, allowed))
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::time::Duration;
    use crate::track::Sample;

    fn track(samples: &[(i64, f64)]) -> Track {
        let mut track = Track::default();
        for &(seconds, value) in samples {
            let time = Timestamp(0).plus(Duration::from_seconds(seconds));
            track.insert(Sample {
                time,
                arrived: time,
                value,
                sequence: None,
            });
        }
        track
    }

    #[test]
    fn the_allowance_grows_with_time_and_looks_both_ways() {
        let limit = RateLimit {
            change: 3.0,
            within: Duration::from_seconds(60),
        };
        let at = |seconds| Timestamp(0).plus(Duration::from_seconds(seconds));
        let held = track(&[(0, 20.0), (600, 21.0)]);
        assert_eq!(jumps(&held, at(660), 24.0, limit), None);
        assert_eq!(jumps(&held, at(660), 24.5, limit), Some((3.5, 3.0)));
        assert_eq!(jumps(&held, at(630), 24.5, limit), Some((3.5, 3.0)));
        assert_eq!(jumps(&held, at(780), 29.5, limit), None, "three minutes");
        // A late one: far from the next value, not from the one before.
        assert_eq!(jumps(&held, at(540), 25.0, limit), Some((4.0, 3.0)));
        assert_eq!(jumps(&Track::default(), at(0), 1e9, limit), None);
    }
}
