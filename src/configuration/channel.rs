//! A channel: `[[channel]]`, with what `[defaults]` says for all.

use super::draft::{Draft, Wire};
use super::fit;
use super::influence;
use super::place::{self, Place};
use super::reader::Section;
use super::reference::{self, Beside};
use super::source::Found;
use super::{screening, steps};
use crate::payload::{Format, Target, Use};
use holdtrue_engine::setup::{
    AlarmSetup, ChannelSetup, DecisionRule, PairNoise, PublishSetup, ReferenceId, ReferenceKind,
    ReferenceSetup,
};
use holdtrue_engine::time::Duration;

/// Reads a channel and adds it, and its inline reference, to the draft.
pub(super) fn read(section: &Section<'_>, name: &str, readings_clock: bool, draft: &mut Draft) {
    let id = draft.next_channel();
    let unit = unit(section);
    let indication = indication(section, name, readings_clock, draft);
    let beside = Beside {
        channel: id,
        channel_name: name,
        indication: indication.as_ref(),
    };
    let reference = reference(section, &beside, draft);
    let influences = influence::read(section, name, indication.as_ref(), draft);
    let corrected_values = section.truth("corrected_values");
    let monitor_only = section
        .truth("monitor_only")
        .is_some_and(|found| found.value);
    if monitor_only {
        refuse_with_monitor_only(section, reference, corrected_values.as_ref(), draft);
    }
    let default = ChannelSetup::new(name, unit, reference);
    let lateness = section
        .duration("lateness")
        .map_or(default.lateness, |found| found.value);
    let noise = not_negative(section, "noise");
    let resolution = not_negative(section, "resolution");
    let told = draft.references.get(reference.0 as usize);
    let fit = fit::read(
        section,
        pair_noise(told, noise, resolution),
        influences.len(),
    );
    fit::warn_about_window(section, &fit, lateness);
    let positive = |key| positive(section, key);
    let channel = ChannelSetup {
        influences,
        lag: section
            .signed_duration("lag")
            .map_or(default.lag, |found| found.value),
        lateness,
        max_gap: section
            .duration("max_gap")
            .map_or(default.max_gap, |found| found.value),
        fit,
        screening: screening::read(section),
        steps: steps::read(section, default.steps),
        max_permissible_error: positive("max_permissible_error"),
        decision_rule: decision_rule(section).unwrap_or_default(),
        service_horizon: section
            .positive_duration("service_horizon")
            .map_or(default.service_horizon, |found| found.value),
        resolution,
        noise,
        max_drift_rate: positive("max_drift_rate"),
        max_correction: positive("max_correction"),
        max_correction_rate: positive("max_correction_rate"),
        hold_limit: section
            .positive_duration("hold_limit")
            .map(|found| found.value),
        coverage: coverage(section).unwrap_or(default.coverage),
        publish: publish(section),
        alarms: alarms(section),
        corrected_values: corrected_values.is_some_and(|found| found.value),
        monitor_only,
        ..default
    };
    section.finish();
    draft.channels.push(channel);
}

/// A number that is zero or more; zero if it is not told.
fn not_negative(section: &Section<'_>, key: &'static str) -> f64 {
    let found = section.number_in(key, |x| x >= 0.0, "zero or more");
    found.map_or(0.0, |found| found.value + 0.0)
}

/// A number above zero.
fn positive(section: &Section<'_>, key: &'static str) -> Option<f64> {
    let found = section.number_in(key, |x| x > 0.0, "greater than zero");
    found.map(|found| found.value)
}

/// `unit`: any text but an empty one.
fn unit(section: &Section<'_>) -> String {
    let unit = section.need_text("unit", "the unit of indications, references and limits");
    if let Some(empty) = unit.as_ref().filter(|unit| unit.value.trim().is_empty()) {
        section.wrong(
            empty,
            "is empty; write the unit, or \"1\" for a pure number",
        );
    }
    unit.map(|found| found.value.to_owned()).unwrap_or_default()
}

/// `coverage`: the probability that U is to have.
fn coverage(section: &Section<'_>) -> Option<f64> {
    let coverage = section.number_in(
        "coverage",
        |p| (0.5..1.0).contains(&p),
        "a probability from 0.5 to below 1, as 0.95",
    );
    coverage.map(|found| found.value)
}

/// `indication`: where the sensor's values come in.
fn indication(
    section: &Section<'_>,
    name: &str,
    readings_clock: bool,
    draft: &mut Draft,
) -> Option<Place> {
    if !section.has("indication") {
        let advice = "name the sensor's topic: indication = { topic = \"…\", value = \"/value\" }";
        section.missing("indication", advice);
    }
    let table = section.section("indication")?;
    let place = place::value(&table, None);
    table.finish();
    let place = place?;
    let timeless = match &place.format {
        Format::Plain => true,
        Format::Json(json) => json.time.is_none(),
        Format::Senml(_) => false,
    };
    if timeless && readings_clock {
        let message = "[node] time = \"readings\" goes by the readings' own times, but this \
                       indication has none, so the time of its arrival counts";
        section
            .source()
            .warn(&place.topic.span, &place.topic.key, message);
    }
    draft.wires.push(Wire {
        topic: place.topic.clone(),
        address: place.address.clone(),
        owner: format!("channel {name}"),
        wanted: Use {
            target: Target::Indication(draft.next_channel()),
            format: place.format.clone(),
        },
    });
    Some(place)
}

/// `reference`: the name of one, or one of the channel's own.
fn reference(section: &Section<'_>, beside: &Beside<'_>, draft: &mut Draft) -> ReferenceId {
    let none = ReferenceId(0);
    if !section.has("reference") {
        let advice = "name a [[reference]], or give { constant = … }, { value = \"/…\" }, \
                      { topic = \"…\" } or { group = [ … ] }";
        section.missing("reference", advice);
        return none;
    }
    if section.is_text("reference") {
        let Some(found) = section.text("reference") else {
            return none;
        };
        return draft
            .reference_ids
            .get(found.value)
            .copied()
            .unwrap_or_else(|| {
                let nearest = draft.nearest_reference(found.value);
                section.wrong(&found, format!("no reference \"{}\"{nearest}", found.value));
                none
            });
    }
    let Some(table) = section.section("reference") else {
        return none;
    };
    let id = draft.next_reference();
    reference::read(&table, beside.channel_name, Some(beside), draft);
    id
}

/// What is declared of the random part of both sides of a pair. The resolution alone says nothing
/// about an indication's noise, and its noise nothing about the mean over an interval.
fn pair_noise(reference: Option<&ReferenceSetup>, noise: f64, resolution: f64) -> PairNoise {
    let single = reference.is_none_or(|reference| reference.stands_for == Duration::ZERO);
    PairNoise {
        reference: reference.map_or(0.0, |reference| reference.uncertainty_each),
        indication: if noise > 0.0 && single {
            (noise * noise + resolution * resolution / 12.0).sqrt()
        } else {
            0.0
        },
    }
}

/// `decision_rule`: "simple", or `{ guard_band = r }`.
fn decision_rule(section: &Section<'_>) -> Option<DecisionRule> {
    if section.is_text("decision_rule") {
        let simple = section.choice("decision_rule", &[("simple", DecisionRule::Simple)]);
        return simple.map(|found| found.value);
    }
    let table = section.section("decision_rule")?;
    let wanted = "a multiple of U above 0 and at most 10, as 1.0";
    let multiple = table.number_in("guard_band", |r| r > 0.0 && r <= 10.0, wanted);
    if !table.has("guard_band") {
        table.missing(
            "guard_band",
            "the guard band in multiples of U: { guard_band = 1.0 }",
        );
    }
    table.finish();
    multiple.map(|found| DecisionRule::GuardBand {
        multiple: found.value,
    })
}

/// What a safety, legal or custody measurement may not have: a value made of its correction, and
/// the median of its neighbours as its judge.
fn refuse_with_monitor_only(
    section: &Section<'_>,
    reference: ReferenceId,
    corrected_values: Option<&Found<bool>>,
    draft: &Draft,
) {
    if let Some(found) = corrected_values.filter(|found| found.value) {
        let message = "can't be with monitor_only = true: no correction of this channel is ever \
                       published; remove one of both";
        section.wrong(found, message);
    }
    let setup = draft.references.get(reference.0 as usize);
    if matches!(setup.map(|it| &it.kind), Some(ReferenceKind::Group { .. }))
        && let Some(found) = section.place("reference")
    {
        let message = "is a group, but monitor_only = true says that this is a safety, legal or \
                       custody measurement: it may not be judged by the median of its neighbours; \
                       give it a reference of its own (it may be a member of others' groups)";
        section.wrong(&found, message);
    }
}

/// `publish = { step, max_age, dead_zone }`.
fn publish(section: &Section<'_>) -> PublishSetup {
    let table = section.section("publish");
    let table = table.as_ref();
    let step = table.and_then(|t| t.number_in("step", |x| x > 0.0, "greater than zero"));
    let max_age = table.and_then(|table| table.positive_duration("max_age"));
    let dead_zone = table.and_then(|t| t.number_in("dead_zone", |x| x >= 0.0, "zero or more"));
    if let Some(table) = table {
        table.finish();
    }
    let default = PublishSetup::default();
    PublishSetup {
        step: step.map_or(default.step, |found| found.value),
        max_age: max_age.map_or(default.max_age, |found| found.value),
        dead_zone: dead_zone.map_or(default.dead_zone, |found| found.value + 0.0),
    }
}

/// `alarms = { delay, deadband, gap_after }`.
fn alarms(section: &Section<'_>) -> AlarmSetup {
    let table = section.section("alarms");
    let table = table.as_ref();
    let delay = table.and_then(|table| table.integer_in("delay", 1..=1000));
    let deadband = table.and_then(|t| t.number_in("deadband", |x| x >= 0.0, "zero or more"));
    let gap_after = table.and_then(|table| table.positive_duration("gap_after"));
    if let Some(table) = table {
        table.finish();
    }
    let default = AlarmSetup::default();
    AlarmSetup {
        delay: delay.map_or(default.delay, |found| found.value),
        deadband: deadband.map_or(default.deadband, |found| found.value),
        gap_after: gap_after.map(|found| found.value),
    }
}
