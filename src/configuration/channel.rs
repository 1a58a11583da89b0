//! A channel: `[[channel]]`, with what `[defaults]` says for all.

use super::draft::{Draft, Wire};
use super::place::{self, Place};
use super::quantity;
use super::reader::Section;
use super::reference::{self, Beside};
use super::screening;
use crate::payload::{Format, Target, Use};
use holdtrue_engine::setup::{
    AlarmSetup, ChannelSetup, Criterion, DecisionRule, FitSetup, PairNoise, PublishSetup,
    ReferenceId, WindowLength,
};
use holdtrue_engine::time::Duration;

/// A day.
const DAY: Duration = Duration::from_seconds(86_400);
/// Default of `lateness`.
const LATENESS: Duration = Duration::from_seconds(10);
/// Default of `max_gap`.
const MAX_GAP: Duration = Duration::from_seconds(15 * 60);
/// Default of `window`.
const WINDOW: WindowLength = WindowLength::Time(Duration::from_seconds(30 * 86_400));
/// Default of `segments`; with fewer pairs as many as there are pairs.
const SEGMENTS: u32 = 64;
/// Most segments.
const SEGMENTS_MAX: u32 = 1024;
/// Shortest slice of time that a window is cut into.
const SEGMENT_MIN: Duration = Duration(1_000_000);
/// Default of `max_degree`.
const MAX_DEGREE: u8 = 2;
/// Highest degree.
const DEGREE_LIMIT: u8 = 5;
/// Default of `decision_rule`: guard band w = U, the cautious one.
const DECISION_RULE: DecisionRule = DecisionRule::GuardBand { multiple: 1.0 };
/// Default of `service_horizon`: two weekly rounds of a technician (common practice).
const SERVICE_HORIZON: Duration = Duration::from_seconds(14 * 86_400);
/// Default of `coverage`.
const COVERAGE: f64 = 0.95;
/// Defaults of `publish`.
const PUBLISH_STEP: f64 = 0.25;
const PUBLISH_MAX_AGE: Duration = DAY;
/// Defaults of `alarms` (common practice: three reference cycles, one standard uncertainty).
const ALARM_DELAY: u32 = 3;
const ALARM_DEADBAND: f64 = 1.0;

/// Reads a channel and adds it, and its inline reference, to the draft.
pub(super) fn read(section: &Section<'_>, name: &str, readings_clock: bool, draft: &mut Draft) {
    let id = draft.next_channel();
    let unit = section.need_text("unit", "the unit of indications, references and limits");
    if let Some(empty) = unit.as_ref().filter(|unit| unit.value.trim().is_empty()) {
        section.wrong(
            empty,
            "is empty; write the unit, or \"1\" for a pure number",
        );
    }
    let indication = indication(section, name, readings_clock, draft);
    let beside = Beside {
        channel: id,
        channel_name: name,
        indication: indication.as_ref(),
    };
    let reference = reference(section, &beside, draft);
    let lateness = section
        .duration("lateness")
        .map_or(LATENESS, |found| found.value);
    let fit = fit(section);
    warn_about_window(section, &fit, lateness);
    let positive = |key| {
        section
            .number_in(key, |x| x > 0.0, "greater than zero")
            .map(|found| found.value)
    };
    let not_negative = |key| {
        let found = section.number_in(key, |x| x >= 0.0, "zero or more");
        found.map_or(0.0, |found| found.value + 0.0)
    };
    let coverage = section.number_in(
        "coverage",
        |p| (0.5..1.0).contains(&p),
        "a probability from 0.5 to below 1, as 0.95",
    );
    let channel = ChannelSetup {
        name: name.to_owned(),
        unit: unit.map(|found| found.value.to_owned()).unwrap_or_default(),
        reference,
        lag: section
            .signed_duration("lag")
            .map_or(Duration::ZERO, |found| found.value),
        lateness,
        max_gap: section
            .duration("max_gap")
            .map_or(MAX_GAP, |found| found.value),
        fit,
        screening: screening::read(section),
        max_permissible_error: positive("max_permissible_error"),
        decision_rule: decision_rule(section),
        service_horizon: section
            .positive_duration("service_horizon")
            .map_or(SERVICE_HORIZON, |found| found.value),
        resolution: not_negative("resolution"),
        noise: not_negative("noise"),
        max_drift_rate: positive("max_drift_rate"),
        coverage: coverage.map_or(COVERAGE, |found| found.value),
        publish: publish(section),
        alarms: alarms(section),
        corrected_values: section
            .truth("corrected_values")
            .is_some_and(|found| found.value),
    };
    section.finish();
    draft.channels.push(channel);
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

/// `window`, `segments`, `max_degree`, `degree`, `criterion`.
fn fit(section: &Section<'_>) -> FitSetup {
    let window = section
        .text("window")
        .and_then(|found| match quantity::window(found.value) {
            Ok(window) => Some(window),
            Err(message) => {
                section.wrong(&found, message);
                None
            }
        });
    let window = window.unwrap_or(WINDOW);
    let told = section.integer_in("segments", 1..=SEGMENTS_MAX);
    let segments = told.as_ref().map_or(SEGMENTS, |found| found.value);
    let segments = match window {
        WindowLength::Pairs(pairs) if pairs < segments => {
            if let Some(found) = &told {
                let message =
                    format!("more segments than the window's {pairs} pairs; write at most {pairs}");
                section.wrong(found, message);
            }
            pairs
        }
        WindowLength::Time(length) if length.0 / i64::from(segments) < SEGMENT_MIN.0 => {
            let at = section
                .place("window")
                .or_else(|| section.place("segments"));
            if let Some(found) = at {
                section.wrong(&found, "its segments would be shorter than 1 ms");
            }
            segments
        }
        _ => segments,
    };
    let max_degree = section.integer_in("max_degree", 0..=DEGREE_LIMIT);
    let forced = section.integer_in("degree", 0..=DEGREE_LIMIT);
    let forced_degree = forced.as_ref().map(|found| found.value);
    if let (Some(found), Some(max)) = (&forced, &max_degree)
        && found.value > max.value
    {
        section.wrong(
            found,
            format!("is above max_degree, which is {}", max.value),
        );
    }
    let criterion = section.choice(
        "criterion",
        &[("bic", Criterion::Bic), ("aicc", Criterion::Aicc)],
    );
    FitSetup {
        window,
        segments,
        max_degree: max_degree.map_or(MAX_DEGREE.max(forced_degree.unwrap_or(0)), |found| {
            found.value
        }),
        forced_degree,
        criterion: criterion.map_or(Criterion::Bic, |found| found.value),
        max_span_degree: None,
        influences: 0,
        noise: PairNoise::default(),
    }
}

/// `decision_rule`: "simple", or `{ guard_band = r }`.
fn decision_rule(section: &Section<'_>) -> DecisionRule {
    if section.is_text("decision_rule") {
        let simple = section.choice("decision_rule", &[("simple", DecisionRule::Simple)]);
        return simple.map_or(DECISION_RULE, |found| found.value);
    }
    let Some(table) = section.section("decision_rule") else {
        return DECISION_RULE;
    };
    let wanted = "a multiple of U above 0 and at most 10, as 1.0";
    let multiple = table.number_in("guard_band", |r| r > 0.0 && r <= 10.0, wanted);
    if !table.has("guard_band") {
        table.missing(
            "guard_band",
            "the guard band in multiples of U: { guard_band = 1.0 }",
        );
    }
    table.finish();
    multiple.map_or(DECISION_RULE, |found| DecisionRule::GuardBand {
        multiple: found.value,
    })
}

/// What a window makes hard to see. A cycle needs three periods in the window, or it is taken for
/// drift: with one period every run of a trial raised the degree.
fn warn_about_window(section: &Section<'_>, fit: &FitSetup, lateness: Duration) {
    let WindowLength::Time(length) = fit.window else {
        return;
    };
    let Some(found) = section.place("window") else {
        return;
    };
    let warn = |message: &str| section.source().warn(&found.span, &found.key, message);
    if length.0 < 3 * DAY.0 && fit.forced_degree.is_none() && fit.max_degree > 0 {
        warn(
            "holds fewer than three days: a daily cycle (temperature, sun) would be taken for \
             drift; lengthen it, unless the sensor has no such cycle",
        );
    }
    if lateness > length {
        warn("is shorter than `lateness`: the latest readings would find their window gone");
    }
}

/// `publish = { step, max_age }`.
fn publish(section: &Section<'_>) -> PublishSetup {
    let table = section.section("publish");
    let table = table.as_ref();
    let step = table.and_then(|t| t.number_in("step", |x| x > 0.0, "greater than zero"));
    let max_age = table.and_then(|table| table.positive_duration("max_age"));
    if let Some(table) = table {
        table.finish();
    }
    PublishSetup {
        step: step.map_or(PUBLISH_STEP, |found| found.value),
        max_age: max_age.map_or(PUBLISH_MAX_AGE, |found| found.value),
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
    AlarmSetup {
        delay: delay.map_or(ALARM_DELAY, |found| found.value),
        deadband: deadband.map_or(ALARM_DEADBAND, |found| found.value),
        gap_after: gap_after.map(|found| found.value),
    }
}
