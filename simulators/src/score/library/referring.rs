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
];

fn stale(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    world.references[0].silent_from = Some(at);
    world.setup.references[0].stale_after = Some(days(0.25));
    world.faults.push(Fault {
        answers: vec!["reference-stale"],
        place: Place::Reference(0),
        at,
        due: at + 0.5,
        until: world.days,
    });
    world.degrees = Some((0, 0));
    world
}

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
