//! Pairs with a reference value that stands for an interval (an hourly mean, a composite sample):
//! the mean of the indications within it, if they cover enough of it.

use super::look::mean;
use super::{Fate, Found, Pair, Scene, Sight, missed, settles};
use crate::setup::Stamped;
use crate::time::{Duration, Timestamp};
use crate::track::Sample;

/// Least part of the interval that the indications must cover. Three quarters is the usual
/// data-capture rule for hourly means of air-quality networks (common practice, from memory).
pub(super) const LEAST_COVERAGE: f64 = 0.75;

/// The interval `[from, to)` that a value stands for, as the sensor saw it: shifted by `lag`.
pub(super) fn span(stamp: Timestamp, scene: &Scene<'_>) -> (Timestamp, Timestamp) {
    let length = scene.reference.stands_for;
    let from = match scene.reference.stamped {
        Stamped::Start => stamp,
        Stamped::Middle => stamp.minus(Duration(length.0 / 2)),
        Stamped::End => stamp.minus(length),
    };
    let from = from.plus(scene.setup.lag);
    (from, from.plus(length))
}

/// The time of the pair that an interval makes.
pub(super) fn middle((from, to): (Timestamp, Timestamp)) -> Timestamp {
    from.plus(Duration(to.since(from).0 / 2))
}

pub(super) fn resolve(
    sample: &Sample,
    sight: &Sight<'_>,
    scene: &Scene<'_>,
    found: &mut Vec<Found>,
) -> Fate {
    let (from, to) = span(sample.time, scene);
    let track = sight.own;
    if !sight.is_final() {
        // Until an indication past the end has come, more may be on its way (a backlog).
        let Some(beyond) = track.first_after(to.minus(Duration(1))) else {
            return Fate::Waits(None);
        };
        let inside = track.range(from, to).map(|held| settles(held, scene)).max();
        let ready = settles(sample, scene)
            .max(settles(beyond, scene))
            .max(inside.unwrap_or(to))
            .max(to.plus(scene.setup.lateness));
        if sight.now < ready {
            return Fate::Waits(Some(ready));
        }
        if track.forgotten().is_some_and(|edge| edge >= from) {
            return Fate::Needs { from, to };
        }
    }
    let times = track.range(from, to).map(|held| held.time);
    let coverage = coverage(times, from, to, scene.setup.max_gap);
    let mean = mean(track.range(from, to).map(|held| held.value));
    found.push(match mean {
        Some((indication, _)) if coverage >= LEAST_COVERAGE => {
            let pair = Pair::over((from, to), indication, sample.value);
            Found::Pair(pair.weighing(weight(coverage, scene)))
        }
        _ => missed(sample),
    });
    Fate::Done
}

/// Part of `[from, to)` that lies within half a `max_gap` of a reading: an indication stands for
/// its surroundings as far as interpolation between two of them would be allowed. `times` are in
/// order and inside.
pub(super) fn coverage(
    times: impl Iterator<Item = Timestamp>,
    from: Timestamp,
    to: Timestamp,
    max_gap: Duration,
) -> f64 {
    let reach = Duration(max_gap.0 / 2);
    let mut covered = Duration::ZERO;
    let mut until = from;
    for time in times {
        let begin = time.minus(reach).max(until);
        let end = time.plus(reach).min(to);
        if end > begin {
            covered = Duration(covered.0.saturating_add(end.since(begin).0));
            until = end;
        }
    }
    covered.seconds() / to.since(from).seconds()
}

/// Relative weight of a mean with gaps: the variance of its indication side grows as its coverage
/// shrinks, the reference's own does not. 1 when complete, or where no uncertainty is declared.
fn weight(coverage: f64, scene: &Scene<'_>) -> f64 {
    let each = scene.reference.uncertainty_each * scene.reference.uncertainty_each;
    let noise = scene.setup.noise * scene.setup.noise;
    if noise > 0.0 {
        (each + noise) / (each + noise / coverage.min(1.0))
    } else {
        1.0
    }
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    #[test]
    fn coverage_is_the_part_near_a_reading() {
        let cover = |times: &[i64], gap| {
            let times = times.iter().map(|&time| Timestamp(time));
            coverage(times, Timestamp(0), Timestamp(100), Duration(gap))
        };
        let cases: &[(&[i64], i64, f64)] = &[
            (&[], 20, 0.0),
            (&[50], 20, 0.2),
            (&[0], 20, 0.1),
            (&[50], 1000, 1.0),
            (&[5, 15, 25], 10, 0.3),
            (&[10, 12, 14], 20, 0.24),
            (&[10, 10], 20, 0.2),
        ];
        for &(times, gap, expected) in cases {
            let got = cover(times, gap);
            assert!((got - expected).abs() < 1e-12, "{times:?} {gap}: {got}");
        }
    }
}
