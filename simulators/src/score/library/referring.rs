//! References that fail, drift or disagree.

use super::{Class, Scenario};
use crate::behaviour::curve::Curve;
use crate::score::chooser::Chooser;
use crate::score::ground::{WHITE, WINDOW_DAYS, days, many, one};
use crate::score::world::{Fault, Place, World};

/// The scenarios of this file.
pub(super) const SCENARIOS: &[Scenario] = &[
    Scenario::new(
        Class::Detection,
        "reference-stale",
        "the reference falls silent",
        stale,
    ),
    Scenario::new(
        Class::MustRefuse,
        "references-disagree",
        "references disagree by what each declares as common to its values: U must hold it",
        disagree,
    ),
    Scenario::new(
        Class::MustRefuse,
        "reference-drift",
        "the reference drifts by no more than it declares as common to its values: U must hold it",
        drift,
    ),
    Scenario {
        twin: Some(silence),
        ..Scenario::new(
            Class::Detection,
            "reference-step",
            "the reference of six sensors jumps: one alarm, no correction follows",
            step,
        )
    },
    Scenario {
        twin: Some(silence),
        ..Scenario::new(
            Class::Detection,
            "reference-stuck",
            "the reference of six sensors repeats one value: one alarm, no correction follows",
            stuck,
        )
    },
];

fn stale(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    world.references[0].silent_from = Some(at);
    world.setup.references[0].stale_after = Some(days(0.25));
    let stale = Fault::lasting(Place::Reference(0), at, 0.5, &["reference-stale"]);
    world.faults.push(stale);
    world.expect_degrees(0, 0);
    world
}

/// Six sensors on a reference that drifts to 0.5 … 1.5 of its declared common uncertainty. With
/// nothing else to compare with, such a drift shows as one of every sensor.
fn drift(chooser: Chooser) -> World {
    let mut world = many(chooser, 1, CHILDREN, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let common = noise * world.chooser.value("common", "sigma", 1.0, 3.0);
    let change = common * world.chooser.signed("change", "common", 0.5, 1.5);
    let onset = world.chooser.value("onset", "d", 3.0, 8.0);
    let creep = Curve::creeping(onset, change, world.days);
    world.references[0].error.push(creep);
    world.setup.references[0].uncertainty_common = common;
    world
}

fn step(chooser: Chooser) -> World {
    let mut world = many(chooser, 1, CHILDREN, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    let size = noise * world.chooser.signed("size", "sigma", 3.0, 12.0);
    world.references[0].error.push(Curve::Step { at, size });
    let jumped = Fault::lasting(Place::Reference(0), at, 0.25, &["reference-step"]);
    world.faults.push(jumped);
    world
}

/// Six sensors on a reference that repeats one value. It shows once the true value has moved by a
/// few σ, which takes some hours where its daily cycle turns.
fn stuck(chooser: Chooser) -> World {
    let mut world = many(chooser, 1, CHILDREN, WHITE);
    let noise = world.sensors[0].noise.deviation();
    world.quantities[0].swing = noise * world.chooser.value("moves", "sigma", 8.0, 16.0);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    world.references[0].stuck_from = Some(at);
    let stuck = Fault::lasting(Place::Reference(0), at, 0.5, &["reference-stuck"]);
    world.faults.push(stuck);
    world
}

/// In place of the fault the reference falls silent, which is told as soon as that is known.
fn silence(world: &mut World) {
    let at = world.faults.first().map_or(0.0, |fault| fault.at);
    let reference = &mut world.references[0];
    reference.error.clear();
    reference.stuck_from = None;
    reference.silent_from = Some(at);
    world.setup.references[0].stale_after = Some(days(0.25));
}

/// Sensors on one reference.
const CHILDREN: usize = 6;

/// Ten references with one sensor each; each reference is off by a deviate of its declared common
/// uncertainty. Nothing in the readings shows it, but U must hold it.
fn disagree(chooser: Chooser) -> World {
    let mut world = many(chooser, REFERENCES, 1, WHITE);
    world.days = 2.0 * WINDOW_DAYS;
    let noise = world.sensors[0].noise.deviation();
    let common = noise * world.chooser.value("common", "sigma", 0.5, 1.5);
    for reference in 0..REFERENCES {
        let error = world.chooser.hidden("off", "unit", common);
        world.references[reference].error.push(Curve::Step {
            at: f64::MIN,
            size: error,
        });
        world.setup.references[reference].uncertainty_common = common;
    }
    world
}

/// References that disagree.
const REFERENCES: usize = 10;
