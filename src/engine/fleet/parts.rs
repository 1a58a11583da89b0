//! The fleet taken to pieces for the record, and put together again; see [`crate::state`].
//!
//! The agenda and the routes are not stored: they follow from the setup and from when each channel
//! and reference wants to be woken.

use super::Fleet;
use super::adopt::Routes;
use super::agenda::{Agenda, Waiter};
use super::orders::OrderBook;
use super::pulse::Pulse;
use super::quarantine::Quarantines;
use super::reference::Reference;
use crate::channel::Channel;
use crate::kept::Kept;
use crate::setup::Setup;
use crate::state::{PartId, StateError, missing, read};
use crate::time::Timestamp;
use crate::track::Track;
use serde::{Deserialize, Deserializer, Serialize, Serializer};
use std::collections::{BTreeMap, BTreeSet};

/// One part of a fleet, to be stored.
pub(crate) struct FleetPart<'a>(Piece<'a>);

enum Piece<'a> {
    Setup(&'a Setup, &'a BTreeMap<String, u64>),
    Node(Option<Timestamp>, &'a Pulse, &'a BTreeSet<usize>),
    Orders(&'a OrderBook, &'a Quarantines),
    Reference(&'a Reference),
    Influence(&'a Track),
    Channel(&'a Channel, &'a Track),
}

impl Serialize for FleetPart<'_> {
    fn serialize<S: Serializer>(&self, to: S) -> Result<S::Ok, S::Error> {
        match self.0 {
            Piece::Setup(setup, retired) => (setup, retired).serialize(to),
            Piece::Node(now, pulse, heard) => (now, pulse, heard).serialize(to),
            Piece::Orders(orders, quarantines) => (orders, quarantines).serialize(to),
            Piece::Reference(reference) => reference.serialize(to),
            Piece::Influence(track) => track.serialize(to),
            Piece::Channel(channel, track) => (channel, track).serialize(to),
        }
    }
}

/// [`PartId::Node`] as it is read back.
#[derive(Debug, Default, Deserialize)]
pub(crate) struct Node(Option<Timestamp>, Pulse, BTreeSet<usize>);

impl Fleet {
    /// The names of its parts and of [`PartId::Counters`], in order.
    pub(crate) fn part_ids(&self) -> impl Iterator<Item = PartId> + use<> {
        part_ids(&self.setup)
    }

    /// One part; `None` if the fleet has none of this name.
    pub(crate) fn part(&self, id: PartId) -> Option<FleetPart<'_>> {
        let piece = match id {
            PartId::Setup => Piece::Setup(&self.setup, &self.retired),
            PartId::Node => Piece::Node(self.now, &self.pulse, &self.heard),
            PartId::Orders => Piece::Orders(&self.orders, &self.quarantines),
            PartId::Counters => return None,
            PartId::Reference(place) => Piece::Reference(self.references.get(place as usize)?),
            PartId::Influence(place) => Piece::Influence(self.influences.get(place as usize)?),
            PartId::Channel(place) => Piece::Channel(
                self.channels.get(place as usize)?,
                self.indications.get(place as usize)?,
            ),
        };
        Some(FleetPart(piece))
    }

    /// Whether a part may have changed since it was last saved. The node's always has: it is small,
    /// and hardly an input leaves it as it was.
    pub(crate) fn has_changed(&self, id: PartId) -> bool {
        match id {
            PartId::Setup => self.setup.has_changed(),
            PartId::Orders => self.orders.has_changed() || self.quarantines.has_changed(),
            PartId::Node | PartId::Counters => true,
            PartId::Reference(place) => has_changed(&self.references, place),
            PartId::Influence(place) => has_changed(&self.influences, place),
            PartId::Channel(place) => {
                has_changed(&self.channels, place) || has_changed(&self.indications, place)
            }
        }
    }

    /// All of it has been saved as it is.
    pub(crate) fn mark_saved(&mut self) {
        self.setup.mark_saved();
        self.orders.mark_saved();
        self.quarantines.mark_saved();
        self.references.iter_mut().for_each(Kept::mark_saved);
        self.influences.iter_mut().for_each(Kept::mark_saved);
        self.channels.iter_mut().for_each(Kept::mark_saved);
        self.indications.iter_mut().for_each(Kept::mark_saved);
    }
}

fn has_changed<T>(places: &[Kept<T>], place: u32) -> bool {
    places.get(place as usize).is_some_and(Kept::has_changed)
}

/// The names of the parts under a setup.
fn part_ids(setup: &Setup) -> impl Iterator<Item = PartId> + use<> {
    let all = |count: usize| (0..).take(count);
    [
        PartId::Setup,
        PartId::Node,
        PartId::Orders,
        PartId::Counters,
    ]
    .into_iter()
    .chain(all(setup.references.len()).map(PartId::Reference))
    .chain(all(setup.influences.len()).map(PartId::Influence))
    .chain(all(setup.channels.len()).map(PartId::Channel))
}

/// A fleet that is being put together.
#[derive(Debug)]
pub(crate) struct FleetDraft {
    setup: Setup,
    retired: BTreeMap<String, u64>,
    node: Option<Node>,
    orders: Option<(OrderBook, Quarantines)>,
    references: Vec<Option<Reference>>,
    influences: Vec<Option<Track>>,
    channels: Vec<Option<(Channel, Track)>>,
}

impl FleetDraft {
    /// Begins with the part [`PartId::Setup`].
    pub(crate) fn begin<'de, D: Deserializer<'de>>(stored: D) -> Result<Self, StateError> {
        let (setup, retired): (Setup, _) = read(PartId::Setup, stored)?;
        fits(PartId::Setup, setup.check())?;
        Ok(Self {
            references: vec_of(setup.references.len()),
            influences: vec_of(setup.influences.len()),
            channels: vec_of(setup.channels.len()),
            setup,
            retired,
            node: None,
            orders: None,
        })
    }

    /// As [`Fleet::part_ids`].
    pub(crate) fn part_ids(&self) -> impl Iterator<Item = PartId> + use<> {
        part_ids(&self.setup)
    }

    /// Takes [`PartId::Node`].
    pub(crate) fn take_node(&mut self, node: Node) -> Result<(), StateError> {
        let Node(_, _, heard) = &node;
        let known = heard.iter().all(|&index| index < self.references.len());
        let told = known.then_some(()).ok_or("tells of an unknown reference");
        fits(PartId::Node, told)?;
        self.node = Some(node);
        Ok(())
    }

    /// Takes any other part.
    pub(crate) fn take<'de, D: Deserializer<'de>>(
        &mut self,
        id: PartId,
        stored: D,
    ) -> Result<(), StateError> {
        let unknown = || StateError {
            part: id,
            why: "is not one of this configuration".to_owned(),
        };
        match id {
            PartId::Orders => {
                let (orders, quarantines): (OrderBook, Quarantines) = read(id, stored)?;
                let known = quarantines.fits(&self.setup);
                fits(
                    id,
                    known.then_some(()).ok_or("quarantines what is not there"),
                )?;
                self.orders = Some((orders, quarantines));
            }
            PartId::Reference(place) => {
                let draft = self.references.get_mut(place as usize);
                *draft.ok_or_else(unknown)? = Some(read(id, stored)?);
            }
            PartId::Influence(place) => {
                let draft = self.influences.get_mut(place as usize);
                *draft.ok_or_else(unknown)? = Some(read(id, stored)?);
            }
            PartId::Channel(place) => {
                let place = place as usize;
                let setup = self.setup.channels.get(place).ok_or_else(unknown)?;
                let (channel, track): (Channel, Track) = read(id, stored)?;
                fits(id, channel.check(setup))?;
                self.channels[place] = Some((channel, track));
            }
            PartId::Setup | PartId::Node | PartId::Counters => return Err(unknown()),
        }
        Ok(())
    }

    /// The fleet, unless a part is missing.
    pub(crate) fn finish(self) -> Result<Fleet, StateError> {
        let Node(now, pulse, heard) = self.node.ok_or_else(|| missing(PartId::Node))?;
        let (orders, quarantines) = self.orders.ok_or_else(|| missing(PartId::Orders))?;
        let channels = all(self.channels, PartId::Channel)?;
        let (channels, indications) = channels
            .into_iter()
            .map(|(channel, track)| (Kept::new(channel), Kept::new(track)))
            .unzip();
        let mut fleet = Fleet {
            routes: Routes::of(&self.setup),
            setup: Kept::new(self.setup),
            now,
            pulse,
            indications,
            references: kept(all(self.references, PartId::Reference)?),
            influences: kept(all(self.influences, PartId::Influence)?),
            channels,
            agenda: Agenda::default(),
            orders: Kept::new(orders),
            quarantines: Kept::new(quarantines),
            heard,
            retired: self.retired,
        };
        for (index, channel) in fleet.channels.iter().enumerate() {
            fleet.agenda.put(Waiter::Channel(index), channel.wake());
        }
        for (index, reference) in fleet.references.iter().enumerate() {
            fleet.agenda.put(Waiter::Reference(index), reference.wake);
        }
        Ok(fleet)
    }
}

/// So many empty places.
fn vec_of<T>(places: usize) -> Vec<Option<T>> {
    (0..places).map(|_| None).collect()
}

/// All of them, or which is missing.
fn all<T>(places: Vec<Option<T>>, id: impl Fn(u32) -> PartId) -> Result<Vec<T>, StateError> {
    (0..)
        .zip(places)
        .map(|(place, part)| part.ok_or_else(|| missing(id(place))))
        .collect()
}

fn kept<T>(values: Vec<T>) -> Vec<Kept<T>> {
    values.into_iter().map(Kept::new).collect()
}

/// What was found about a part, as an error that names it.
fn fits(part: PartId, found: Result<(), &str>) -> Result<(), StateError> {
    found.map_err(|why| StateError {
        part,
        why: why.to_owned(),
    })
}
