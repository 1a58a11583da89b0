//! Drifts that pairs with a reference show.

use super::stationary::feel_temperature;
use super::{Class, Scenario};
use crate::behaviour::curve::Curve;
use crate::score::chooser::Chooser;
use crate::score::ground::{RUN_DAYS, WHITE, declare_influence, group, one};
use crate::score::observe::STEP;
use crate::score::world::{Cleaning, Fault, Place, World};
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
    scenario(
        "saw-tooth-ordered",
        "fouling and cleanings, each reported by an order within hours",
        saw_tooth,
    ),
    scenario(
        "span-ramp",
        "the span fades while the level varies: zero and span must be told apart",
        span_ramp,
    ),
    scenario(
        "group-one-drifts",
        "one of five redundant sensors drifts, each judged against the median of the others",
        one_drifts,
    ),
    scenario(
        "temperature-declared",
        "the sensor feels the daily temperature, which is measured beside it",
        temperature,
    ),
    Scenario::new(
        Class::MustRefuse,
        "span-ramp-constant-level",
        "the span fades at one level: an offset near it may be corrected, a span not be claimed",
        span_ramp_at_one_level,
    ),
    Scenario::new(
        Class::MustRefuse,
        "span-steady-noisy-reference",
        "no drift, and a reference so noisy against the level's spread that a span is made up",
        noisy_reference,
    ),
    Scenario::new(
        Class::MustRefuse,
        "beyond-learned-range",
        "the true value moves beyond all that pairs have shown, and no pair comes any more",
        beyond,
    ),
    Scenario {
        twin: Some(stop_drifting),
        ..Scenario::new(
            Class::MustRefuse,
            "group-common-mode",
            "all five redundant sensors drift alike: invisible, so nothing may be said",
            all_drift,
        )
    },
];

const fn scenario(
    name: &'static str,
    purpose: &'static str,
    build: fn(Chooser) -> World,
) -> Scenario {
    Scenario::new(Class::Correctable, name, purpose, build)
}

/// Draws a creep of 15 to 25 σ from a day of the first week on.
fn ramp(world: &mut World) -> Curve {
    let noise = world.sensors[0].noise.deviation();
    let onset = world.chooser.value("onset", "d", 3.0, 8.0);
    let change = noise * world.chooser.signed("change", "sigma", 15.0, 25.0);
    Curve::creeping(onset, change, RUN_DAYS)
}

/// A zero that creeps.
pub(super) fn offset_ramp(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let drift = ramp(&mut world);
    world.sensors[0].zero.push(drift);
    // Where the beginning lies inside a window, the error has a bend that a parabola fits better.
    world.expect_degrees(1, 2);
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
    world.expect_degrees(1, 2);
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
    world.expect_degrees(1, 2);
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
    world.expect_degrees(1, 2);
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

/// Lets the first sensor foul and be cleaned again and again, each time after a period of so many
/// days to 10: the curve, and its height.
pub(super) fn foul(world: &mut World, shortest: f64) -> (Curve, f64) {
    let noise = world.sensors[0].noise.deviation();
    let period = world.chooser.value("period", "d", shortest, 10.0);
    let height = noise * world.chooser.signed("height", "sigma", 8.0, 15.0);
    let curve = Curve::SawTooth { period, height };
    world.sensors[0].zero.push(curve);
    (curve, height)
}

fn saw_tooth(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let (curve, _) = foul(&mut world, 5.0);
    for at in curve.jumps(world.days - 0.5) {
        let told = at + world.chooser.value("told_after", "d", 0.01, 0.1);
        world.sensors[0].cleaned.push(Cleaning { at, told });
        // Until the order comes, the readings do jump.
        let words = &[STEP, "screen-locked-out"];
        let excuse = Fault::excuse(Place::Sensor(0), at, told + 0.25, words);
        world.faults.push(excuse);
    }
    world.expect_degrees(1, 1);
    world
}

/// Lets the span fade by 5 to 10 % over the run. The level varies by so many σ over a day.
fn fading(chooser: Chooser, swing: (f64, f64)) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    world.quantities[0].swing = noise * world.chooser.value("varies", "sigma", swing.0, swing.1);
    world.quantities[0].wander = 0.0;
    let onset = world.chooser.value("onset", "d", 3.0, 8.0);
    let fade = world.chooser.value("fade", "1", 0.05, 0.1);
    let fade = Curve::creeping(onset, -fade, RUN_DAYS);
    world.sensors[0].span.push(fade);
    world.setup.channels[0].fit.max_span_degree = Some(1);
    world
}

fn span_ramp(chooser: Chooser) -> World {
    let mut world = fading(chooser, (20.0, 40.0));
    // At the level from which the span counts, its fading is a drift of the zero.
    world.expect_degrees(1, 2);
    world
}

fn span_ramp_at_one_level(chooser: Chooser) -> World {
    fading(chooser, (0.0, 0.0))
}

fn temperature(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    feel_temperature(&mut world, 3.0, 6.0);
    // A thermometer that is good to a tenth of a kelvin.
    declare_influence(&mut world, 0.1);
    // What moves the error is the temperature, not time.
    world.expect_degrees(0, 0);
    world
}

fn beyond(chooser: Chooser) -> World {
    let mut world = fading(chooser, (20.0, 40.0));
    let at = world.chooser.value("at", "d", 28.0, 38.0);
    let swing = world.quantities[0].swing;
    let by = swing * world.chooser.signed("moves", "swing", 4.0, 6.0);
    world.quantities[0].moves = Some((at, by));
    world.references[0].silent_from = Some(at);
    world.beyond_from = Some(at);
    world.setup.channels[0].corrected_values = true;
    // Pairs without a partner come to an end where the reference does.
    world.days = at + 1.0;
    world
}

/// Noise over spread of the regressor from 0.1 to 0.2, where a plain fit claims nearly every
/// constant span.
fn noisy_reference(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let share = world.chooser.value("noise/spread", "1", 0.1, 0.2);
    // A sine's standard deviation is its amplitude over √2.
    world.quantities[0].swing = noise / share * std::f64::consts::SQRT_2;
    world.quantities[0].wander = 0.0;
    world.references[0].each = noise;
    world.setup.references[0].uncertainty_each = noise;
    world.setup.channels[0].fit.noise.reference = noise;
    world.setup.channels[0].fit.max_span_degree = Some(1);
    world.expect_degrees(0, 0);
    world
}

/// Five redundant sensors.
const MEMBERS: usize = 5;

fn one_drifts(chooser: Chooser) -> World {
    let mut world = group(chooser, MEMBERS, WHITE);
    let drift = ramp(&mut world);
    world.sensors[0].zero.push(drift);
    // The others see their median move by a part of a σ, which is no drift of theirs, but seen.
    world.sensors[0].degrees = Some((1, 2));
    world
}

fn all_drift(chooser: Chooser) -> World {
    let mut world = group(chooser, MEMBERS, WHITE);
    let drift = ramp(&mut world);
    for sensor in &mut world.sensors {
        sensor.zero.push(drift);
    }
    world.expect_degrees(0, 0);
    world
}

fn stop_drifting(world: &mut World) {
    for sensor in &mut world.sensors {
        sensor.zero.clear();
    }
}
