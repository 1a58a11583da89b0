//! Where a value stands: a topic, and a place in its payload (plain, JSON pointer, SenML name).

use super::name;
use super::reader::Section;
use super::source::Found;
use crate::payload::{Format, JsonPlace, Pointer, Scalar, SenmlPlace, Status, TimeUnit};

/// A topic and a place in its payload.
#[derive(Clone, Debug)]
pub(super) struct Place {
    pub(super) topic: Found<String>,
    pub(super) format: Format,
    /// The place within the payload as a person writes it; equal for equal places.
    pub(super) address: String,
}

/// The keys that say when a value was sampled, taken over by what stands in the same payload.
#[derive(Clone, Debug, Default)]
struct Timing {
    time: Option<Pointer>,
    unit: TimeUnit,
}

/// The condition of a gate.
pub(super) struct Condition {
    pub(super) place: Place,
    pub(super) open: Vec<Scalar>,
    /// It has a topic of its own, not the indication's payload.
    pub(super) own_topic: bool,
}

/// Reads `topic`, `value`, `time`, `time_unit`, `sequence`, `status`, `senml`, `sum`, `senml_unit`.
/// Without a topic the value stands in the same payload as `beside`.
pub(super) fn value(section: &Section<'_>, beside: Option<&Place>) -> Option<Place> {
    let topic = topic(section, beside);
    let timing = timing(section, beside);
    let sequence = pointer(section, "sequence");
    let sum = section.truth("sum");
    let unit = section.text("senml_unit");
    let status = section.section("status");
    let format = match (pointer(section, "value"), section.text("senml")) {
        (Some(_), Some(senml)) => {
            section.wrong(
                &senml,
                "stands beside `value`; a value is either JSON or SenML",
            );
            return None;
        }
        (Some(value), None) => Format::Json(JsonPlace {
            value: value.value,
            time: timing.time,
            time_unit: timing.unit,
            sequence: sequence.map(|found| found.value),
            status: status.and_then(|status| json_status(&status)),
        }),
        (None, Some(name)) => Format::Senml(SenmlPlace {
            name: senml_name(section, &name)?,
            sum: sum.is_some_and(|found| found.value),
            unit: unit.map(|found| found.value.to_owned()),
            status: status.and_then(|status| senml_status(&status)),
        }),
        (None, None) => Format::Plain,
    };
    refuse_strangers(section, &format);
    if matches!(format, Format::Plain) && !section.has("topic") && beside.is_some() {
        let advice = "name the JSON pointer of the value in the indication's payload, or a topic";
        section.missing("value", advice);
        return None;
    }
    Some(Place {
        topic: topic?,
        address: address(&format),
        format,
    })
}

/// Reads a `valid_when` table: a place and `equals`.
pub(super) fn condition(section: &Section<'_>, beside: Option<&Place>) -> Option<Condition> {
    let own_topic = section.has("topic");
    let topic = topic(section, beside);
    let timing = timing(section, beside);
    let format = match (pointer(section, "value"), section.text("senml")) {
        (Some(value), None) => Format::Json(JsonPlace {
            value: value.value,
            time: timing.time,
            time_unit: timing.unit,
            sequence: None,
            status: None,
        }),
        (None, Some(name)) => Format::Senml(SenmlPlace {
            name: senml_name(section, &name)?,
            sum: false,
            unit: None,
            status: None,
        }),
        (Some(_), Some(senml)) => {
            section.wrong(
                &senml,
                "stands beside `value`; a place is either JSON or SenML",
            );
            return None;
        }
        (None, None) => Format::Plain,
    };
    if !matches!(format, Format::Json(_)) {
        refuse(
            section,
            &["time"],
            "needs `value`: only JSON bears a time by pointer",
        );
    }
    let open = good_values(
        section,
        "equals",
        "the values that mean \"the reference holds\"",
    );
    section.finish();
    Some(Condition {
        place: Place {
            topic: topic?,
            address: address(&format),
            format,
        },
        open,
        own_topic,
    })
}

fn topic(section: &Section<'_>, beside: Option<&Place>) -> Option<Found<String>> {
    let Some(found) = section.text("topic") else {
        if beside.is_none() && !section.has("topic") {
            section.missing("topic", "name the MQTT topic that carries it");
        }
        return beside.map(|place| place.topic.clone());
    };
    if let Err(message) = name::check_topic(found.value) {
        section.wrong(&found, message);
        return None;
    }
    Some(found.with(found.value.to_owned()))
}

/// `time` and `time_unit`; in the same payload the indication's time counts.
fn timing(section: &Section<'_>, beside: Option<&Place>) -> Timing {
    let unit = section.choice(
        "time_unit",
        &[
            ("s", TimeUnit::Seconds),
            ("ms", TimeUnit::Milliseconds),
            ("us", TimeUnit::Microseconds),
            ("ns", TimeUnit::Nanoseconds),
        ],
    );
    let time = pointer(section, "time");
    if let (Some(unit), None) = (&unit, &time) {
        section.wrong(unit, "says nothing without `time`");
    }
    match (beside.map(|place| &place.format), &time) {
        (Some(Format::Json(place)), None) if !section.has("topic") => Timing {
            time: place.time.clone(),
            unit: place.time_unit,
        },
        _ => Timing {
            time: time.map(|found| found.value),
            unit: unit.map(|found| found.value).unwrap_or_default(),
        },
    }
}

/// Keys that say nothing in the chosen format.
fn refuse_strangers(section: &Section<'_>, format: &Format) {
    let (strange, because): (&[&'static str], _) = match format {
        Format::Plain => (
            &["time", "sequence", "status", "sum", "senml_unit"],
            "needs `value` (a JSON pointer) or `senml` beside it: a plain number carries no more",
        ),
        Format::Json(_) => (
            &["sum", "senml_unit"],
            "belongs to SenML, but `value` makes it JSON",
        ),
        Format::Senml(_) => (
            &["time", "sequence"],
            "does not belong to SenML, whose records bear their time",
        ),
    };
    refuse(section, strange, because);
}

fn refuse(section: &Section<'_>, keys: &[&'static str], because: &str) {
    for found in keys.iter().filter_map(|key| section.place(key)) {
        section.wrong(&found, because);
    }
}

fn pointer(section: &Section<'_>, key: &'static str) -> Option<Found<Pointer>> {
    let found = section.text(key)?;
    match Pointer::parse(found.value) {
        Ok(pointer) => Some(found.with(pointer)),
        Err(message) => {
            section.wrong(&found, message);
            None
        }
    }
}

fn senml_name(section: &Section<'_>, found: &Found<&str>) -> Option<String> {
    if found.value.is_empty() {
        section.wrong(
            found,
            "is empty; write the record's name with its base name",
        );
        return None;
    }
    Some(found.value.to_owned())
}

fn json_status(section: &Section<'_>) -> Option<Status<Pointer>> {
    if !section.has("value") {
        section.missing("value", "name the JSON pointer of the status field");
    }
    let place = pointer(section, "value");
    let good = good_values(section, "good", "the values that mean \"all is well\"");
    section.finish();
    Some(Status {
        place: place?.value,
        good,
    })
}

fn senml_status(section: &Section<'_>) -> Option<Status<String>> {
    let place = section.need_text("senml", "name the status record of the same pack");
    let good = good_values(section, "good", "the values that mean \"all is well\"");
    section.finish();
    let place = place?;
    Some(Status {
        place: senml_name(section, &place)?,
        good,
    })
}

fn good_values(section: &Section<'_>, key: &'static str, meaning: &str) -> Vec<Scalar> {
    let values = section.scalars(key);
    if values.is_empty() {
        section.missing(key, &format!("list {meaning}, as [\"ok\"] or [0]"));
    }
    values.into_iter().map(|found| found.value).collect()
}

fn address(format: &Format) -> String {
    match format {
        Format::Plain => "the whole payload".to_owned(),
        Format::Json(place) => format!("\"{}\"", place.value),
        Format::Senml(place) if place.sum => format!("the sum of record {}", place.name),
        Format::Senml(place) => format!("record {}", place.name),
    }
}
