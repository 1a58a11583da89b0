//! The engine's state in parts, so that the record can hold all of it now and then and in between
//! only what changed.
//!
//! What belongs to one channel, one reference or one influence quantity is a part of its own; the
//! rest is few and small. [`Engine::part`] is a part to be stored in whatever form can hold any
//! `f64` bit by bit and tells the types apart by their order (JSON cannot hold infinities);
//! [`Assembly`] reads parts back and makes an engine of them that goes on as if it had never
//! stopped. What follows from other parts (who listens to whom, who waits until when) is not stored
//! but derived again.
//!
//! Parts come from a disk. Reading them back looks at everything that the engine relies on when it
//! computes, so that a damaged one is told by name; that parts belong together is for the record to
//! know.

use crate::counters::Counters;
use crate::engine::Engine;
use crate::fleet::{FleetDraft, FleetPart, LeapWatch};
use crate::kept::Kept;
use crate::notice::NoticeLimiter;
use serde::{Deserializer, Serialize, Serializer};
use std::collections::BTreeSet;
use std::fmt;
use std::str::FromStr;

/// The name of one part. As text: `setup`, `node`, `orders`, `counters`, and `reference/0`,
/// `influence/0`, `channel/17` with their positions in the setup.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum PartId {
    /// The configuration in force, and what must outlive a removed channel.
    Setup,
    /// What now is, and what is known of the node as a whole.
    Node,
    /// Orders that were done, and the quarantines that stand.
    Orders,
    /// What was refused how often, and what was said about it.
    Counters,
    /// One reference.
    Reference(u32),
    /// One source of an influence quantity.
    Influence(u32),
    /// One channel with its recent indications.
    Channel(u32),
}

impl fmt::Display for PartId {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Setup => f.write_str("setup"),
            Self::Node => f.write_str("node"),
            Self::Orders => f.write_str("orders"),
            Self::Counters => f.write_str("counters"),
            Self::Reference(place) => write!(f, "reference/{place}"),
            Self::Influence(place) => write!(f, "influence/{place}"),
            Self::Channel(place) => write!(f, "channel/{place}"),
        }
    }
}

/// A text that names no part.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct NoPart(pub String);

impl fmt::Display for NoPart {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "`{}` names no part of the engine's state", self.0)
    }
}

impl std::error::Error for NoPart {}

impl FromStr for PartId {
    type Err = NoPart;

    fn from_str(text: &str) -> Result<Self, NoPart> {
        let read = match text.split_once('/') {
            None => match text {
                "setup" => Some(Self::Setup),
                "node" => Some(Self::Node),
                "orders" => Some(Self::Orders),
                "counters" => Some(Self::Counters),
                _ => None,
            },
            Some((kind, place)) => place.parse().ok().and_then(|place| match kind {
                "reference" => Some(Self::Reference(place)),
                "influence" => Some(Self::Influence(place)),
                "channel" => Some(Self::Channel(place)),
                _ => None,
            }),
        };
        // `channel/+7` and `channel/007` would be second names.
        read.filter(|id| id.to_string() == text)
            .ok_or_else(|| NoPart(text.to_owned()))
    }
}

/// A part that can't be used, and why.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct StateError {
    /// Which.
    pub part: PartId,
    /// Why, in words.
    pub why: String,
}

impl fmt::Display for StateError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "part {} of the engine's state {}", self.part, self.why)
    }
}

impl std::error::Error for StateError {}

/// One part, to be stored.
pub struct Part<'a>(Content<'a>);

enum Content<'a> {
    OfFleet(FleetPart<'a>),
    Node(FleetPart<'a>, &'a LeapWatch),
    Counters(&'a Counters, &'a NoticeLimiter),
}

impl Serialize for Part<'_> {
    fn serialize<S: Serializer>(&self, to: S) -> Result<S::Ok, S::Error> {
        match &self.0 {
            Content::OfFleet(part) => part.serialize(to),
            Content::Node(part, leaps) => (part, leaps).serialize(to),
            Content::Counters(counters, notices) => (counters, notices).serialize(to),
        }
    }
}

impl Engine {
    /// All parts that make up the state, in order.
    pub fn parts(&self) -> impl Iterator<Item = PartId> {
        self.fleet.part_ids()
    }

    /// Those that may have changed since [`Engine::mark_saved`]; at first all of them, and again
    /// once a configuration was adopted.
    #[must_use]
    pub fn changed(&self) -> BTreeSet<PartId> {
        let counters = self.counters.has_changed() || self.notices.has_changed();
        self.parts()
            .filter(|&id| match id {
                PartId::Counters => counters,
                _ => self.fleet.has_changed(id),
            })
            .collect()
    }

    /// The state as it is now has been saved. What the engine says does not depend on it.
    pub fn mark_saved(&mut self) {
        self.counters.mark_saved();
        self.notices.mark_saved();
        self.fleet.mark_saved();
    }

    /// One part; `None` if there is none of this name.
    #[must_use]
    pub fn part(&self, id: PartId) -> Option<Part<'_>> {
        let content = match id {
            PartId::Counters => Content::Counters(&self.counters, &self.notices),
            PartId::Node => Content::Node(self.fleet.part(id)?, &self.leaps),
            _ => Content::OfFleet(self.fleet.part(id)?),
        };
        Some(Part(content))
    }
}

/// An engine that is being put together: begin with the part [`PartId::Setup`], take every one of
/// [`Assembly::wanted`] in any order, finish.
#[derive(Debug)]
pub struct Assembly {
    fleet: FleetDraft,
    counters: Option<(Kept<Counters>, Kept<NoticeLimiter>)>,
    leaps: LeapWatch,
}

impl Assembly {
    /// Begins with the part [`PartId::Setup`].
    ///
    /// # Errors
    /// If it can't be read, or refers to what it does not have.
    pub fn begin<'de, D: Deserializer<'de>>(setup: D) -> Result<Self, StateError> {
        Ok(Self {
            fleet: FleetDraft::begin(setup)?,
            counters: None,
            leaps: LeapWatch::default(),
        })
    }

    /// The other parts that the configuration asks for. What else is stored was left by another
    /// configuration.
    pub fn wanted(&self) -> impl Iterator<Item = PartId> + use<> {
        self.fleet.part_ids().filter(|&id| id != PartId::Setup)
    }

    /// Takes one of the other parts.
    ///
    /// # Errors
    /// If it can't be read, does not fit the configuration or contradicts itself.
    pub fn take<'de, D: Deserializer<'de>>(
        &mut self,
        id: PartId,
        stored: D,
    ) -> Result<(), StateError> {
        match id {
            PartId::Counters => self.counters = Some(read(id, stored)?),
            PartId::Node => {
                let (node, leaps) = read(id, stored)?;
                self.leaps = leaps;
                self.fleet.take_node(node)?;
            }
            _ => self.fleet.take(id, stored)?,
        }
        Ok(())
    }

    /// The engine.
    ///
    /// # Errors
    /// If a part is missing.
    pub fn finish(self) -> Result<Engine, StateError> {
        let (counters, notices) = self.counters.ok_or_else(|| missing(PartId::Counters))?;
        Ok(Engine {
            fleet: self.fleet.finish()?,
            counters,
            notices,
            leaps: self.leaps,
        })
    }
}

/// Reads a part of whatever makes it up.
pub(crate) fn read<'de, T, D>(part: PartId, stored: D) -> Result<T, StateError>
where
    T: serde::Deserialize<'de>,
    D: Deserializer<'de>,
{
    T::deserialize(stored).map_err(|error| StateError {
        part,
        why: format!("can't be read: {error}"),
    })
}

/// A part that is not there.
pub(crate) fn missing(part: PartId) -> StateError {
    StateError {
        part,
        why: "is missing".to_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_of_parts_read_back_and_nothing_else_does() {
        let ids = [
            PartId::Setup,
            PartId::Node,
            PartId::Orders,
            PartId::Counters,
            PartId::Reference(0),
            PartId::Influence(3),
            PartId::Channel(u32::MAX),
        ];
        for id in ids {
            assert_eq!(id.to_string().parse(), Ok(id));
        }
        assert_eq!(PartId::Channel(17).to_string(), "channel/17");
        for text in [
            "",
            "channel",
            "channel/",
            "channel/-1",
            "channel/+1",
            "channel/01",
            "node/1",
        ] {
            assert_eq!(text.parse::<PartId>(), Err(NoPart(text.to_owned())));
        }
    }
}
