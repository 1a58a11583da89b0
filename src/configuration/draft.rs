//! What has been read so far, while references and channels still refer to each other by name.

use super::source::Found;
use crate::payload::{Target, Use};
use holdtrue_engine::setup::{
    ChannelId, ChannelSetup, InfluenceId, InfluenceSetup, ReferenceId, ReferenceSetup,
};
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeMap;

/// References and channels in the order of the file; inline references follow the named ones.
pub(super) struct Draft {
    /// When the file is read; tells which certificates have expired.
    pub(super) now: Timestamp,
    pub(super) references: Vec<ReferenceSetup>,
    /// Sources of influence quantities, each place once.
    pub(super) influences: Vec<InfluenceSetup>,
    pub(super) channels: Vec<ChannelSetup>,
    /// All channel names, before the channels are read: a group may name a later one.
    pub(super) channel_ids: BTreeMap<String, ChannelId>,
    /// The named references.
    pub(super) reference_ids: BTreeMap<String, ReferenceId>,
    /// Everything that comes in over topics.
    pub(super) wires: Vec<Wire>,
}

/// One thing that a topic carries, with what a message about it needs.
pub(super) struct Wire {
    pub(super) topic: Found<String>,
    /// The place in the payload; equal for equal places.
    pub(super) address: String,
    /// Who wants it, in words.
    pub(super) owner: String,
    pub(super) wanted: Use,
}

impl Wire {
    /// Whether it is a side of pairs: an indication or a reference value.
    pub(super) fn is_judged(&self) -> bool {
        matches!(
            self.wanted.target,
            Target::Indication(_) | Target::Reference(_)
        )
    }
}

impl Draft {
    pub(super) fn new(now: Timestamp) -> Self {
        Self {
            now,
            references: Vec::new(),
            influences: Vec::new(),
            channels: Vec::new(),
            channel_ids: BTreeMap::new(),
            reference_ids: BTreeMap::new(),
            wires: Vec::new(),
        }
    }

    /// The position that the next reference will have.
    pub(super) fn next_reference(&self) -> ReferenceId {
        ReferenceId(position(self.references.len()))
    }

    /// The position that the next channel will have.
    pub(super) fn next_channel(&self) -> ChannelId {
        ChannelId(position(self.channels.len()))
    }

    /// Adds a source of an influence quantity.
    pub(super) fn add_influence(&mut self, name: String) -> InfluenceId {
        self.influences.push(InfluenceSetup { name });
        InfluenceId(position(self.influences.len() - 1))
    }

    /// "; did you mean …?" for a channel name that does not exist.
    pub(super) fn nearest_channel(&self, name: &str) -> String {
        nearest(self.channel_ids.keys(), name)
    }

    /// The same for a reference name.
    pub(super) fn nearest_reference(&self, name: &str) -> String {
        nearest(self.reference_ids.keys(), name)
    }
}

/// A position as the engine counts them.
pub(super) fn position(index: usize) -> u32 {
    // A file with more than four thousand million entries does not fit into memory.
    u32::try_from(index).unwrap_or(u32::MAX)
}

fn nearest<'a>(names: impl Iterator<Item = &'a String>, wanted: &str) -> String {
    names
        .map(|name| (strsim::jaro_winkler(name, wanted), name))
        .filter(|(likeness, _)| *likeness >= super::reader::ALIKE)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map_or_else(String::new, |(_, name)| {
            format!("; did you mean \"{name}\"?")
        })
}
