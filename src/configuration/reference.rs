//! A reference: `[[reference]]`, or the inline table of a channel.

use super::draft::{Draft, Wire};
use super::place::{self, Place};
use super::reader::Section;
use super::source::Found;
use crate::payload::{Target, Use, instant};
use holdtrue_engine::setup::{ChannelId, ReferenceId, ReferenceKind, ReferenceSetup, Stamped};
use holdtrue_engine::time::{Duration, Timestamp};

/// A day, which a certificate that names a date lasts through.
const DAY: Duration = Duration::from_seconds(86_400);
/// Length of a date without a time of day.
const DATE_LENGTH: usize = 10;
/// Fewest known values of a reference that is made of several.
const POINTS_MIN: usize = 2;
/// Fewest other members of a group.
const OTHERS_MIN: usize = 3;

/// What an inline reference may look at.
pub(super) struct Beside<'a> {
    /// The channel that it belongs to.
    pub(super) channel: ChannelId,
    pub(super) channel_name: &'a str,
    /// Where the channel's indication stands.
    pub(super) indication: Option<&'a Place>,
}

/// Reads a reference and adds it to the draft; its position is the next free one.
pub(super) fn read(
    section: &Section<'_>,
    name: &str,
    beside: Option<&Beside<'_>>,
    draft: &mut Draft,
) {
    let id = draft.next_reference();
    let kind = kind(section, name, id, beside, draft);
    let (each, common) = match &kind {
        ReferenceKind::Checks { points } => largest_uncertainty(points, draft),
        _ => uncertainty(section),
    };
    let (stands_for, stamped) = interval(section);
    let certificate = section
        .text("certificate")
        .map(|found| found.value.to_owned());
    let expires = expires(section, draft.now);
    let expiry_notice = section.duration("expiry_notice");
    if let Some(found) = expiry_notice.as_ref().filter(|_| !section.has("expires")) {
        section.wrong(found, "says nothing without expires");
    }
    let stale_after = section
        .positive_duration("stale_after")
        .map(|found| found.value);
    section.finish();
    if !matches!(kind, ReferenceKind::Measured) {
        for key in ["stands_for", "stamped", "stale_after"] {
            if let Some(found) = section.place(key) {
                section.wrong(&found, "belongs to a reference that is measured");
            }
        }
    }
    let default = ReferenceSetup::new(name, kind);
    draft.references.push(ReferenceSetup {
        uncertainty_each: each,
        uncertainty_common: common,
        certificate,
        expires,
        expiry_notice: expiry_notice.map_or(default.expiry_notice, |found| found.value),
        stale_after,
        stands_for,
        stamped,
        ..default
    });
}

/// One of five kinds: values on a topic or in the indication's payload, a constant, several of
/// them, a group.
fn kind(
    section: &Section<'_>,
    name: &str,
    id: ReferenceId,
    beside: Option<&Beside<'_>>,
    draft: &mut Draft,
) -> ReferenceKind {
    let constant = section.place("constant");
    let value = section
        .number("constant")
        .map_or(0.0, |found| found.value + 0.0);
    let gate = section.section("valid_when");
    // A named reference stands in no channel, so it cannot tell who is the other members.
    let group = beside.and_then(|beside| group(section, beside, draft));
    let checks = beside.and_then(|_| checks(section, draft));
    let place_keys = ["topic", "value", "senml"]
        .into_iter()
        .find_map(|key| section.place(key));
    let chosen = [
        constant.is_some(),
        group.is_some(),
        checks.is_some(),
        place_keys.is_some(),
    ];
    if chosen.iter().filter(|chosen| **chosen).count() > 1 {
        let message =
            "is of several kinds; keep one of constant, checks, group, or topic and value";
        section.error(message);
    }
    if let (Some(_), None) = (&gate, &constant)
        && let Some(found) = section.place("valid_when")
    {
        section.wrong(
            &found,
            "belongs to a constant; a measured reference has `status`",
        );
    }
    if constant.is_some() {
        known_keys_of_a_place(section);
        let gated = gate.is_some();
        if let Some(gate) = gate {
            self::gate(&gate, name, id, beside, draft);
        }
        return ReferenceKind::Constant { value, gated };
    }
    if let Some(members) = group {
        known_keys_of_a_place(section);
        return ReferenceKind::Group { members };
    }
    if let Some(points) = checks {
        known_keys_of_a_place(section);
        return ReferenceKind::Checks { points };
    }
    if place_keys.is_none() {
        let choices = "say where its values come from: topic (and value), or constant";
        section.error(match beside {
            Some(_) => format!("{choices}, checks, or group, or value alone for the same payload"),
            None => choices.to_owned(),
        });
        known_keys_of_a_place(section);
        return ReferenceKind::Measured;
    }
    if let Some(place) = place::value(section, beside.and_then(|beside| beside.indication)) {
        let target = Target::Reference(id);
        draft.wires.push(Wire {
            topic: place.topic,
            address: place.address,
            owner: format!("reference {name}"),
            wanted: Use {
                target,
                format: place.format,
            },
        });
    }
    ReferenceKind::Measured
}

/// A constant's `valid_when`.
fn gate(
    section: &Section<'_>,
    name: &str,
    id: ReferenceId,
    beside: Option<&Beside<'_>>,
    draft: &mut Draft,
) {
    let indication = beside.and_then(|beside| beside.indication);
    let Some(condition) = place::condition(section, indication) else {
        return;
    };
    let target = Target::Gate {
        reference: id,
        open: condition.open,
        own_topic: condition.own_topic,
    };
    draft.wires.push(Wire {
        topic: condition.place.topic,
        address: condition.place.address,
        owner: format!("valid_when of reference {name}"),
        wanted: Use {
            target,
            format: condition.place.format,
        },
    });
}

/// The other members of a group; the channel itself may be listed and is left out.
fn group(section: &Section<'_>, beside: &Beside<'_>, draft: &Draft) -> Option<Vec<ChannelId>> {
    let found = section.place("group")?;
    let mut members = Vec::new();
    for member in section.texts("group") {
        match draft.channel_ids.get(member.value) {
            Some(id) if *id == beside.channel => {}
            Some(id) if members.contains(id) => {
                section.wrong(&member, format!("\"{}\" is named twice", member.value));
            }
            Some(id) => members.push(*id),
            None => {
                let nearest = draft.nearest_channel(member.value);
                section.wrong(&member, format!("no channel \"{}\"{nearest}", member.value));
            }
        }
    }
    if members.len() < OTHERS_MIN {
        let message = format!(
            "{} other than {} itself; a median needs at least {OTHERS_MIN}, because with fewer \
             nobody can tell which one is wrong; name more channels or another reference",
            members.len(),
            beside.channel_name
        );
        section.wrong(&found, message);
    }
    Some(members)
}

/// Several known values of which one holds at a time, as zero gas and span gas: the names of
/// constants with `valid_when`.
fn checks(section: &Section<'_>, draft: &Draft) -> Option<Vec<ReferenceId>> {
    let found = section.place("checks")?;
    let mut points = Vec::new();
    for point in section.texts("checks") {
        let Some(&id) = draft.reference_ids.get(point.value) else {
            let nearest = draft.nearest_reference(point.value);
            section.wrong(&point, format!("no reference \"{}\"{nearest}", point.value));
            continue;
        };
        let known = draft.references.get(id.0 as usize).map(|it| &it.kind);
        if !matches!(known, Some(ReferenceKind::Constant { gated: true, .. })) {
            let message = format!(
                "\"{}\" is no constant with valid_when, so nothing tells when it holds; check \
                 points are such constants",
                point.value
            );
            section.wrong(&point, message);
        }
        if points.contains(&id) {
            section.wrong(&point, format!("\"{}\" is named twice", point.value));
        }
        points.push(id);
    }
    if points.len() < POINTS_MIN {
        let message = "needs at least two known values, as [\"zero-gas\", \"span-gas\"]; for a \
                       single one name that reference itself";
        section.wrong(&found, message);
    }
    for key in ["uncertainty", "certificate", "expires"] {
        if let Some(found) = section.place(key) {
            section.wrong(&found, "belongs to each of the references named in checks");
        }
    }
    Some(points)
}

/// The largest uncertainties among known values: what is said of an error holds at each of them.
fn largest_uncertainty(points: &[ReferenceId], draft: &Draft) -> (f64, f64) {
    let points = points.iter();
    let known = points.filter_map(|id| draft.references.get(id.0 as usize));
    known.fold((0.0, 0.0), |(each, common), point| {
        (
            point.uncertainty_each.max(each),
            point.uncertainty_common.max(common),
        )
    })
}

/// Lets the keys of a place be known, and refuses those that are set: a constant and a group have
/// no place.
fn known_keys_of_a_place(section: &Section<'_>) {
    for key in [
        "time",
        "time_unit",
        "sequence",
        "status",
        "sum",
        "senml_unit",
    ] {
        if let Some(found) = section.place(key) {
            section.wrong(&found, "belongs to a reference that is measured");
        }
    }
}

/// `uncertainty = { each, common }`, standard uncertainties.
fn uncertainty(section: &Section<'_>) -> (f64, f64) {
    let Some(table) = section.section("uncertainty") else {
        return (0.0, 0.0);
    };
    let part = |key| {
        let found = table.number_in(key, |u| u >= 0.0, "a standard uncertainty of zero or more");
        found.map_or(0.0, |found| found.value + 0.0)
    };
    let parts = (part("each"), part("common"));
    table.finish();
    parts
}

/// `stands_for` and `stamped`. A value that stands for an interval must say which instant of it its
/// time names: half an hour wrong on a daily swing is a false error.
fn interval(section: &Section<'_>) -> (Duration, Stamped) {
    let stands_for = section
        .duration("stands_for")
        .map_or(Duration::ZERO, |found| found.value);
    let stamped = section.choice(
        "stamped",
        &[
            ("start", Stamped::Start),
            ("middle", Stamped::Middle),
            ("end", Stamped::End),
        ],
    );
    if stands_for > Duration::ZERO && !section.has("stamped") {
        let advice = "a value that stands for a stretch of time must say which instant its time \
                      names: \"start\", \"middle\" or \"end\"";
        section.missing("stamped", advice);
    }
    if let Some(found) = stamped.as_ref().filter(|_| !section.has("stands_for")) {
        section.wrong(found, "says nothing without stands_for");
    }
    (
        stands_for,
        stamped.map_or(Stamped::Middle, |found| found.value),
    )
}

/// `expires`: an instant, or a date that the certificate lasts through.
fn expires(section: &Section<'_>, now: Timestamp) -> Option<Timestamp> {
    let found: Found<String> = section.date("expires")?;
    let Ok(instant) = instant::from_text(&found.value) else {
        let message = format!("\"{}\" is not a date, as \"2027-06-30\"", found.value);
        section.wrong(&found, message);
        return None;
    };
    let end = if found.value.len() == DATE_LENGTH {
        instant.plus(DAY)
    } else {
        instant
    };
    if end <= now {
        let message = format!("the certificate expired on {}; renew it", found.value);
        section.source().warn(&found.span, &found.key, message);
    }
    Some(end)
}
