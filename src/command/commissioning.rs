//! What can be said of a channel before its first pair: whether the cadence of its pairs can ever
//! show the drift that matters, from what is declared; and what is missing to say so.

use holdtrue_engine::fit::cadence::{VALUES_PER_UNIT, days_needed, units_needed, widest_spacing};
use holdtrue_engine::setup::{ChannelSetup, ReferenceSetup, WindowLength};
use holdtrue_engine::time::Duration;

/// A line needs so many segments, whatever the noise.
const LEAST_SEGMENTS: f64 = 8.0;

/// One sentence for a channel with limits; `None` without. Noise is taken as uncorrelated: nothing
/// is known yet, and correlated noise needs more pairs.
pub(super) fn cadence(channel: &ChannelSetup, reference: &ReferenceSetup) -> Option<String> {
    if channel.max_permissible_error.is_none() && channel.max_drift_rate.is_none() {
        return None;
    }
    let noise = channel.declared_variance(reference).sqrt();
    if noise <= 0.0 {
        return Some(
            "can't be judged: declare noise (and the reference's uncertainty `each`)".to_owned(),
        );
    }
    Some(match channel.fit.window {
        WindowLength::Time(window) => in_time(channel, reference, noise, window.days()),
        WindowLength::Pairs(pairs) => in_pairs(channel, reference, noise, f64::from(pairs)),
    })
}

/// For a window in time: how often pairs must come.
fn in_time(channel: &ChannelSetup, reference: &ReferenceSetup, noise: f64, window: f64) -> String {
    let drift = channel
        .max_drift_rate
        .or(channel.max_permissible_error.map(|limit| limit / window))
        .unwrap_or(f64::INFINITY);
    let unit = &channel.unit;
    if let Some(spacing) = known_spacing(reference) {
        let needed = days_needed(noise, drift, 0.0, spacing).max(LEAST_SEGMENTS * spacing);
        let verdict = if needed <= window {
            "within the window"
        } else {
            "the window is too short"
        };
        return format!(
            "a drift of {drift:.3e} {unit}/d shows after {} of pairs every {}: {verdict}",
            days(needed),
            days(spacing)
        );
    }
    let spacing = widest_spacing(noise, drift, window).min(window / LEAST_SEGMENTS);
    format!(
        "a drift of {drift:.3e} {unit}/d shows within the window if pairs come at least every {}",
        days(spacing)
    )
}

/// For a window in pairs: how many are needed.
fn in_pairs(channel: &ChannelSetup, reference: &ReferenceSetup, noise: f64, pairs: f64) -> String {
    let unit = &channel.unit;
    let per_pair = match (channel.max_drift_rate, known_spacing(reference)) {
        (Some(rate), Some(spacing)) => Some(rate * spacing),
        (Some(_), None) => None,
        (None, _) => channel.max_permissible_error.map(|limit| limit / pairs),
    };
    let Some(drift) = per_pair else {
        return "can't be judged: how often pairs come is not known, and the drift rate is in days"
            .to_owned();
    };
    let units = units_needed(noise, VALUES_PER_UNIT * drift, 0.0);
    let needed = (VALUES_PER_UNIT * units).max(LEAST_SEGMENTS).ceil();
    let verdict = if needed <= pairs {
        "within the window"
    } else {
        "the window is too short"
    };
    format!("a drift of {drift:.3e} {unit} a pair shows after {needed} pairs: {verdict}")
}

/// Days between pairs, where the configuration tells: a reference that stands for an interval has
/// one value for each.
fn known_spacing(reference: &ReferenceSetup) -> Option<f64> {
    (reference.stands_for > Duration::ZERO).then(|| reference.stands_for.days())
}

/// A number of days in a unit that a person can grasp.
fn days(days: f64) -> String {
    let minutes = days * 1440.0;
    if minutes < 1.0 {
        format!("{:.1} s", minutes * 60.0)
    } else if minutes < 120.0 {
        format!("{minutes:.0} min")
    } else if minutes < 2880.0 {
        format!("{:.1} h", minutes / 60.0)
    } else {
        format!("{days:.1} d")
    }
}
