//! What acts on a channel's error without being what it measures: `influences`.

use super::draft::{Draft, Wire};
use super::place::{self, Place};
use super::reader::Section;
use crate::payload::{Target, Use};
use holdtrue_engine::fit::basis::MAX_INFLUENCES;
use holdtrue_engine::setup::{ChannelInfluence, InfluenceId};

/// Reads `influences = [ { name, unit, topic, value, … } ]`; without a topic the value stands in
/// the indication's payload. Sources new to the draft are added to it.
pub(super) fn read(
    section: &Section<'_>,
    channel: &str,
    indication: Option<&Place>,
    draft: &mut Draft,
) -> Vec<ChannelInfluence> {
    let tables = section.sections("influences");
    if tables.len() > MAX_INFLUENCES
        && let Some(found) = section.place("influences")
    {
        let message = format!(
            "{} influence quantities; at most {MAX_INFLUENCES} are told apart from drift, keep \
             those that act most",
            tables.len()
        );
        section.wrong(&found, message);
    }
    let mut influences: Vec<ChannelInfluence> = Vec::new();
    for table in &tables {
        let name = table.need_text("name", "what it is, as \"temperature\"");
        let unit = table.text("unit");
        let place = place::value(table, indication);
        table.finish();
        let (Some(name), Some(place)) = (name, place) else {
            continue;
        };
        let source = source(table, channel, place, draft);
        if influences.iter().any(|known| known.name == name.value) {
            table.wrong(&name, format!("\"{}\" is named twice", name.value));
        }
        if influences.iter().any(|known| known.source == source) {
            table.error("is the same value as another influence of this channel; keep one");
        }
        influences.push(ChannelInfluence {
            source,
            name: name.value.to_owned(),
            unit: unit.map(|found| found.value.to_owned()),
        });
    }
    influences
}

/// The source of a place: one known before, if it is read alike.
fn source(section: &Section<'_>, channel: &str, place: Place, draft: &mut Draft) -> InfluenceId {
    let wanted = |wire: &&Wire| {
        matches!(wire.wanted.target, Target::Influence(_))
            && wire.topic.value == place.topic.value
            && wire.address == place.address
    };
    if let Some(known) = draft.wires.iter().find(wanted)
        && let Target::Influence(id) = known.wanted.target
    {
        if known.wanted.format != place.format {
            section.error(format!(
                "is also the {}, but read otherwise there (time, sequence or status); write both \
                 alike",
                known.owner
            ));
        }
        return id;
    }
    // Without a topic of its own, what is wrong with the place is told where its value is named.
    let mut keys = ["topic", "value", "senml"].into_iter();
    let named = keys.find_map(|key| section.place(key));
    let topic = named.map_or(place.topic.clone(), |it| it.with(place.topic.value));
    let name = format!("{} {}", topic.value, place.address);
    let id = draft.add_influence(name);
    draft.wires.push(Wire {
        topic,
        address: place.address,
        owner: format!("influence on channel {channel}"),
        wanted: Use {
            target: Target::Influence(id),
            format: place.format,
        },
    });
    id
}
