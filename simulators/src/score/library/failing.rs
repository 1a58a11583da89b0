//! Sensors that break: what happened must be noticed, and nothing else be said.

use super::{Class, Scenario};
use crate::behaviour::curve::Curve;
use crate::behaviour::disturbance::Disturbance;
use crate::score::chooser::Chooser;
use crate::score::ground::{WHITE, WINDOW_DAYS, one};
use crate::score::observe::STEP;
use crate::score::world::{Fault, OtherUnit, Place, World};

/// The scenarios of this file.
pub(super) const SCENARIOS: &[Scenario] = &[
    scenario("step", "bumped twice: up, and later down", step),
    scenario(
        "poisoning-knee",
        "slow loss that turns fast within a day",
        knee,
    ),
    scenario(
        "saw-tooth-undeclared",
        "fouling and cleanings that nobody reports",
        saw_tooth,
    ),
    scenario(
        "auto-baseline",
        "the device resets its own baseline about once a week",
        baseline,
    ),
    scenario("stuck", "repeats one value until the end", stuck),
    scenario(
        "noise-growth",
        "the noise triples, nothing drifts",
        noise_growth,
    ),
    scenario(
        "unit-error",
        "from some day on readings come in another unit",
        unit_error,
    ),
    scenario(
        "sign-error",
        "from some day on readings come with the wrong sign",
        sign_error,
    ),
];

const fn scenario(
    name: &'static str,
    purpose: &'static str,
    build: fn(Chooser) -> World,
) -> Scenario {
    Scenario::new(Class::Detection, name, purpose, build)
}

/// A jump of the only sensor at `at` by `size`, to be confirmed within a day.
fn jump(at: f64, size: f64) -> Fault {
    Fault {
        answers: vec![STEP],
        place: Place::Sensor(0),
        at,
        due: at + 1.0,
        until: at + WINDOW_DAYS,
        size: Some(size),
        required: true,
    }
}

fn step(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let up = world.chooser.value("up", "d", 10.0, 16.0);
    let down = world.chooser.value("down", "d", 24.0, 32.0);
    let size = noise * world.chooser.signed("size", "sigma", 3.0, 12.0);
    for (at, size) in [(up, size), (down, -size)] {
        world.sensors[0].zero.push(Curve::Step { at, size });
        world.faults.push(jump(at, size));
    }
    // Five rejections in a row are a large step seen by the screen.
    world.tolerated = vec!["screen-locked-out"];
    world
}

fn knee(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let knee = world.chooser.value("knee", "d", 16.0, 24.0);
    let before = noise * world.chooser.value("before", "sigma", 1.0, 3.0);
    let a_day = noise * world.chooser.value("after", "sigma/d", 2.0, 4.0);
    let zero = &mut world.sensors[0].zero;
    let down = |onset, rate: f64| Curve::Linear { onset, rate: -rate };
    zero.push(down(0.0, before / knee));
    zero.push(down(knee, a_day));
    world.setup.channels[0].max_drift_rate = Some(0.5 * a_day);
    // At such a rate the error has left its limit of 10 σ within five days.
    world.faults.push(Fault {
        answers: vec!["drift-rate"],
        place: Place::Sensor(0),
        at: knee,
        due: knee + 5.0,
        until: world.days,
        size: None,
        required: true,
    });
    // A bend this sharp may well be taken for the beginning of something else.
    world.tolerated = vec!["screen-locked-out"];
    world
}

fn saw_tooth(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let period = world.chooser.value("period", "d", 7.0, 10.0);
    let height = noise * world.chooser.signed("height", "sigma", 8.0, 15.0);
    let curve = Curve::SawTooth { period, height };
    let last = world.days - 1.5;
    for at in curve.jumps(last) {
        world.faults.push(jump(at, -height));
    }
    world.sensors[0].zero.push(curve);
    world.tolerated = vec!["screen-locked-out"];
    world
}

fn baseline(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let mut at = world.chooser.value("first", "d", 8.0, 10.0);
    while at < world.days - 1.5 {
        let size = noise * world.chooser.signed("size", "sigma", 4.0, 8.0);
        world.sensors[0].zero.push(Curve::Step { at, size });
        world.faults.push(jump(at, size));
        at += world.chooser.value("pause", "d", 6.5, 8.5);
    }
    world.tolerated = vec!["screen-locked-out"];
    world
}

fn stuck(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    // The true value must move, or there is nothing to be wrong about.
    world.quantities[0].swing = noise * world.chooser.value("moves", "sigma", 4.0, 8.0);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    world.sensors[0].disturbance = Disturbance::Stuck { at };
    world.faults.push(Fault {
        answers: vec!["stuck"],
        place: Place::Sensor(0),
        at,
        due: at + 1.0,
        until: world.days,
        size: None,
        required: true,
    });
    world.tolerated = vec![STEP, "screen-locked-out"];
    world
}

fn noise_growth(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    let factor = world.chooser.value("factor", "1", 2.5, 4.0);
    world.sensors[0].noise.grows = Some((at, factor));
    world.faults.push(Fault {
        answers: vec!["noise-growth"],
        place: Place::Sensor(0),
        at,
        due: at + 3.0,
        until: world.days,
        size: None,
        required: true,
    });
    world.degrees = Some((0, 0));
    world
}

fn unit_error(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let from = world.chooser.value("from", "d", 12.0, 30.0);
    // Degrees Fahrenheit for degrees Celsius.
    wrong_from(&mut world, from, 1.8, 32.0);
    world
}

fn sign_error(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let from = world.chooser.value("from", "d", 12.0, 30.0);
    wrong_from(&mut world, from, -1.0, 0.0);
    world
}

/// From `from` on readings are factor·value + offset; the jump must be noticed within six hours.
fn wrong_from(world: &mut World, from: f64, factor: f64, offset: f64) {
    world.sensors[0].other_unit = Some(OtherUnit {
        from,
        factor,
        offset,
    });
    world.faults.push(Fault {
        answers: vec![STEP, "screen-locked-out", "error-limit"],
        place: Place::Sensor(0),
        at: from,
        due: from + 0.25,
        until: world.days,
        size: None,
        required: true,
    });
    // Noise and what the true value does come with the wrong size, too.
    world.tolerated = vec!["noise-growth"];
}
