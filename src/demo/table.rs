//! The result for people, at most 100 columns wide.

use super::score::{AlarmScore, ChannelScore, Score};
use holdtrue_simulators::truth::Expectation;
use std::fmt::Write;

/// The result as text.
pub(super) fn render(score: &Score) -> String {
    let mut text = format!(
        "Harrow Mere, seed {}, {:.1} days. True error = shown or corrected value - true value.\n\n",
        score.seed, score.days
    );
    let _ = writeln!(
        text,
        "{:<25}{:<19}{:>17}{:>17}  {:>3} {:>9}  zone",
        "channel", "planted", "true RMS before", "after", "deg", "U"
    );
    for channel in &score.channels {
        row(&mut text, channel);
    }
    text.push('\n');
    if score.is_good() {
        text.push_str(
            "Held true: every correctable drift at least halved, nothing steady made worse, every\n\
             planted fault raised its alarm and no other.\n",
        );
    } else {
        text.push_str("NOT held true:\n");
        for failure in &score.failures {
            let _ = writeln!(text, "  {failure}");
        }
    }
    text
}

/// One channel: a line, and a line for each planted fault.
fn row(text: &mut String, channel: &ChannelScore) {
    let before = significant(channel.rms_before);
    let after = significant(channel.rms_after);
    let degree = channel
        .degree
        .map_or("-".to_owned(), |degree| degree.to_string());
    let uncertainty = channel
        .expanded_uncertainty
        .map_or("-".to_owned(), significant);
    let change = if channel.rms_before > 0.0 {
        100.0 * (channel.rms_after / channel.rms_before - 1.0)
    } else {
        0.0
    };
    let judged = match channel.expectation {
        Expectation::AlarmOnly => "(broken)".to_owned(),
        _ => format!("{after} ({change:+.0} %)"),
    };
    let _ = writeln!(
        text,
        "{:<25}{:<19}{:>17}{:>17}  {:>3} {:>9}  {}",
        channel.channel,
        channel.behaviour,
        format!("{before} {}", channel.unit),
        judged,
        degree,
        uncertainty,
        channel.zone.as_deref().unwrap_or("-"),
    );
    for alarm in &channel.alarms {
        let _ = writeln!(text, "    {}", alarm_line(alarm));
    }
}

/// What became of one planted fault.
fn alarm_line(alarm: &AlarmScore) -> String {
    let planted = holdtrue_simulators::message::time_text(alarm.expected.planted_at);
    let minute = planted.get(..16).unwrap_or(&planted).replace('T', " ");
    let fate = match alarm.delay_hours {
        Some(hours) if hours < 0.0 => format!("raised {} before", span(-hours)),
        Some(hours) => format!("raised {} after", span(hours)),
        None if alarm.expected.required => "NOT RAISED".to_owned(),
        None => "not due before the end".to_owned(),
    };
    format!("{}: fault at {minute}, alarm {fate}", alarm.expected.kind)
}

/// A length of time a person can grasp.
fn span(hours: f64) -> String {
    if hours < 1.0 {
        format!("{:.0} min", hours * 60.0)
    } else if hours < 48.0 {
        format!("{hours:.1} h")
    } else {
        format!("{:.1} d", hours / 24.0)
    }
}

/// Three significant digits without an exponent.
fn significant(value: f64) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    let magnitude = value.abs().log10().floor();
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "clamped to 0…9"
    )]
    let decimals = (2.0 - magnitude).clamp(0.0, 9.0) as usize;
    format!("{value:.decimals$}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_and_spans_read_well() {
        let cases = [
            (0.0, "0"),
            (0.012_345, "0.0123"),
            (1.5, "1.50"),
            (123.4, "123"),
            (9999.0, "9999"),
        ];
        for (value, expected) in cases {
            assert_eq!(significant(value), expected);
        }
        assert_eq!(
            [span(0.5), span(30.0), span(60.0)],
            ["30 min", "30.0 h", "2.5 d"]
        );
    }
}
