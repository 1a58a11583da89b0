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
use super::{Fate, Found, MADE_MAX, Pair, Scene, settles};
use crate::event::RefusedReason;
use crate::time::{Duration, Timestamp};
use crate::track::Sample;
use std::collections::VecDeque;

pub(super) fn resolve(
    sample: &Sample,
    made: &mut VecDeque<Timestamp>,
    scene: &Scene<'_>,
    found: &mut Vec<Found>,
) -> Fate {
    let instant = sample.time.plus(scene.setup.lag);
    let track = &scene.indications[scene.id.0 as usize];
    let own = look(track, instant, scene.setup.max_gap);
    let (after, interpolated) = match own {
        Look::Exact(indication) => {
            found.push(pair(instant, indication, sample.value));
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
    if scene.now < ready {
        return Fate::Waits(Some(ready));
    }
    if interpolated.is_none() || shares_its_gap(instant, after.time, scene) {
        match look(scene.values, anchor, scene.setup.max_gap) {
            Look::Exact(_) => return Fate::Done,
            Look::Between { value, after: next } => {
                let ready = settles(&next, scene);
                if scene.now < ready {
                    return Fate::Waits(Some(ready));
                }
                make_once(made, after.time, || {
                    let shown = look(track, after.time, scene.setup.max_gap);
                    let Look::Exact(indication) = shown else {
                        return;
                    };
                    found.push(pair(after.time, indication, value));
                });
                return Fate::Done;
            }
            // A value still to come would be too far away only after this.
            Look::Open => {
                let ready = settles(&after, scene)
                    .max(anchor.plus(scene.setup.lateness))
                    .plus(scene.setup.max_gap);
                if scene.now < ready {
                    return Fate::Waits(Some(ready));
                }
            }
            Look::Apart { after: next } => {
                let ready = settles(&next, scene);
                if scene.now < ready {
                    return Fate::Waits(Some(ready));
                }
            }
        }
    }
    found.push(match interpolated {
        Some(indication) => pair(instant, indication, sample.value),
        None => Found::Missed {
            time: sample.time,
            reason: RefusedReason::NoPartner,
        },
    });
    Fate::Done
}

fn pair(time: Timestamp, indication: f64, reference: f64) -> Found {
    Found::Pair(Pair {
        time,
        indication,
        reference,
        weight: 1.0,
    })
}

/// Whether other instants of the reference lie between the same two indications.
fn shares_its_gap(instant: Timestamp, after: Timestamp, scene: &Scene<'_>) -> bool {
    let lag = scene.setup.lag;
    let begin = scene.indications[scene.id.0 as usize]
        .last_until(instant)
        .map_or(Timestamp(i64::MIN), |before| {
            before.time.minus(lag).plus(Duration(1))
        });
    let own = instant.minus(lag);
    scene
        .values
        .range(begin, after.minus(lag).plus(Duration(1)))
        .any(|value| value.time != own)
}

/// Does it unless the indication of this instant made its pair before.
fn make_once(made: &mut VecDeque<Timestamp>, time: Timestamp, make: impl FnOnce()) {
    if made.contains(&time) {
        return;
    }
    make();
    made.push_back(time);
    if made.len() > MADE_MAX {
        made.pop_front();
    }
}
