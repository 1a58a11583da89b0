//! Sensors that break: what happened must be noticed, and nothing else be said.

use super::drifting::foul;
use super::{Class, Scenario};
use crate::behaviour::curve::Curve;
use crate::behaviour::disturbance::Disturbance;
use crate::score::chooser::Chooser;
use crate::score::ground::{WHITE, one};
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

/// The only sensor.
const SENSOR: Place = Place::Sensor(0);

/// Plants a jump of the only sensor; in the last day it need not be noticed any more. Five
/// rejections in a row are a large step seen by the screen.
fn plant_jump(world: &mut World, at: f64, size: f64) {
    let jump = Fault::jump(0, at, size);
    world.faults.push(Fault {
        required: jump.due < world.days,
        ..jump
    });
    let excuse = Fault::excuse(SENSOR, at, at + 1.0, &["screen-locked-out"]);
    world.faults.push(excuse);
}

fn step(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let up = world.chooser.value("up", "d", 10.0, 16.0);
    let down = world.chooser.value("down", "d", 24.0, 32.0);
    let size = noise * world.chooser.signed("size", "sigma", 3.0, 12.0);
    for (at, size) in [(up, size), (down, -size)] {
        world.sensors[0].zero.push(Curve::Step { at, size });
        plant_jump(&mut world, at, size);
    }
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
    world
        .faults
        .push(Fault::lasting(SENSOR, knee, 5.0, &["drift-rate"]));
    // Until then a bend this sharp may well be taken for the beginning of something else.
    let excuse = Fault::excuse(SENSOR, knee, knee + 5.0, &["screen-locked-out"]);
    world.faults.push(excuse);
    world
}

fn saw_tooth(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let (curve, height) = foul(&mut world, 7.0);
    for at in curve.jumps(world.days) {
        plant_jump(&mut world, at, -height);
    }
    world
}

fn baseline(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let mut at = world.chooser.value("first", "d", 8.0, 10.0);
    while at < world.days - 1.5 {
        let size = noise * world.chooser.signed("size", "sigma", 4.0, 8.0);
        world.sensors[0].zero.push(Curve::Step { at, size });
        plant_jump(&mut world, at, size);
        at += world.chooser.value("pause", "d", 6.5, 8.5);
    }
    world
}

fn stuck(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    // The true value must move, or there is nothing to be wrong about.
    world.quantities[0].swing = noise * world.chooser.value("moves", "sigma", 4.0, 8.0);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    world.sensors[0].disturbance = Disturbance::Stuck { at };
    world
        .faults
        .push(Fault::lasting(SENSOR, at, 1.0, &["stuck"]));
    // Until it is noticed the true value moves away from the sensor.
    let excuse = Fault::excuse(SENSOR, at, at + 1.0, &[STEP, "screen-locked-out"]);
    world.faults.push(excuse);
    world
}

fn noise_growth(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let at = world.chooser.value("at", "d", 12.0, 30.0);
    let factor = world.chooser.value("factor", "1", 2.5, 4.0);
    world.sensors[0].noise.grows = Some((at, factor));
    world
        .faults
        .push(Fault::lasting(SENSOR, at, 3.0, &["noise-growth"]));
    world.expect_degrees(0, 0);
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
    let words = &[STEP, "screen-locked-out", "error-limit"];
    world.faults.push(Fault::lasting(SENSOR, from, 0.25, words));
    // Noise and what the true value does come with the wrong size, too.
    let excuse = Fault::excuse(SENSOR, from, f64::INFINITY, &["noise-growth"]);
    world.faults.push(excuse);
}
