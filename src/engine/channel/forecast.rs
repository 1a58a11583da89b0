//! When the uncorrected error reaches its limit, from the line of recent pairs; and what follows
//! for recalibration and for the cadence of pairs.
//!
//! Nothing is forecast farther ahead than the line reaches back: a line that has held for so long
//! may hold for as long again, and nobody has seen more of it. Where the drift differs from zero by
//! less than U, only "not before" is said.

use super::judgement::Judgement;
use crate::event::{Cadence, Drift, TimeToLimit};
use crate::fit::cadence::days_needed;
use crate::fit::line::RecentLine;
use crate::quantile;
use crate::setup::{ChannelSetup, WindowLength};
use crate::time::{Duration, Timestamp};

/// Nanoseconds in a day.
const DAY: f64 = 86_400e9;
/// How fast the error drifts.
pub(crate) fn drift(line: &RecentLine, coverage: f64) -> Drift {
    let k = quantile::student(coverage, line.degrees_of_freedom);
    Drift {
        rate: line.line.slope,
        expanded_uncertainty: k * line.line.slope_variance.max(0.0).sqrt(),
        coverage_factor: k,
        resolved: line.line.is_resolved(k),
        basis: line.basis,
        from: line.from,
        to: line.origin,
        horizon: horizon(line),
    }
}

/// When the error reaches its limit. Judged are the line and its band with k, widened by what is
/// common to all pairs.
pub(crate) fn time_to_limit(
    line: Option<(&RecentLine, f64)>,
    judgement: &Judgement,
    setup: &ChannelSetup,
    now: Timestamp,
) -> TimeToLimit {
    let Some(limit) = setup.max_permissible_error else {
        return TimeToLimit::NoLimit;
    };
    if judgement.error.abs() >= limit {
        return TimeToLimit::Reached;
    }
    let Some((recent, k)) = line else {
        return TimeToLimit::NoLine;
    };
    let line = recent.line.with_common(judgement.common_variance);
    let horizon = horizon(recent);
    let from = now.since(recent.origin).days().max(0.0);
    if line.at(from).abs() >= limit {
        return TimeToLimit::Reached;
    }
    let reaches = |limit: f64, edge: f64| {
        let days = line.reaches(limit, edge, from)?;
        instant(recent.origin, days).filter(|at| *at <= horizon)
    };
    if !line.is_resolved(k) {
        let first = [reaches(limit, k), reaches(-limit, k)];
        return TimeToLimit::NotResolvable {
            not_before: first.into_iter().flatten().fold(horizon, Timestamp::min),
        };
    }
    let limit = limit.copysign(line.slope);
    match reaches(limit, k) {
        Some(earliest) => TimeToLimit::Forecast {
            limit,
            earliest,
            central: reaches(limit, 0.0),
            latest: reaches(limit, -k),
        },
        None => TimeToLimit::BeyondHorizon {
            not_before: horizon,
        },
    }
}

/// The drift-based proposal, by when to recalibrate: the smallest T from now on with |e₀ + rT| +
/// k·u(e(T)) = MPE, as far as the horizon.
pub(crate) fn recalibrate_by(time_to_limit: TimeToLimit, now: Timestamp) -> Option<Timestamp> {
    match time_to_limit {
        TimeToLimit::Forecast { earliest, .. } => Some(earliest),
        TimeToLimit::NotResolvable { not_before } | TimeToLimit::BeyondHorizon { not_before } => {
            Some(not_before)
        }
        TimeToLimit::Reached => Some(now),
        TimeToLimit::NoLine | TimeToLimit::NoLimit => None,
    }
}

/// Whether the window can show the drift that matters, judged on the segments: their scatter, their
/// correlation, their spacing. `None` without a limit, or if the numbers can't be held.
pub(crate) fn cadence(line: &RecentLine, setup: &ChannelSetup) -> Option<Cadence> {
    let spacing_days = line.length().days() / f64::from(line.segments.max(1));
    let window_days = match setup.fit.window {
        WindowLength::Time(length) => length.days(),
        WindowLength::Pairs(_) => spacing_days * line.segments_when_full,
    };
    let drift = drift_that_matters(setup, window_days)?;
    let needed_days = days_needed(line.segment_sd, drift, line.correlation, spacing_days);
    let numbers = [drift, needed_days, window_days];
    numbers
        .iter()
        .all(|number| number.is_finite())
        .then_some(Cadence {
            drift,
            noise: line.segment_sd,
            spacing_days,
            needed_days,
            window_days,
        })
}

/// The largest drift rate permitted, or what would use up the maximum permissible error within a
/// window; unit per day.
fn drift_that_matters(setup: &ChannelSetup, window_days: f64) -> Option<f64> {
    let by_limit = || Some(setup.max_permissible_error? / window_days);
    setup.max_drift_rate.or_else(by_limit)
}

/// As far ahead as the line reaches back.
fn horizon(line: &RecentLine) -> Timestamp {
    line.origin.plus(line.length())
}

/// The instant so many days after `origin`; `None` beyond the range of timestamps.
fn instant(origin: Timestamp, days: f64) -> Option<Timestamp> {
    let nanoseconds = days * DAY;
    // Below 2^62 the conversion is exact to the rounding of the product.
    #[allow(clippy::cast_possible_truncation, reason = "checked to fit")]
    let whole = (nanoseconds.abs() < 4.6e18).then(|| nanoseconds.round() as i64)?;
    Some(origin.plus(Duration(whole)))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn instants_keep_within_their_range() {
        assert_eq!(
            instant(Timestamp(5), 1.0),
            Some(Timestamp(86_400_000_000_005))
        );
        assert_eq!(instant(Timestamp(0), 1e9), None);
        assert_eq!(instant(Timestamp(0), f64::NAN), None);
        assert_eq!(instant(Timestamp(0), f64::INFINITY), None);
    }
}
