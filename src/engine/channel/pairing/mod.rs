//! First station: matches reference values with indications into pairs.
//!
//! The sparser stream makes the pairs (see `instant`). How a pair comes about depends on the
//! reference:
//! - a constant: every indication is a pair at once; behind a gate, as soon as no gate event for
//!   its instant can come;
//! - a value that stands for an instant: [`instant`];
//! - a value that stands for an interval: [`interval`];
//! - the median of a group: [`group`].
//!
//! A pair bears the time at which the sensor showed it: the reference's instant plus `lag`.
//!
//! Waiting for stragglers: what is known around an instant is *settled* when now is `lateness` past
//! the reading that bounds it. So readings that arrive within `lateness` of now give the same pairs
//! in any order.
//!
//! One exception: an exact match is made at once, so of several values of one source for one
//! instant those that came first count.
//!
//! Bounded: at most [`PENDING_MAX`] readings wait; when it is full the oldest is let go (see
//! `overflow`).

mod group;
mod instant;
mod interval;
mod look;

use super::Scene;
use crate::event::RefusedReason;
use crate::setup::ReferenceKind;
use crate::time::{Duration, Timestamp};
use crate::track::Sample;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Most readings that wait for their partner.
const PENDING_MAX: usize = 4096;
/// How many made pairs are remembered so that an indication does not make a second one.
const MADE_MAX: usize = 64;
/// How long to wait for rows asked from the record before going on without them.
const PATIENCE: Duration = Duration::from_seconds(60);

/// One reference value with the indication that belongs to it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Pair {
    /// When the sensor showed it.
    pub(crate) time: Timestamp,
    /// Indication, mean of indications, or interpolated indication.
    pub(crate) indication: f64,
    /// Reference value.
    pub(crate) reference: f64,
    /// Relative weight; 1 for a complete pair.
    pub(crate) weight: f64,
}

/// What pairing found.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Found {
    /// A pair.
    Pair(Pair),
    /// A reading that will never have a partner.
    Missed {
        /// Its phenomenon time.
        time: Timestamp,
        /// Why.
        reason: RefusedReason,
    },
    /// Rows that are no longer in memory are needed from the record.
    Wanted {
        /// From (inclusive).
        from: Timestamp,
        /// To (exclusive).
        to: Timestamp,
    },
}

/// A reading that waits for its partner.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Pending {
    sample: Sample,
    /// When rows from the record were asked for on its behalf.
    asked: Option<Timestamp>,
}

/// What became of a waiting reading.
enum Fate {
    /// It is dealt with.
    Done,
    /// It waits on; time alone can end that at the given instant.
    Waits(Option<Timestamp>),
}

/// The state of the station.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Pairing {
    /// Ordered by phenomenon time.
    pending: VecDeque<Pending>,
    /// Phenomenon times of indications that made a pair where the reference is the denser stream.
    made: VecDeque<Timestamp>,
    due: Option<Timestamp>,
}

impl Pairing {
    /// When time alone may bring a pair about.
    pub(crate) fn due(&self) -> Option<Timestamp> {
        self.due
    }

    /// The channel's own indication was taken into its track.
    pub(crate) fn take_indication(
        &mut self,
        sample: &Sample,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        match &scene.reference.kind {
            ReferenceKind::Constant {
                value,
                gated: false,
            } => {
                found.push(Found::Pair(Pair {
                    time: sample.time,
                    indication: sample.value,
                    reference: *value,
                    weight: 1.0,
                }));
            }
            ReferenceKind::Constant { gated: true, .. } | ReferenceKind::Group { .. } => {
                self.wait(sample, None, scene, found);
                self.advance(scene, found);
            }
            ReferenceKind::Measured => self.advance(scene, found),
        }
    }

    /// A value of the channel's reference was taken into its track.
    pub(crate) fn take_reference(
        &mut self,
        sample: &Sample,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        let (from, to) = if scene.reference.stands_for > Duration::ZERO {
            interval::span(sample.time, scene)
        } else {
            let instant = sample.time.plus(scene.setup.lag);
            let half = scene.setup.max_gap;
            (instant.minus(half), instant.plus(half))
        };
        let forgotten = scene.indications[scene.id.0 as usize].forgotten();
        let asked = forgotten
            .is_some_and(|edge| edge >= from)
            .then_some(scene.now);
        if asked.is_some() {
            found.push(Found::Wanted { from, to });
        }
        self.wait(sample, asked, scene, found);
        self.advance(scene, found);
    }

    /// Rows that were asked for have come (or there are none).
    pub(crate) fn take_supplied(&mut self, scene: &Scene<'_>, found: &mut Vec<Found>) {
        for pending in &mut self.pending {
            pending.asked = None;
        }
        self.advance(scene, found);
    }

    /// Makes every pair that can be made now.
    pub(crate) fn advance(&mut self, scene: &Scene<'_>, found: &mut Vec<Found>) {
        let mut kept = Vec::new();
        let mut due: Option<Timestamp> = None;
        while let Some(pending) = self.pending.front().copied() {
            if cannot_act_yet(&pending.sample, scene) {
                break;
            }
            self.pending.pop_front();
            let fate = match pending.asked {
                Some(at) if scene.now < at.plus(PATIENCE) => Fate::Waits(Some(at.plus(PATIENCE))),
                _ => self.resolve(&pending.sample, scene, found),
            };
            if let Fate::Waits(until) = fate {
                kept.push(pending);
                due = [due, until].into_iter().flatten().min();
                // Gated readings settle in order: the rest would only be looked at in vain.
                if matches!(scene.reference.kind, ReferenceKind::Constant { .. }) {
                    break;
                }
            }
        }
        for pending in kept.into_iter().rev() {
            self.pending.push_front(pending);
        }
        self.due = due;
    }

    fn resolve(&mut self, sample: &Sample, scene: &Scene<'_>, found: &mut Vec<Found>) -> Fate {
        match &scene.reference.kind {
            ReferenceKind::Constant { value, .. } => gated(sample, *value, scene, found),
            ReferenceKind::Group { members } => group::resolve(sample, members, scene, found),
            ReferenceKind::Measured if scene.reference.stands_for > Duration::ZERO => {
                interval::resolve(sample, scene, found)
            }
            ReferenceKind::Measured => instant::resolve(sample, &mut self.made, scene, found),
        }
    }

    /// Puts a reading among those that wait.
    fn wait(
        &mut self,
        sample: &Sample,
        asked: Option<Timestamp>,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        let place = self
            .pending
            .partition_point(|held| held.sample.time <= sample.time);
        let pending = Pending {
            sample: *sample,
            asked,
        };
        self.pending.insert(place, pending);
        if self.pending.len() > PENDING_MAX {
            self.overflow(scene, found);
        }
    }

    /// Lets the oldest go. It counts as missed, except where another one waits for the same
    /// indication to come: there the reference is the denser stream, the indication will make the
    /// pair, and nothing is lost.
    fn overflow(&mut self, scene: &Scene<'_>, found: &mut Vec<Found>) {
        let Some(oldest) = self.pending.pop_front() else {
            return;
        };
        let newest = scene.indications[scene.id.0 as usize].newest();
        let denser = scene.reference.kind == ReferenceKind::Measured
            && newest.is_none_or(|newest| oldest.sample.time.plus(scene.setup.lag) > newest);
        if !denser {
            let reason = match scene.reference.kind {
                ReferenceKind::Group { .. } => RefusedReason::GroupTooSmall,
                _ => RefusedReason::NoPartner,
            };
            found.push(Found::Missed {
                time: oldest.sample.time,
                reason,
            });
        }
    }
}

/// Whether neither this reading nor any later one can do anything yet: they wait for indications
/// still to come.
fn cannot_act_yet(sample: &Sample, scene: &Scene<'_>) -> bool {
    if scene.reference.kind != ReferenceKind::Measured
        || scene.reference.stands_for > Duration::ZERO
    {
        return false;
    }
    let newest = scene.indications[scene.id.0 as usize].newest();
    newest.is_none_or(|newest| sample.time.plus(scene.setup.lag) > newest)
}

/// An indication against a constant that holds only while its gate is open.
fn gated(sample: &Sample, value: f64, scene: &Scene<'_>, found: &mut Vec<Found>) -> Fate {
    let settled = settles(sample, scene);
    if scene.now < settled {
        return Fate::Waits(Some(settled));
    }
    if scene.gate.is_open(sample.time) {
        found.push(Found::Pair(Pair {
            time: sample.time,
            indication: sample.value,
            reference: value,
            weight: 1.0,
        }));
    }
    Fate::Done
}

/// From when on nothing can come any more that belongs before this reading.
fn settles(sample: &Sample, scene: &Scene<'_>) -> Timestamp {
    sample.time.max(sample.arrived).plus(scene.setup.lateness)
}
