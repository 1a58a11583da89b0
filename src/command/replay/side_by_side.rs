//! A trial for people: what the record says came of each channel, beside what comes of it with the
//! other configuration.

use crate::document::time_text;
use crate::replay::{Account, Trial};
use holdtrue_engine::time::Timestamp;
use serde_json::{Value, json};
use std::collections::BTreeMap;
use std::fmt::Write;

/// Events of one kind in both runs are listed up to so many.
const LISTED: usize = 10;

/// The trial as text, at most 100 columns wide.
pub(super) fn as_text(trial: &Trial) -> String {
    let mut text = format!(
        "{} recorded inputs tried with the other configuration; nothing was published.\n",
        trial.inputs
    );
    if trial.unused > 0 {
        let _ = writeln!(
            text,
            "{} readings belong to sources that the other configuration does not have.",
            trial.unused
        );
    }
    for (name, (recorded, tried)) in &trial.channels {
        channel(&mut text, name, recorded, tried);
    }
    if !trial.others.0.is_empty() || !trial.others.1.is_empty() {
        let _ = writeln!(text, "\nreferences and node");
        let events = |alarms: &[(String, crate::replay::AlarmAt)]| {
            let events = alarms.iter();
            events
                .map(|(name, alarm)| (format!("{} {name}", alarm.kind), alarm.at))
                .collect::<Vec<_>>()
        };
        timeline(
            &mut text,
            &events(&trial.others.0),
            &events(&trial.others.1),
        );
    }
    text
}

/// One figure of an account.
type Count = fn(&Account) -> u64;

fn channel(text: &mut String, name: &str, recorded: &Account, tried: &Account) {
    let _ = writeln!(text, "\n{name:<34}{:>24}{:>24}", "recorded", "tried");
    let mut row = |what: &str, recorded: String, tried: String| {
        let _ = writeln!(text, "  {what:<32}{recorded:>24}{tried:>24}");
    };
    let counts: [(&str, Count); 4] = [
        ("pairs in the fit", |it| it.pairs),
        ("pairs kept out", |it| it.kept_out),
        ("corrections", |it| it.corrections),
        ("corrections withdrawn", |it| it.withdrawn),
    ];
    for (what, of) in counts {
        row(what, of(recorded).to_string(), of(tried).to_string());
    }
    let rms = |account: &Account, of: fn((f64, f64)) -> f64| {
        account.errors().map_or("-".to_owned(), |it| number(of(it)))
    };
    row(
        "RMS error of pairs, uncorrected",
        rms(recorded, |it| it.0),
        rms(tried, |it| it.0),
    );
    row(
        "RMS error of pairs, corrected",
        rms(recorded, |it| it.1),
        rms(tried, |it| it.1),
    );
    let last = |account: &Account| {
        account.last.as_ref().map_or("-".to_owned(), |it| {
            format!(
                "{} ± {}",
                number(it.correction),
                number(it.expanded_uncertainty)
            )
        })
    };
    row("last correction ± U", last(recorded), last(tried));
    timeline(text, &events(recorded), &events(tried));
}

/// What happened when, by what it is.
fn events(account: &Account) -> Vec<(String, Timestamp)> {
    let alarms = account.alarms.iter();
    let alarms = alarms.map(|it| (format!("alarm {}", it.kind), it.at));
    let degrees = account.degrees.iter();
    let degrees = degrees.map(|it| (format!("degree {}", it.to), it.at));
    let steps = account.steps.iter().map(|at| ("step".to_owned(), *at));
    alarms.chain(degrees).chain(steps).collect()
}

/// The n-th of one kind beside the n-th of that kind, with the delay of the second.
fn timeline(text: &mut String, recorded: &[(String, Timestamp)], tried: &[(String, Timestamp)]) {
    let mut kinds: BTreeMap<&str, (Vec<Timestamp>, Vec<Timestamp>)> = BTreeMap::new();
    for (what, at) in recorded {
        kinds.entry(what).or_default().0.push(*at);
    }
    for (what, at) in tried {
        kinds.entry(what).or_default().1.push(*at);
    }
    for (what, (recorded, tried)) in kinds {
        let most = recorded.len().max(tried.len());
        for place in 0..most.min(LISTED) {
            let (then, now) = (recorded.get(place), tried.get(place));
            let show = |at: Option<&Timestamp>| at.map_or("-".to_owned(), |at| seconds(*at));
            let later = match (then, now) {
                (Some(then), Some(now)) if then != now => {
                    format!("  {:+.2} d", now.since(*then).days())
                }
                _ => String::new(),
            };
            let _ = writeln!(
                text,
                "  {what:<32}{:>24}{:>24}{later}",
                show(then),
                show(now)
            );
        }
        if most > LISTED {
            let _ = writeln!(
                text,
                "  {:<32}{:>24}{:>24}",
                "… in all",
                recorded.len(),
                tried.len()
            );
        }
    }
}

/// Without parts of a second.
fn seconds(at: Timestamp) -> String {
    time_text(Timestamp(at.0 - at.0.rem_euclid(1_000_000_000)))
}

/// Four significant digits.
fn number(value: f64) -> String {
    format!("{value:.3e}")
        .parse::<f64>()
        .map_or("-".to_owned(), |it| it.to_string())
}

/// The trial as JSON.
pub(super) fn as_json(trial: &Trial) -> String {
    let channels: BTreeMap<&str, Value> = trial
        .channels
        .iter()
        .map(|(name, (recorded, tried))| {
            let both = json!({ "recorded": account(recorded), "tried": account(tried) });
            (name.as_str(), both)
        })
        .collect();
    let others = |alarms: &[(String, crate::replay::AlarmAt)]| -> Vec<Value> {
        let alarms = alarms.iter();
        alarms
            .map(|(name, it)| json!({ "subject": name, "alarm": it.kind, "at": time_text(it.at) }))
            .collect()
    };
    let document = json!({
        "inputs": trial.inputs,
        "unused": trial.unused,
        "channels": channels,
        "others": { "recorded": others(&trial.others.0), "tried": others(&trial.others.1) },
    });
    format!("{document:#}\n")
}

fn account(account: &Account) -> Value {
    let events: Vec<Value> = events(account)
        .into_iter()
        .map(|(what, at)| json!({ "what": what, "at": time_text(at) }))
        .collect();
    let errors = account.errors();
    json!({
        "pairs": account.pairs,
        "kept_out": account.kept_out,
        "corrections": account.corrections,
        "withdrawn": account.withdrawn,
        "rms_uncorrected": errors.map(|it| it.0),
        "rms_corrected": errors.map(|it| it.1),
        "last_correction": account.last.as_ref().map(|it| it.correction),
        "last_expanded_uncertainty": account.last.as_ref().map(|it| it.expanded_uncertainty),
        "events": events,
    })
}
