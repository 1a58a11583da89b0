//! Many channels on shared references: one bad reference is one fault.

use super::{Class, Scenario};
use crate::behaviour::curve::Curve;
use crate::score::chooser::Chooser;
use crate::score::ground::{WHITE, days, many};
use crate::score::world::{Fault, Place, World};
use holdtrue_engine::setup::WindowLength;

/// The scenarios of this file.
pub(super) const SCENARIOS: &[Scenario] = &[Scenario {
    name: "fleet-one-bad-reference",
    purpose: "200 channels on 20 references, one of which jumps: one alarm, no correction follows",
    class: Class::Detection,
    build: fleet,
    twin: Some(silence),
    large: true,
}];

/// References of the fleet.
const REFERENCES: usize = 20;
/// Channels on each.
const CHILDREN: usize = 10;

fn fleet(chooser: Chooser) -> World {
    let mut world = many(chooser, REFERENCES, CHILDREN, WHITE);
    // 144 pairs a window keep 200 channels affordable; the run goes on for two windows after the
    // fault at the least.
    world.days = 8.0;
    world.cadence_seconds = 1200;
    for channel in &mut world.setup.channels {
        channel.fit.window = WindowLength::Time(days(2.0));
        channel.fit.segments = 32;
        channel.max_gap = days(1.0 / 24.0);
    }
    let noise = world.sensors[0].noise.deviation();
    let at = world.chooser.value("at", "d", 3.0, 4.0);
    let size = noise * world.chooser.signed("size", "sigma", 4.0, 20.0);
    world.references[BAD].error = vec![Curve::Step { at, size }];
    let jumped = Fault::lasting(Place::Reference(BAD), at, 0.25, &["reference-step"]);
    world.faults.push(jumped);
    world
}

/// Which reference goes bad.
const BAD: usize = 7;

/// In place of the jump the reference falls silent, which is told as soon as that is known. A
/// reference known to be bad is worth no more than a silent one: its channels hold what they had,
/// and what they have missed by the end of the hold is not its error that moved them.
fn silence(world: &mut World) {
    let at = world.faults.first().map_or(0.0, |fault| fault.at);
    let reference = &mut world.references[BAD];
    reference.error.clear();
    reference.silent_from = Some(at);
    world.setup.references[BAD].stale_after = Some(days(0.25));
}
