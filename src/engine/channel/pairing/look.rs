//! What a track says about one instant.

use crate::time::{Duration, Timestamp};
use crate::track::{Sample, Track};

/// What is known of a quantity at an instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Look {
    /// Measured at this very instant (the mean, if several times).
    Exact(f64),
    /// Interpolated; final once `after` has settled.
    Between { value: f64, after: Sample },
    /// The neighbours are too far apart, or there is none before; final once `after` has settled.
    Apart { after: Sample },
    /// Nothing has come after it yet.
    Open,
}

/// Looks up a track at `time`, interpolating linearly between neighbours not farther apart than
/// `max_gap`.
pub(super) fn look(track: &Track, time: Timestamp, max_gap: Duration) -> Look {
    if let Some(value) = mean_at(track, time) {
        return Look::Exact(value);
    }
    let Some(&after) = track.first_after(time) else {
        return Look::Open;
    };
    let before = track.last_until(time).map(|sample| sample.time);
    let Some(before) = before.filter(|&before| after.time.since(before) <= max_gap) else {
        return Look::Apart { after };
    };
    let (Some(low), Some(high)) = (mean_at(track, before), mean_at(track, after.time)) else {
        return Look::Apart { after };
    };
    let part = time.since(before).seconds() / after.time.since(before).seconds();
    Look::Between {
        value: low + part * (high - low),
        after,
    }
}

/// Mean of the readings of exactly this instant.
fn mean_at(track: &Track, time: Timestamp) -> Option<f64> {
    mean(track.at(time).map(|sample| sample.value)).map(|(mean, _)| mean)
}

/// Mean and count; `None` of nothing.
pub(super) fn mean(values: impl Iterator<Item = f64>) -> Option<(f64, usize)> {
    let (sum, count) = values.fold((0.0, 0), |(sum, count), value| (sum + value, count + 1));
    (count > 0).then(|| (sum / count as f64, count))
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    fn track(rows: &[(i64, f64)]) -> Track {
        let mut track = Track::default();
        for &(time, value) in rows {
            track.insert(Sample {
                time: Timestamp(time),
                arrived: Timestamp(time),
                value,
                sequence: None,
            });
        }
        track
    }

    #[test]
    fn exact_between_apart_and_open() {
        let track = track(&[(0, 1.0), (10, 3.0), (10, 5.0), (100, 9.0)]);
        let at = |time| look(&track, Timestamp(time), Duration(20));
        assert_eq!(at(10), Look::Exact(4.0));
        assert!(
            matches!(at(5), Look::Between { value, after } if value == 2.5 && after.time.0 == 10)
        );
        assert!(matches!(at(50), Look::Apart { after } if after.time.0 == 100));
        assert!(matches!(at(-1), Look::Apart { after } if after.time.0 == 0));
        assert_eq!(at(101), Look::Open);
    }
}
