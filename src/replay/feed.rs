//! Recorded inputs for another configuration: sources are known by name there, and stand elsewhere.

use holdtrue_engine::event::{Gate, Input, Reading, Refused, Source};
use holdtrue_engine::setup::{ChannelId, InfluenceId, ReferenceId, Setup};
use std::collections::BTreeMap;

/// From the positions of a recorded configuration to those of another.
pub(super) struct Feed {
    places: BTreeMap<Source, Source>,
}

impl Feed {
    /// From `recorded` to `other`. A channel in another unit is another channel.
    pub(super) fn new(recorded: &Setup, other: &Setup) -> Self {
        let mut places = BTreeMap::new();
        for (at, channel) in recorded.channels.iter().enumerate() {
            let same = |it: &holdtrue_engine::setup::ChannelSetup| {
                it.name == channel.name && it.unit == channel.unit
            };
            if let Some(to) = other.channels.iter().position(same) {
                let to = Source::Indication(ChannelId::at(to));
                places.insert(Source::Indication(ChannelId::at(at)), to);
            }
        }
        for (at, reference) in recorded.references.iter().enumerate() {
            let same = |it: &holdtrue_engine::setup::ReferenceSetup| it.name == reference.name;
            if let Some(to) = other.references.iter().position(same) {
                let to = Source::Reference(ReferenceId::at(to));
                places.insert(Source::Reference(ReferenceId::at(at)), to);
            }
        }
        for (at, influence) in (0..).zip(&recorded.influences) {
            if let Some((to, _)) = (0..)
                .zip(&other.influences)
                .find(|(_, it)| *it == influence)
            {
                let to = Source::Influence(InfluenceId(to));
                places.insert(Source::Influence(InfluenceId(at)), to);
            }
        }
        Self { places }
    }

    /// The input for the other configuration; `None` for what it makes itself (ticks, supplied
    /// rows, configurations) and for what it has no use for.
    pub(super) fn convert(&self, input: &Input) -> Option<Input> {
        match input {
            Input::Reading(reading) => {
                let source = *self.places.get(&reading.source)?;
                Some(Input::Reading(Reading {
                    source,
                    ..reading.clone()
                }))
            }
            Input::Gate(gate) => match self.places.get(&Source::Reference(gate.reference))? {
                Source::Reference(reference) => Some(Input::Gate(Gate {
                    reference: *reference,
                    ..gate.clone()
                })),
                _ => None,
            },
            Input::Refused(refused) => Some(Input::Refused(Refused {
                source: refused
                    .source
                    .and_then(|source| self.places.get(&source).copied()),
                ..refused.clone()
            })),
            Input::Order(_) => Some(input.clone()),
            Input::Setup(_) | Input::Tick { .. } | Input::Supplied(_) => None,
        }
    }

    /// Whether the other configuration knows a source.
    pub(super) fn knows(&self, source: Source) -> bool {
        self.places.contains_key(&source)
    }
}
