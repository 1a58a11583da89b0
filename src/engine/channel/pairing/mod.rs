//! First station: matches reference values with indications into pairs.
//!
//! The sparser stream makes the pairs (see `instant`). How a pair comes about depends on the
//! reference:
//! - a constant: every indication is a pair at once; one or several behind gates ([`gated`]), as
//!   soon as no gate event for its instant can come;
//! - a value that stands for an instant: [`instant`];
//! - a value that stands for an interval: [`interval`];
//! - the median of a group: [`group`].
//!
//! A pair bears the time at which the sensor showed it: the reference's instant plus `lag`.
//!
//! Waiting for stragglers: what is known around an instant is *settled* when now is `lateness` past
//! the reading that bounds it. So readings that arrive within `lateness` of now give the same pairs
//! in any order. A waiting reading is looked at again when its time has come ([`Pending::due`]), or
//! when something arrives that stands next to its instant.
//!
//! One exception: an exact match is made at once, so of several values of one source for one
//! instant those that came first count.
//!
//! Where influence quantities act on the sensor, a pair then waits for their values
//! ([`attaching`]).
//!
//! What is no longer in memory is asked from the record; the reading then waits among the
//! [`requests`] until the rows are supplied.
//!
//! Bounded: at most [`PENDING_MAX`] readings wait; when it is full the oldest is let go (see
//! `overflow`).

mod all;
mod attaching;
mod gated;
mod group;
mod instant;
mod interval;
mod look;
mod pair;
mod requests;

use super::Scene;
use crate::event::{RefusedReason, Rejection};
use crate::setup::ReferenceKind;
use crate::time::{Duration, Timestamp};
use crate::track::{Sample, Track};
pub(crate) use all::all_pairs;
use attaching::Attaching;
pub(crate) use gated::{Check, Holding, holding};
pub(crate) use pair::Pair;
pub(crate) use requests::{Answer, Rows};
use requests::{Asker, Request, Requests};
use serde::{Deserialize, Serialize};
use std::collections::{BTreeSet, VecDeque};

/// Most readings that wait for their partner.
const PENDING_MAX: usize = 4096;
/// Most indications remembered for having made a pair, whatever `lateness` asks for.
const MADE_MAX: usize = 4096;
/// The due time of a reading that is to be looked at now.
const AT_ONCE: Timestamp = Timestamp(i64::MIN);

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
    /// A pair without a value of an influence quantity: it must stay out of the fit.
    Unattached {
        /// The pair.
        pair: Pair,
        /// Place of the influence quantity among the channel's.
        influence: usize,
        /// Seconds to its nearest value, against `max_gap`.
        rejection: Rejection,
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
    /// When time alone may end the waiting; `None`: only an arrival can.
    due: Option<Timestamp>,
}

/// What became of a reading that was looked at.
enum Fate {
    /// It is dealt with.
    Done,
    /// It waits on; time alone can end that at the given instant.
    Waits(Option<Timestamp>),
    /// It needs rows of `[from, to)` that are no longer in memory.
    Needs { from: Timestamp, to: Timestamp },
}

/// What is known when a reading is looked at.
struct Sight<'a> {
    /// The channel's own indications.
    own: &'a Track,
    /// The values of its reference.
    values: &'a Track,
    /// Now; the end of time where nothing more can come because the record was asked.
    now: Timestamp,
}

impl Sight<'_> {
    /// Whether nothing more can come.
    fn is_final(&self) -> bool {
        self.now == Timestamp(i64::MAX)
    }
}

/// The state of the station.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Pairing {
    /// Ordered by phenomenon time.
    pending: VecDeque<Pending>,
    requests: Requests,
    attaching: Attaching,
    /// Instants of indications that made a pair of their own, so that they make no second one.
    made: BTreeSet<Timestamp>,
    /// Phenomenon time of the newest reference value let go before an indication came for it.
    let_go: Option<Timestamp>,
    /// The earliest due time of all that wait.
    due: Option<Timestamp>,
}

impl Pairing {
    /// When time alone may bring a pair about.
    pub(crate) fn due(&self) -> Option<Timestamp> {
        self.due.into_iter().chain(self.attaching.due()).min()
    }

    /// Whether a pair of this time may still come of what waits here.
    pub(crate) fn is_making(&self, time: Timestamp, scene: &Scene<'_>) -> bool {
        let mut samples = self
            .pending
            .iter()
            .map(|held| &held.sample)
            .chain(self.requests.samples());
        samples.any(|sample| pair_time(sample, scene) == time) || self.attaching.holds(time)
    }

    /// Drops the readings and pairs that wait and rest on something that no longer counts.
    pub(crate) fn drop_waiting(
        &mut self,
        is_maker: impl Fn(Timestamp) -> bool,
        rests: impl Fn(&Pair) -> bool,
    ) {
        self.pending.retain(|held| !is_maker(held.sample.time));
        self.requests.drop_waiting(&is_maker);
        self.attaching.drop_waiting(rests);
    }

    /// Has the pairs among what was found wait for their influence quantities, and lets those out
    /// that have them.
    pub(crate) fn attach(&mut self, found: &mut Vec<Found>, scene: &Scene<'_>) {
        if !scene.setup.influences.is_empty() {
            self.attaching.take(found, scene);
        }
    }

    /// A value of an influence quantity was taken into its track.
    pub(crate) fn touch_influences(&mut self) {
        self.attaching.touch();
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
                let pair = Pair::at(sample.time, sample.value, *value);
                found.push(Found::Pair(pair));
            }
            ReferenceKind::Constant { gated: true, .. }
            | ReferenceKind::Checks { .. }
            | ReferenceKind::Group { .. } => {
                self.wait(sample, scene, found);
                self.advance(scene, found);
            }
            ReferenceKind::Measured => {
                self.touch_beside(sample.time, own(scene), scene);
                if let Some(request) = instant::forgotten_values(sample, self.let_go, scene) {
                    self.requests.ask(request, found);
                }
                self.advance(scene, found);
            }
        }
    }

    /// An indication of another member of the channel's group was taken into its track.
    pub(crate) fn take_member(
        &mut self,
        sample: &Sample,
        track: &Track,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        self.touch_beside(sample.time, track, scene);
        self.advance(scene, found);
    }

    /// A value of the channel's reference was taken into its track.
    pub(crate) fn take_reference(
        &mut self,
        sample: &Sample,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        if is_instant(scene) {
            let (after, until) = instant::concerned(sample, scene);
            self.touch(after, until, scene);
        }
        self.wait(sample, scene, found);
        self.advance(scene, found);
    }

    /// Rows that were asked for have come (or there are none). What is found has its influence
    /// quantities: what the record says of them must not be looked for in memory again.
    pub(crate) fn take_supplied(
        &mut self,
        answer: &Answer,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        let mut attached = Vec::new();
        self.attaching.take_supplied(answer, scene, &mut attached);
        for request in self.requests.answered(answer) {
            let (from, to) = (request.from, request.to);
            let sight = Sight {
                own: &own(scene).joined(&answer.rows.own, from, to),
                values: &scene.values.joined(&answer.rows.values, from, to),
                now: Timestamp(i64::MAX),
            };
            let sample = &request.sample;
            let fate = match request.asker {
                Asker::Reference => self.resolve(sample, &sight, scene, found),
                Asker::Indication => {
                    instant::resolve_indication(sample, &sight, &mut self.made, scene, found)
                }
            };
            if !matches!(fate, Fate::Done) {
                found.push(missed(sample));
            }
        }
        self.attach(found, scene);
        found.append(&mut attached);
    }

    /// Makes every pair that can be made now.
    pub(crate) fn advance(&mut self, scene: &Scene<'_>, found: &mut Vec<Found>) {
        if self.due.is_none_or(|due| scene.now < due) {
            return;
        }
        let sight = Sight {
            own: own(scene),
            values: scene.values,
            now: scene.now,
        };
        // Gated readings settle in order: the rest would only be looked at in vain.
        let in_order = matches!(
            scene.reference.kind,
            ReferenceKind::Constant { .. } | ReferenceKind::Checks { .. }
        );
        let mut index = 0;
        while let Some(pending) = self.pending.get(index).copied() {
            if pending.due.is_none_or(|due| scene.now < due) {
                if in_order {
                    break;
                }
                index += 1;
                continue;
            }
            match self.resolve(&pending.sample, &sight, scene, found) {
                Fate::Waits(due) => {
                    self.pending[index].due = due;
                    if in_order {
                        break;
                    }
                    index += 1;
                    continue;
                }
                Fate::Needs { from, to } => self.requests.ask(
                    Request {
                        sample: pending.sample,
                        asker: Asker::Reference,
                        from,
                        to,
                    },
                    found,
                ),
                Fate::Done => {}
            }
            self.pending.remove(index);
        }
        let dues = self.pending.iter().filter_map(|pending| pending.due);
        self.due = if in_order {
            dues.take(1).min()
        } else {
            dues.min()
        };
        self.forget_made(scene);
    }

    fn resolve(
        &mut self,
        sample: &Sample,
        sight: &Sight<'_>,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) -> Fate {
        match &scene.reference.kind {
            ReferenceKind::Constant { .. } | ReferenceKind::Checks { .. } => {
                gated::resolve(sample, scene, found)
            }
            ReferenceKind::Group { members } => group::resolve(sample, members, scene, found),
            ReferenceKind::Measured if is_instant(scene) => {
                instant::resolve(sample, sight, &mut self.made, scene, found)
            }
            ReferenceKind::Measured => interval::resolve(sample, sight, scene, found),
        }
    }

    /// Puts a reading among those that wait, to be looked at now.
    fn wait(&mut self, sample: &Sample, scene: &Scene<'_>, found: &mut Vec<Found>) {
        let place = self
            .pending
            .partition_point(|held| held.sample.time <= sample.time);
        let pending = Pending {
            sample: *sample,
            due: Some(AT_ONCE),
        };
        self.pending.insert(place, pending);
        self.due = Some(AT_ONCE);
        if self.pending.len() > PENDING_MAX {
            self.overflow(scene, found);
        }
    }

    /// Has those looked at again that wait for something beside the instant `time`: a reading came
    /// there, and `track` holds it. Beyond the next readings on both sides it changes nothing.
    fn touch_beside(&mut self, time: Timestamp, track: &Track, scene: &Scene<'_>) {
        if self.pending.is_empty() {
            return;
        }
        let before = track
            .last_until(time.minus(Duration(1)))
            .map(|held| held.time);
        let until = track
            .first_after(time)
            .map_or(time, |held| held.time.minus(Duration(1)));
        self.touch(before, until, scene);
    }

    /// Has those looked at again whose awaited instant lies in (after, until].
    fn touch(&mut self, after: Option<Timestamp>, until: Timestamp, scene: &Scene<'_>) {
        let start = after.map_or(0, |after| {
            self.pending
                .partition_point(|held| awaited(&held.sample, scene) <= after)
        });
        let touched = self.pending.iter_mut().skip(start);
        for pending in touched.take_while(|held| awaited(&held.sample, scene) <= until) {
            pending.due = Some(AT_ONCE);
            self.due = Some(AT_ONCE);
        }
    }

    /// Lets the oldest go. It counts as missed, except a value for an instant from which no
    /// indication has come yet: should one come after all, it asks the record for the values
    /// around it, and nothing is lost.
    fn overflow(&mut self, scene: &Scene<'_>, found: &mut Vec<Found>) {
        let Some(oldest) = self.pending.pop_front() else {
            return;
        };
        let newest = own(scene).newest();
        let sample = &oldest.sample;
        if is_instant(scene) && newest.is_none_or(|newest| awaited(sample, scene) > newest) {
            self.let_go = self.let_go.max(Some(sample.time));
            return;
        }
        found.push(match scene.reference.kind {
            ReferenceKind::Group { .. } => Found::Missed {
                time: sample.time,
                reason: RefusedReason::GroupTooSmall,
            },
            _ => missed(sample),
        });
    }

    /// Forgets indications that no reference value can name any more: none is waiting from before
    /// them, and one still to come would be late.
    fn forget_made(&mut self, scene: &Scene<'_>) {
        let setup = scene.setup;
        let Some(newest) = scene.values.newest() else {
            return;
        };
        let oldest = self.pending.front().map(|pending| pending.sample.time);
        let still_named = newest.minus(setup.lateness).minus(setup.max_gap);
        let edge = oldest
            .map_or(still_named, |oldest| oldest.min(still_named))
            .plus(setup.lag);
        while self.made.first().is_some_and(|&made| made < edge) || self.made.len() > MADE_MAX {
            self.made.pop_first();
        }
    }
}

/// Whether the channel's reference gives values for instants.
fn is_instant(scene: &Scene<'_>) -> bool {
    scene.reference.kind == ReferenceKind::Measured && scene.reference.stands_for == Duration::ZERO
}

/// The channel's own indications.
fn own<'a>(scene: &Scene<'a>) -> &'a Track {
    &scene.indications[scene.id.0 as usize]
}

/// The instant around which a waiting reading needs to know more.
fn awaited(sample: &Sample, scene: &Scene<'_>) -> Timestamp {
    match scene.reference.kind {
        ReferenceKind::Measured if is_instant(scene) => sample.time.plus(scene.setup.lag),
        ReferenceKind::Measured => interval::span(sample.time, scene).1,
        ReferenceKind::Group { .. }
        | ReferenceKind::Constant { .. }
        | ReferenceKind::Checks { .. } => sample.time.minus(scene.setup.lag),
    }
}

/// The time of the pair that a waiting reading makes by itself.
fn pair_time(sample: &Sample, scene: &Scene<'_>) -> Timestamp {
    match scene.reference.kind {
        ReferenceKind::Measured if is_instant(scene) => sample.time.plus(scene.setup.lag),
        ReferenceKind::Measured => interval::middle(interval::span(sample.time, scene)),
        _ => sample.time,
    }
}

/// From when on nothing can come any more that belongs before this reading.
fn settles(sample: &Sample, scene: &Scene<'_>) -> Timestamp {
    sample.time.max(sample.arrived).plus(scene.setup.lateness)
}

fn missed(sample: &Sample) -> Found {
    Found::Missed {
        time: sample.time,
        reason: RefusedReason::NoPartner,
    }
}
