//! Drifts that pairs with a reference show.

use super::{Class, Scenario};
use crate::behaviour::curve::Curve;
use crate::score::chooser::Chooser;
use crate::score::ground::{RUN_DAYS, WHITE, one};
use crate::score::world::World;
use holdtrue_engine::time::Duration;

/// The scenarios of this file.
pub(super) const SCENARIOS: &[Scenario] = &[
    scenario(
        "offset-ramp",
        "the zero creeps evenly past its limit",
        offset_ramp,
    ),
    scenario("quadratic-ageing", "ageing that speeds up", quadratic),
    scenario("exponential-ageing", "ageing that slows down", exponential),
    scenario("biofouling", "growth that feeds itself", growth),
    scenario(
        "lagged-on-ramps",
        "the zero creeps, the true value ramps, and the sensor answers late by its declared lag",
        lagged,
    ),
];

const fn scenario(
    name: &'static str,
    purpose: &'static str,
    build: fn(Chooser) -> World,
) -> Scenario {
    Scenario::new(Class::Correctable, name, purpose, build)
}

/// A zero that creeps by 15 to 25 σ, from a day of the first week on.
pub(super) fn offset_ramp(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let onset = world.chooser.value("onset", "d", 3.0, 8.0);
    let change = noise * world.chooser.signed("change", "sigma", 15.0, 25.0);
    world.sensors[0].zero.push(Curve::Linear {
        onset,
        rate: change / (RUN_DAYS - onset),
    });
    // Where the beginning lies inside a window, the error has a bend that a parabola fits better.
    world.degrees = Some((1, 2));
    world
}

fn quadratic(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let onset = world.chooser.value("onset", "d", 2.0, 6.0);
    let change = noise * world.chooser.signed("change", "sigma", 20.0, 40.0);
    let run = RUN_DAYS - onset;
    world.sensors[0].zero.push(Curve::Quadratic {
        onset,
        factor: change / (run * run),
    });
    world.degrees = Some((1, 2));
    world
}

fn exponential(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let onset = world.chooser.value("onset", "d", 3.0, 8.0);
    let change = noise * world.chooser.signed("change", "sigma", 15.0, 25.0);
    let time_constant = world.chooser.value("time_constant", "d", 8.0, 16.0);
    world.sensors[0].zero.push(Curve::Exponential {
        onset,
        change,
        time_constant,
    });
    world.degrees = Some((1, 2));
    world
}

fn growth(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let change = noise * world.chooser.signed("change", "sigma", 20.0, 40.0);
    let time_constant = world.chooser.value("time_constant", "d", 7.0, 14.0);
    world.sensors[0].zero.push(Curve::Growth {
        change,
        time_constant,
        end: RUN_DAYS,
    });
    world.degrees = Some((1, 2));
    world
}

fn lagged(chooser: Chooser) -> World {
    let mut world = offset_ramp(chooser);
    let noise = world.sensors[0].noise.deviation();
    // Ramps of some σ an hour: a lag that is not declared would fake errors of several σ.
    world.quantities[0].swing = noise * world.chooser.value("ramps", "sigma", 20.0, 40.0);
    world.quantities[0].wander = 0.0;
    #[allow(clippy::cast_possible_truncation, reason = "at most six steps")]
    let lag = libm::round(world.chooser.value("lag", "steps", 2.0, 6.0)) as i64;
    world.sensors[0].lag = lag;
    world.setup.channels[0].lag = Duration::from_seconds(lag * world.cadence_seconds);
    world
}
