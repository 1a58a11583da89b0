//! Quarantines: what a source gave in an interval is declared bad after the fact, and perhaps good
//! again.
//!
//! Readings of the interval are set aside: those in memory at once, those still to come as they
//! come (they are counted and remembered, but nobody sees them). Every channel whose present fit is
//! concerned is made anew from the record (see `channel::refit`).
//!
//! A quarantine stands until it is released, or until nothing here looks back on its interval any
//! more and its place is needed.

use super::Fleet;
use super::known::known_values;
use crate::channel::{Channel, Pair, Rebuilding, Scene, all_pairs};
use crate::event::{Cause, Interval, Reading, Source, Subject, Supplied};
use crate::kept::Kept;
use crate::report::Report;
use crate::setup::{ChannelId, ReferenceId, ReferenceKind, Setup};
use crate::time::Timestamp;
use crate::track::{Sample, Track};
use serde::{Deserialize, Serialize};

/// Most quarantines that stand.
const MOST: usize = 256;

/// The quarantines that stand, oldest first.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Quarantines {
    list: Vec<Standing>,
}

/// One of them.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Standing {
    /// The order that began it.
    pub(super) id: String,
    pub(super) source: Source,
    pub(super) interval: Interval,
}

impl Quarantines {
    /// Adds one, in the place of one that is over for longer than anything looks back if need be;
    /// false if there is no place. `edge`: the oldest instant that anything looks back on.
    pub(super) fn add(&mut self, standing: Standing, edge: Timestamp) -> bool {
        if self.list.len() == MOST {
            let over = |held: &Standing| held.interval.to.is_some_and(|to| to < edge);
            let Some(place) = self.list.iter().position(over) else {
                return false;
            };
            self.list.remove(place);
        }
        self.list.push(standing);
        true
    }

    /// Takes the one out that this order began.
    pub(super) fn take(&mut self, id: &str) -> Option<Standing> {
        let place = self.list.iter().position(|held| held.id == id)?;
        Some(self.list.remove(place))
    }

    /// Whether all are about sources of this setup.
    pub(super) fn fits(&self, setup: &Setup) -> bool {
        self.list.iter().all(|held| match held.source {
            Source::Indication(id) => (id.0 as usize) < setup.channels.len(),
            Source::Reference(id) => (id.0 as usize) < setup.references.len(),
            Source::Influence(id) => (id.0 as usize) < setup.influences.len(),
        })
    }

    /// The ids of those that stand.
    pub(super) fn ids(&self) -> impl ExactSizeIterator<Item = &String> {
        self.list.iter().map(|held| &held.id)
    }

    fn hold(&self, source: Source, time: Timestamp) -> bool {
        self.list
            .iter()
            .any(|held| held.source == source && held.interval.holds(time))
    }

    /// All that stand, without their ids.
    pub(super) fn all(&self) -> Vec<(Source, Interval)> {
        let plain = |held: &Standing| (held.source, held.interval);
        self.list.iter().map(plain).collect()
    }

    /// When the constants that a reference consists of are quarantined.
    pub(super) fn of_constants(&self, setup: &Setup, reference: ReferenceId) -> Vec<Interval> {
        if self.list.is_empty() {
            return Vec::new();
        }
        of_constants(&self.all(), setup, reference)
    }
}

/// The same, of any quarantines.
fn of_constants(
    quarantined: &[(Source, Interval)],
    setup: &Setup,
    reference: ReferenceId,
) -> Vec<Interval> {
    let points: &[ReferenceId] = match &setup.references[reference.0 as usize].kind {
        ReferenceKind::Constant { .. } => &[reference],
        ReferenceKind::Checks { points } => points,
        ReferenceKind::Measured | ReferenceKind::Group { .. } => &[],
    };
    let is_its = |source: Source| match source {
        Source::Reference(id) => id == reference && !points.is_empty() || points.contains(&id),
        Source::Indication(_) | Source::Influence(_) => false,
    };
    quarantined
        .iter()
        .filter(|(source, _)| is_its(*source))
        .map(|(_, interval)| *interval)
        .collect()
}

/// Tracks made of rows from the record and of what is in memory, as one channel may look at them.
struct Gathered {
    values: Track,
    indications: Vec<Kept<Track>>,
    influences: Vec<Kept<Track>>,
}

impl Fleet {
    /// Whether a reading is of a quarantined interval of its source.
    pub(super) fn is_quarantined(&self, reading: &Reading) -> bool {
        self.quarantines.hold(reading.source, reading.phenomenon)
    }

    /// The recent readings of a source, which must be known.
    pub(super) fn track_of(&mut self, source: Source) -> &mut Track {
        match source {
            Source::Indication(id) => &mut self.indications[id.0 as usize],
            Source::Reference(id) => &mut self.references[id.0 as usize].values,
            Source::Influence(id) => &mut self.influences[id.0 as usize],
        }
    }

    /// Why a channel's correction is to be held, if what it rests on is quarantined at present.
    pub(super) fn quarantined_now(&self, id: ChannelId, now: Timestamp) -> Option<Cause> {
        let setup = &self.setup.channels[id.0 as usize];
        let influences = setup
            .influences
            .iter()
            .map(|it| Source::Influence(it.source));
        [Source::Indication(id), Source::Reference(setup.reference)]
            .into_iter()
            .chain(influences)
            .any(|source| self.quarantines.hold(source, now))
            .then_some(Cause::Quarantined)
    }

    /// The channels that rest on the values of a source.
    pub(super) fn resting_on(&self, source: Source) -> Vec<usize> {
        let mut users = match source {
            Source::Indication(id) => {
                let mut users = self.routes.group_users(id).to_vec();
                users.push(id.0 as usize);
                users
            }
            Source::Reference(id) => self.routes.reference_users(id).to_vec(),
            Source::Influence(id) => self.routes.influence_users(id).to_vec(),
        };
        users.sort_unstable();
        users.dedup();
        users
    }

    /// What is quarantined has changed in an interval of a source: sorts the readings in memory
    /// out, and has every channel that is concerned fitted anew. Which those are.
    pub(super) fn refit_for(
        &mut self,
        order: &str,
        (source, interval): (Source, Interval),
        before: &[(Source, Interval)],
        report: &mut Report<'_>,
    ) -> Vec<usize> {
        let quarantines = Quarantines::clone(&self.quarantines);
        if self.is_measured(source) {
            self.track_of(source)
                .sort_out(|time| quarantines.hold(source, time));
        }
        let mut refitted = Vec::new();
        for user in self.resting_on(source) {
            let mut asks = false;
            self.visit(user, |channel, scene| {
                asks = channel.ask_refit(order, (source, interval), before, scene, report);
            });
            refitted.extend(asks.then_some(user));
        }
        refitted
    }

    /// Whether a source gives readings.
    fn is_measured(&self, source: Source) -> bool {
        match source {
            Source::Indication(_) | Source::Influence(_) => true,
            Source::Reference(id) => {
                self.setup.references[id.0 as usize].kind == ReferenceKind::Measured
            }
        }
    }

    /// Rows have come that a refit may have asked for.
    pub(super) fn take_refit(&mut self, supplied: &Supplied, report: &mut Report<'_>) {
        let index = supplied.channel.0 as usize;
        let before = self
            .channels
            .get(index)
            .and_then(|channel| channel.refit_before(supplied.from, supplied.to))
            .map(<[_]>::to_vec);
        let Some(before) = before else { return };
        let standing = self.quarantines.all();
        let pairs = Rebuilding {
            now: self.pairs_without(&standing, supplied),
            before: self.pairs_without(&before, supplied),
        };
        self.visit(index, |channel, scene| {
            channel.rebuild(&pairs, scene, report);
        });
    }

    /// The pairs that a channel's rows make without what is quarantined.
    fn pairs_without(&self, quarantined: &[(Source, Interval)], supplied: &Supplied) -> Vec<Pair> {
        let index = supplied.channel.0 as usize;
        let setup = &self.setup.channels[index];
        let gathered = self.gather(quarantined, supplied);
        let end = Timestamp(i64::MAX);
        let scene = Scene {
            id: supplied.channel,
            setup,
            reference: &self.setup.references[setup.reference.0 as usize],
            values: &gathered.values,
            checks: known_values(&self.setup, &self.references, setup.reference),
            indications: &gathered.indications,
            influences: &gathered.influences,
            now: end,
            alive: end,
            resumed: None,
            trouble: None,
            watched: false,
            barred: of_constants(quarantined, &self.setup, setup.reference),
        };
        all_pairs(&scene)
    }

    fn gather(&self, quarantined: &[(Source, Interval)], supplied: &Supplied) -> Gathered {
        let setup = &self.setup.channels[supplied.channel.0 as usize];
        let rows = |source: Source, track: &Track| {
            let is_out = |time: Timestamp| {
                quarantined
                    .iter()
                    .any(|(other, interval)| *other == source && interval.holds(time))
            };
            let rows: Vec<Sample> = supplied
                .readings
                .iter()
                .filter(|it| it.source == source && self.may_be_supplied(it))
                .map(|it| Sample {
                    time: it.phenomenon,
                    arrived: it.phenomenon,
                    value: it.value,
                    sequence: it.sequence,
                })
                .collect();
            let mut joined = track.joined(&rows, supplied.from, supplied.to);
            joined.sort_out(is_out);
            joined
        };
        let mut gathered = Gathered {
            values: rows(
                Source::Reference(setup.reference),
                &self.references[setup.reference.0 as usize].values,
            ),
            indications: self.indications.iter().map(|_| Kept::default()).collect(),
            influences: self.influences.iter().map(|_| Kept::default()).collect(),
        };
        let reference = &self.setup.references[setup.reference.0 as usize];
        let members: &[ChannelId] = match &reference.kind {
            ReferenceKind::Group { members } => members,
            _ => &[],
        };
        for &id in members.iter().chain([&supplied.channel]) {
            let place = id.0 as usize;
            let track = rows(Source::Indication(id), &self.indications[place]);
            let credible = Channel::credible(&track, &self.setup.channels[place]);
            gathered.indications[place] = Kept::new(credible);
        }
        for influence in &setup.influences {
            let place = influence.source.0 as usize;
            let track = rows(Source::Influence(influence.source), &self.influences[place]);
            gathered.influences[place] = Kept::new(track);
        }
        gathered
    }

    /// Moves every quarantine to its source's new position; those of sources that are gone go.
    pub(super) fn move_quarantines(&mut self, old: &Setup) {
        let list = std::mem::take(&mut *self.quarantines).list;
        let moved = list.into_iter().filter_map(|held| {
            let subject = match held.source {
                Source::Indication(id) => Subject::Channel(id),
                Source::Reference(id) => Subject::Reference(id),
                Source::Influence(id) => Subject::Influence(id),
            };
            let source = match self.moved(old, subject)? {
                Subject::Channel(id) => Source::Indication(id),
                Subject::Reference(id) => Source::Reference(id),
                Subject::Influence(id) => Source::Influence(id),
                Subject::Node => return None,
            };
            Some(Standing { source, ..held })
        });
        let list = moved.collect();
        *self.quarantines = Quarantines { list };
    }
}
