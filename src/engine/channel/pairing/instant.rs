//! Pairs with a reference value that stands for an instant.
//!
//! An indication of exactly that instant (shifted by `lag`) pairs at once. Otherwise the sparser
//! stream makes the pair, decided gap by gap between two neighbouring indications a and b, so that
//! the order of arrival plays no part:
//! - one reference value in the gap (a, b]: it makes the pair, the indication interpolated between
//!   a and b;
//! - several, or a gap too wide to interpolate across (hand readings against a recording
//!   reference): b makes one pair, the reference interpolated to its instant; if the reference
//!   can't be interpolated there, each value stands for itself.

use super::look::{Look, look};
use super::{Asker, Fate, Found, Pair, Request, Scene, Sight, missed, own, settles};
use crate::time::{Duration, Timestamp};
use crate::track::Sample;
use std::collections::BTreeSet;

/// What becomes of a reference value.
pub(super) fn resolve(
    sample: &Sample,
    sight: &Sight<'_>,
    made: &mut BTreeSet<Timestamp>,
    scene: &Scene<'_>,
    found: &mut Vec<Found>,
) -> Fate {
    let instant = sample.time.plus(scene.setup.lag);
    let track = sight.own;
    let max_gap = scene.setup.max_gap;
    let forgotten = track.forgotten();
    if forgotten.is_some_and(|edge| edge >= instant.minus(max_gap))
        && track.last_until(instant).is_none()
    {
        let settled = settles(sample, scene);
        return if sight.now < settled {
            Fate::Waits(Some(settled))
        } else {
            let (from, to) = (instant.minus(max_gap), instant.plus(max_gap));
            Fate::Needs { from, to }
        };
    }
    let (after, interpolated) = match look(track, instant, max_gap) {
        Look::Exact(indication) => {
            make_once(made, Pair::at(instant, indication, sample.value), found);
            return Fate::Done;
        }
        Look::Open => return Fate::Waits(None),
        Look::Between { value, after } => (after, Some(value)),
        Look::Apart { after } => (after, None),
    };
    // The gap's other reference values must have settled too; with a negative lag they may be
    // stamped after b.
    let anchor = after.time.minus(scene.setup.lag);
    let ready = settles(sample, scene)
        .max(settles(&after, scene))
        .max(anchor.plus(scene.setup.lateness));
    if sight.now < ready {
        return Fate::Waits(Some(ready));
    }
    if interpolated.is_none() || shares_its_gap(instant, after.time, sight, scene) {
        let shown = look(sight.values, anchor, max_gap);
        let ready = match shown {
            Look::Exact(_) => return Fate::Done,
            Look::Between { after: next, .. } | Look::Apart { after: next } => {
                settles(&next, scene)
            }
            // A value still to come would be too far away only after this.
            Look::Open => settles(&after, scene)
                .max(anchor.plus(scene.setup.lateness))
                .plus(max_gap),
        };
        if sight.now < ready {
            return Fate::Waits(Some(ready));
        }
        if let (Look::Between { value, .. }, Look::Exact(indication)) =
            (shown, look(track, after.time, max_gap))
        {
            make_once(made, Pair::at(after.time, indication, value), found);
            return Fate::Done;
        }
    }
    found.push(match interpolated {
        Some(indication) => Found::Pair(Pair::at(instant, indication, sample.value)),
        None => missed(sample),
    });
    Fate::Done
}

/// What becomes of an indication for which reference values were asked from the record: it makes
/// one pair, the reference interpolated to its instant.
pub(super) fn resolve_indication(
    sample: &Sample,
    sight: &Sight<'_>,
    made: &mut BTreeSet<Timestamp>,
    scene: &Scene<'_>,
    found: &mut Vec<Found>,
) -> Fate {
    let anchor = sample.time.minus(scene.setup.lag);
    match look(sight.values, anchor, scene.setup.max_gap) {
        Look::Exact(value) | Look::Between { value, .. } => {
            make_once(made, Pair::at(sample.time, sample.value, value), found);
        }
        Look::Apart { .. } | Look::Open => found.push(missed(sample)),
    }
    Fate::Done
}

/// The request of an indication whose reference values are no longer in memory: forgotten by their
/// track, or let go while they waited for it (`let_go`: the newest of these).
pub(super) fn forgotten_values(
    sample: &Sample,
    let_go: Option<Timestamp>,
    scene: &Scene<'_>,
) -> Option<Request> {
    if !super::is_instant(scene) {
        return None;
    }
    let anchor = sample.time.minus(scene.setup.lag);
    let max_gap = scene.setup.max_gap;
    let forgotten = scene.values.forgotten();
    let lost = forgotten.is_some_and(|edge| edge >= anchor.minus(max_gap))
        && scene.values.last_until(anchor).is_none();
    (lost || let_go.is_some_and(|edge| edge >= anchor)).then_some(Request {
        sample: *sample,
        asker: Asker::Indication,
        from: anchor.minus(max_gap),
        to: anchor.plus(max_gap),
    })
}

/// The awaited instants, in (after, until], of the reference values whose fate a new value may
/// change: those in the gaps between indications that end beside it or hold it.
pub(super) fn concerned(sample: &Sample, scene: &Scene<'_>) -> (Option<Timestamp>, Timestamp) {
    let lag = scene.setup.lag;
    let track = own(scene);
    let before = scene.values.last_until(sample.time.minus(Duration(1)));
    let after = before
        .and_then(|value| track.last_until(value.time.plus(lag)))
        .map(|held| held.time);
    let newest = track.newest().unwrap_or(Timestamp(i64::MIN));
    let next = scene.values.first_after(sample.time);
    let until = next
        .and_then(|value| track.first_after(value.time.plus(lag)))
        .map_or(newest, |held| held.time);
    (after, until)
}

/// Whether other instants of the reference lie between the same two indications.
fn shares_its_gap(
    instant: Timestamp,
    after: Timestamp,
    sight: &Sight<'_>,
    scene: &Scene<'_>,
) -> bool {
    let lag = scene.setup.lag;
    let before = sight.own.last_until(instant);
    let begin = before.map_or(Timestamp(i64::MIN), |before| {
        before.time.minus(lag).plus(Duration(1))
    });
    let end = after.minus(lag).plus(Duration(1));
    let mut values = sight.values.range(begin, end);
    values.any(|value| value.time != instant.minus(lag))
}

/// Makes the pair unless the indication of its instant made one before.
fn make_once(made: &mut BTreeSet<Timestamp>, pair: Pair, found: &mut Vec<Found>) {
    if made.insert(pair.time) {
        found.push(Found::Pair(pair));
    }
}
