//! Pairs with a constant that holds only while its gate is open: the gate's state at the instant
//! that the indication answers to (its own time less `lag`) decides.

use super::{Fate, Found, Pair, Scene, awaited, missed, settles};
use crate::track::Sample;

pub(super) fn resolve(
    sample: &Sample,
    value: f64,
    scene: &Scene<'_>,
    found: &mut Vec<Found>,
) -> Fate {
    let instant = awaited(sample, scene);
    // With a negative lag the gate's events for it come after the indication itself.
    let settled = settles(sample, scene).max(instant.plus(scene.setup.lateness));
    if scene.now < settled {
        return Fate::Waits(Some(settled));
    }
    match scene.gate.is_open(instant) {
        Some(true) => found.push(Found::Pair(Pair {
            time: sample.time,
            indication: sample.value,
            reference: value,
            weight: 1.0,
        })),
        Some(false) => {}
        None => found.push(missed(sample)),
    }
    Fate::Done
}
