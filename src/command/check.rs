//! `holdtrue check`: everything that is wrong with a configuration, or what it would do.

use super::{Ending, commissioning};
use crate::configuration::{self, Configuration, Problem, Problems, Protocol};
use holdtrue_engine::setup::{
    ChannelSetup, Clock, DecisionRule, ReferenceKind, ReferenceSetup, Setup, WindowLength,
};
use holdtrue_engine::time::Duration;
use serde::Serialize;
use std::io::{self, Write};
use std::path::Path;

/// The answer as a program reads it.
#[derive(Serialize)]
struct Answer<'a> {
    file: &'a str,
    /// Whether the daemon would start with it.
    sound: bool,
    /// SHA-256 of the file, as in every correction; only if sound.
    configuration: Option<&'a str>,
    node: Option<&'a str>,
    channels: usize,
    references: usize,
    subscriptions: &'a [String],
    /// Channel by channel, for those with limits.
    cadence: Vec<Cadence<'a>>,
    problems: &'a [Problem],
}

/// Whether a channel's pairs can show the drift that matters.
#[derive(Serialize)]
struct Cadence<'a> {
    channel: &'a str,
    text: String,
}

/// Checks a file and writes the answer.
pub fn run(path: &Path, json: bool, out: &mut impl Write) -> Ending {
    let checked = configuration::load(path);
    let ending = if checked.is_ok() {
        Ending::Done
    } else {
        Ending::Wrong
    };
    let file = path.display().to_string();
    let written = match (&checked, json) {
        (checked, true) => write_json(&file, checked.as_ref(), out),
        (Ok(configuration), false) => write_sound(&file, configuration, out),
        (Err(problems), false) => write_refused(problems, out),
    };
    // A reader that went away (`| head`) is no failure of the check.
    match written {
        Err(error) if error.kind() != io::ErrorKind::BrokenPipe => Ending::Failed,
        _ => ending,
    }
}

fn write_json(
    file: &str,
    checked: Result<&Configuration, &Problems>,
    out: &mut impl Write,
) -> io::Result<()> {
    let answer = match checked {
        Ok(configuration) => Answer {
            file,
            sound: true,
            configuration: Some(&configuration.setup.fingerprint),
            node: Some(&configuration.setup.node),
            channels: configuration.setup.channels.len(),
            references: configuration.setup.references.len(),
            subscriptions: &configuration.intake.filters,
            cadence: cadences(&configuration.setup),
            problems: &configuration.warnings,
        },
        Err(problems) => Answer {
            file,
            sound: false,
            configuration: None,
            node: None,
            channels: 0,
            references: 0,
            subscriptions: &[],
            cadence: Vec::new(),
            problems: &problems.list,
        },
    };
    serde_json::to_writer_pretty(&mut *out, &answer)?;
    writeln!(out)
}

fn cadences(setup: &Setup) -> Vec<Cadence<'_>> {
    let channels = setup.channels.iter();
    channels
        .filter_map(|channel| {
            let text = cadence(channel, setup)?;
            Some(Cadence {
                channel: &channel.name,
                text,
            })
        })
        .collect()
}

fn write_refused(problems: &Problems, out: &mut impl Write) -> io::Result<()> {
    writeln!(out, "{problems}")?;
    let errors = problems
        .list
        .iter()
        .filter(|problem| problem.severity == configuration::Severity::Error)
        .count();
    let warnings = problems.list.len() - errors;
    writeln!(
        out,
        "\nrefused: {}, {}",
        counted(errors, "error"),
        counted(warnings, "warning")
    )
}

fn write_sound(file: &str, configuration: &Configuration, out: &mut impl Write) -> io::Result<()> {
    for warning in &configuration.warnings {
        writeln!(out, "{}", warning.line_for(file))?;
    }
    if !configuration.warnings.is_empty() {
        writeln!(out)?;
    }
    let Configuration {
        broker,
        record,
        setup,
        intake,
        ..
    } = configuration;
    let clock = match setup.clock {
        Clock::Live => "live clock",
        Clock::Readings => "the readings' own time",
    };
    let protocol = match broker.protocol {
        Protocol::V5 => "MQTT 5",
        Protocol::V311 => "MQTT 3.1.1",
    };
    let link = if broker.tls.is_some() {
        "TLS"
    } else {
        "no TLS"
    };
    writeln!(out, "node      {}, {clock}", setup.node)?;
    writeln!(
        out,
        "broker    {}:{}, {protocol}, {link}",
        broker.host, broker.port
    )?;
    writeln!(out, "record    {}", record.folder.display())?;
    writeln!(out, "subscribe {}", intake.filters.join(", "))?;
    writeln!(out, "publish   holdtrue/{}/…", setup.node)?;
    for channel in &setup.channels {
        writeln!(out, "\nchannel   {} ({})", channel.name, channel.unit)?;
        writeln!(out, "          against {}", reference(channel, setup))?;
        writeln!(out, "          {}", fit(channel))?;
        writeln!(out, "          {}", limits(channel))?;
        for line in influences(channel, setup) {
            writeln!(out, "          {line}")?;
        }
        if channel.monitor_only {
            writeln!(out, "          monitored only: no correction is published")?;
        }
        if let Some(cadence) = cadence(channel, setup) {
            writeln!(out, "          cadence: {cadence}")?;
        }
    }
    let warnings = counted(configuration.warnings.len(), "warning");
    writeln!(
        out,
        "\nsound: {}, {warnings}",
        counted(setup.channels.len(), "channel")
    )
}

fn reference(channel: &ChannelSetup, setup: &Setup) -> String {
    let Some(reference) = setup.references.get(channel.reference.0 as usize) else {
        return String::new();
    };
    let ReferenceSetup {
        uncertainty_each: each,
        uncertainty_common: common,
        ..
    } = reference;
    let what = match &reference.kind {
        ReferenceKind::Measured if reference.name == channel.name => {
            "its own measured reference".to_owned()
        }
        ReferenceKind::Measured => reference.name.clone(),
        ReferenceKind::Constant { value, gated } => {
            let gated = if *gated {
                " while valid_when holds"
            } else {
                ""
            };
            format!("the known value {value} {}{gated}", channel.unit)
        }
        ReferenceKind::Checks { points } => {
            let points = points
                .iter()
                .filter_map(|id| setup.references.get(id.0 as usize));
            let names: Vec<&str> = points.map(|point| point.name.as_str()).collect();
            format!("{} while their valid_when holds", names.join(", "))
        }
        ReferenceKind::Group { members } => {
            let members = members
                .iter()
                .filter_map(|id| setup.channels.get(id.0 as usize));
            let names: Vec<&str> = members.map(|member| member.name.as_str()).collect();
            format!("the median of {}", names.join(", "))
        }
    };
    format!("{what}, u {each} each and {common} common")
}

/// Whether its pairs can show the drift that matters.
fn cadence(channel: &ChannelSetup, setup: &Setup) -> Option<String> {
    let reference = setup.references.get(channel.reference.0 as usize)?;
    commissioning::cadence(channel, reference)
}

fn fit(channel: &ChannelSetup) -> String {
    let window = match channel.fit.window {
        WindowLength::Time(length) => shown(length),
        WindowLength::Pairs(pairs) => counted(pairs as usize, "pair"),
    };
    let degree = match channel.fit.forced_degree {
        Some(degree) => format!("degree {degree}, as told"),
        None => format!("degree up to {}", channel.fit.max_degree),
    };
    let segments = counted(channel.fit.segments as usize, "segment");
    let screening = if channel.screening.enabled {
        ""
    } else {
        ", screening off"
    };
    format!("window {window} in {segments}, {degree}{screening}")
}

fn limits(channel: &ChannelSetup) -> String {
    let unit = &channel.unit;
    let limit = |value: Option<f64>, unit: &str| {
        value.map_or("none".to_owned(), |value| format!("{value} {unit}"))
    };
    let rule = match channel.decision_rule {
        _ if channel.max_permissible_error.is_none() => String::new(),
        DecisionRule::Simple => " by simple acceptance".to_owned(),
        DecisionRule::GuardBand { multiple } => format!(" with a guard band of {multiple}·U"),
    };
    format!(
        "limits: error {}{rule}, drift rate {}, gap {}",
        limit(channel.max_permissible_error, unit),
        limit(channel.max_drift_rate, &format!("{unit}/d")),
        channel.alarms.gap_after.map_or("none".to_owned(), shown),
    )
}

/// What acts on the channel, one line each.
fn influences(channel: &ChannelSetup, setup: &Setup) -> Vec<String> {
    let named = channel.influences.iter().filter_map(|influence| {
        let source = setup.influences.get(influence.source.0 as usize)?;
        Some(format!("influence {} from {}", influence.name, source.name))
    });
    named.collect()
}

/// A length of time in the largest unit that shows it without fractions.
fn shown(length: Duration) -> String {
    const UNITS: [(&str, i64); 6] = [
        ("d", 86_400_000_000_000),
        ("h", 3_600_000_000_000),
        ("min", 60_000_000_000),
        ("s", 1_000_000_000),
        ("ms", 1_000_000),
        ("ns", 1),
    ];
    let whole = UNITS
        .iter()
        .find(|(_, nanoseconds)| length.0 % nanoseconds == 0);
    whole.map_or_else(String::new, |(unit, nanoseconds)| {
        format!("{} {unit}", length.0 / nanoseconds)
    })
}

fn counted(count: usize, what: &str) -> String {
    let plural = if count == 1 { "" } else { "s" };
    format!("{count} {what}{plural}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lengths_of_time_are_shown_whole() {
        for (length, text) in [
            (Duration::from_seconds(30 * 86_400), "30 d"),
            (Duration::from_seconds(5_400), "90 min"),
            (Duration(1_500_000_000), "1500 ms"),
            (Duration(7), "7 ns"),
        ] {
            assert_eq!(shown(length), text);
        }
    }
}
