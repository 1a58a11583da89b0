//! What only shows when all entries are known: places used twice, loops, weak references.

use super::draft::{Draft, Wire};
use super::name;
use super::reader::Section;
use super::source::{Found, Source};
use crate::payload::{Format, Tables, Target, Use};
use holdtrue_engine::setup::{ChannelSetup, ReferenceId, ReferenceKind, UNCERTAINTY_RATIO_MIN};
use std::collections::BTreeMap;
use std::mem::discriminant;

/// Checks all places against each other and turns them into tables.
pub(super) fn tables(
    source: &Source<'_>,
    node: &str,
    subscribe: &[Found<String>],
    max_payload: u32,
    wires: Vec<Wire>,
) -> Tables {
    let own = format!("holdtrue/{node}/");
    refuse_loops(source, &own, subscribe, &wires);
    refuse_double_use(source, &wires);
    refuse_mixed_formats(source, &wires);
    let mut topics: BTreeMap<String, Vec<Use>> = BTreeMap::new();
    for wire in wires {
        topics
            .entry(wire.topic.value)
            .or_default()
            .push(wire.wanted);
    }
    for uses in topics.values_mut() {
        uses.sort_by_key(|wanted| match wanted.target {
            Target::Gate { .. } => 0,
            Target::Reference(_) => 1,
            Target::Influence(_) => 2,
            Target::Indication(_) => 3,
        });
    }
    let filters = filters(source, subscribe, topics.keys());
    Tables {
        filters,
        topics,
        max_payload: usize::try_from(max_payload).unwrap_or(usize::MAX),
    }
}

/// What we publish must not come back as something to fit against.
fn refuse_loops(source: &Source<'_>, own: &str, subscribe: &[Found<String>], wires: &[Wire]) {
    for wire in wires
        .iter()
        .filter(|wire| wire.topic.value.starts_with(own))
    {
        let message = format!(
            "\"{}\" is this daemon's own output: fitting against a corrected value would feed the \
             correction back into itself; name the sensor's or the reference's own topic",
            wire.topic.value
        );
        source.error(&wire.topic.span, &wire.topic.key, message);
    }
    // Another node's corrected value bears a correction all the same, maybe one that rests on us.
    let corrected = |topic: &str| {
        let mut levels = topic.split('/').skip(2);
        topic.starts_with("holdtrue/")
            && !topic.starts_with(own)
            && levels.next() == Some("corrected")
    };
    for wire in wires
        .iter()
        .filter(|wire| wire.is_judged() && corrected(&wire.topic.value))
    {
        let message = format!(
            "\"{}\" is a corrected value of another node: fitting against it would take its \
             correction for the truth; name the sensor's or the reference's own topic",
            wire.topic.value
        );
        source.error(&wire.topic.span, &wire.topic.key, message);
    }
    for filter in subscribe
        .iter()
        .filter(|filter| name::reaches_below(&filter.value, own))
    {
        let message = format!(
            "\"{}\" matches this daemon's own output {own}…; narrow it to the plant's topics",
            filter.value
        );
        source.error(&filter.span, &filter.key, message);
    }
}

/// A place in a payload is one sensor's or one reference's value; only gates may share theirs, and
/// what is measured for its own sake may also act on another sensor.
fn refuse_double_use(source: &Source<'_>, wires: &[Wire]) {
    let mut first: BTreeMap<(&str, &str), &Wire> = BTreeMap::new();
    for wire in wires.iter().filter(|wire| wire.is_judged()) {
        let Some(earlier) = first.insert((&wire.topic.value, &wire.address), wire) else {
            continue;
        };
        let indication = |wire: &Wire| matches!(wire.wanted.target, Target::Indication(_));
        let way_out = match (indication(earlier), indication(wire)) {
            (true, true) => "two channels can't be one sensor's value; name the other place",
            (false, false) => "declare it once as a [[reference]] and let both channels name it",
            _ => {
                "a sensor that is corrected can't be a reference at the same time (such \
                  references can run in a circle); use a reference of its own or a group"
            }
        };
        let message = format!(
            "{} of \"{}\" is already the value of {}; {way_out}",
            wire.address, wire.topic.value, earlier.owner
        );
        source.error(&wire.topic.span, &wire.topic.key, message);
    }
}

/// One topic has one format.
fn refuse_mixed_formats(source: &Source<'_>, wires: &[Wire]) {
    let mut first: BTreeMap<&str, &Wire> = BTreeMap::new();
    for wire in wires {
        let earlier = first.entry(&wire.topic.value).or_insert(wire);
        if discriminant(&earlier.wanted.format) != discriminant(&wire.wanted.format) {
            let message = format!(
                "\"{}\" is read as {} here and as {} by {}; one topic has one format",
                wire.topic.value,
                format_name(&wire.wanted.format),
                format_name(&earlier.wanted.format),
                earlier.owner
            );
            source.error(&wire.topic.span, &wire.topic.key, message);
        }
    }
}

fn format_name(format: &Format) -> &'static str {
    match format {
        Format::Plain => "a plain number",
        Format::Json(_) => "JSON",
        Format::Senml(_) => "SenML",
    }
}

/// The wildcard filters, and the topics that none of them covers.
fn filters<'topic>(
    source: &Source<'_>,
    subscribe: &[Found<String>],
    topics: impl Iterator<Item = &'topic String> + Clone,
) -> Vec<String> {
    for filter in subscribe {
        if !topics
            .clone()
            .any(|topic| name::covers(&filter.value, topic))
        {
            let message = format!("\"{}\" covers no topic of this file", filter.value);
            source.warn(&filter.span, &filter.key, message);
        }
    }
    let uncovered = topics.filter(|topic| {
        !subscribe
            .iter()
            .any(|filter| name::covers(&filter.value, topic))
    });
    let mut filters: Vec<String> = subscribe
        .iter()
        .map(|filter| filter.value.clone())
        .chain(uncovered.cloned())
        .collect();
    filters.sort();
    filters.dedup();
    filters
}

/// What a channel measures, and what it is judged against, can't be told apart from what acts on
/// it.
pub(super) fn refuse_influence_on_itself(source: &Source<'_>, draft: &Draft) {
    for wire in &draft.wires {
        let Target::Influence(influence) = wire.wanted.target else {
            continue;
        };
        let mut same = draft
            .wires
            .iter()
            .filter(|other| other.topic.value == wire.topic.value && other.address == wire.address);
        let acts_on =
            |channel: &ChannelSetup| channel.influences.iter().any(|it| it.source == influence);
        let clash = same.find(|other| match other.wanted.target {
            Target::Indication(id) => draft.channels.get(id.0 as usize).is_some_and(acts_on),
            Target::Reference(id) => draft
                .channels
                .iter()
                .any(|channel| channel.reference == id && acts_on(channel)),
            Target::Influence(_) | Target::Gate { .. } => false,
        });
        if let Some(clash) = clash {
            let message = format!(
                "{} of \"{}\" is the value of {}: an error that depends on it is span drift, not \
                 an influence; leave it out and set max_span_degree",
                wire.address, wire.topic.value, clash.owner
            );
            source.error(&wire.topic.span, &wire.topic.key, message);
        }
    }
}

/// A named reference that nobody is judged against.
pub(super) fn warn_about_unused(sections: &[Section<'_>], draft: &Draft) {
    let used = |id: ReferenceId| {
        draft.channels.iter().any(|channel| {
            let reference = draft.references.get(channel.reference.0 as usize);
            channel.reference == id
                || matches!(
                    reference.map(|it| &it.kind),
                    Some(ReferenceKind::Checks { points }) if points.contains(&id)
                )
        })
    };
    for (section, id) in sections.iter().zip(0..) {
        if !used(ReferenceId(id))
            && let Some(found) = section.place("name")
        {
            let message =
                "no channel is judged against this reference; name it in one, or remove it";
            section.source().warn(&found.span, &found.key, message);
        }
    }
}

/// Whether each channel's reference is good enough for its limit.
pub(super) fn warn_about_references(sections: &[Section<'_>], draft: &Draft) {
    for (section, channel) in sections.iter().zip(&draft.channels) {
        let message = reference_is_weak(channel, draft);
        let place = section.place("max_permissible_error");
        if let (Some(message), Some(found)) = (message, place) {
            section.source().warn(&found.span, &found.key, message);
        }
    }
}

fn reference_is_weak(channel: &ChannelSetup, draft: &Draft) -> Option<String> {
    let limit = channel.max_permissible_error?;
    let reference = draft.references.get(channel.reference.0 as usize)?;
    let expanded = reference.expanded_uncertainty();
    if expanded == 0.0 && !matches!(reference.kind, ReferenceKind::Group { .. }) {
        return Some(format!(
            "is judged against reference {}, whose uncertainty is not given and counts as zero; \
             add uncertainty = {{ each = …, common = … }}",
            reference.name
        ));
    }
    (!reference.is_good_enough_for(limit)).then(|| {
        format!(
            "is less than {UNCERTAINTY_RATIO_MIN} times the expanded uncertainty {expanded} of \
             reference {}: trends are shown, but no conformity is stated",
            reference.name
        )
    })
}
