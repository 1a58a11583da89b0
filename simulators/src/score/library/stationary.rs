//! Nothing drifts: noise of every kind, and single readings that are off. A correction must leave
//! the sensor alone.

use super::{Class, Scenario};
use crate::behaviour::disturbance::Disturbance;
use crate::score::chooser::Chooser;
use crate::score::ground::{WHITE, one};
use crate::score::world::{Influence, World};

/// The scenarios of this file.
pub(super) const SCENARIOS: &[Scenario] = &[
    scenario("white-noise", "white noise alone", |chooser| {
        steady(chooser, WHITE)
    }),
    scenario("ar-0.5", "noise with memory: lag-1 correlation 0.5", |c| {
        steady(c, &[(1.0, 0.5)])
    }),
    scenario("ar-0.8", "noise with memory: lag-1 correlation 0.8", |c| {
        steady(c, &[(1.0, 0.8)])
    }),
    scenario("ar-0.9", "noise with memory: lag-1 correlation 0.9", |c| {
        steady(c, &[(1.0, 0.9)])
    }),
    scenario(
        "white-and-slow",
        "white noise over a slow wander (lag-1 correlation 0.95), equal parts of the variance",
        |chooser| steady(chooser, &[(0.5, 0.0), (0.5, 0.95)]),
    ),
    scenario(
        "quantised",
        "a display whose smallest step is near the noise",
        quantised,
    ),
    scenario("spikes", "single readings far off", |chooser| {
        spikes(chooser, 1)
    }),
    scenario(
        "bursts",
        "bursts of up to four readings far off",
        |chooser| spikes(chooser, 4),
    ),
    scenario(
        "temperature-undeclared",
        "the sensor feels the daily temperature and nobody measures it: no drift may be seen in it",
        temperature,
    ),
];

const fn scenario(
    name: &'static str,
    purpose: &'static str,
    build: fn(Chooser) -> World,
) -> Scenario {
    Scenario::new(Class::Stationary, name, purpose, build)
}

/// Noise with these parts, nothing else.
fn steady(chooser: Chooser, noise: &[(f64, f64)]) -> World {
    let mut world = one(chooser, noise);
    world.expect_degrees(0, 0);
    world
}

fn quantised(chooser: Chooser) -> World {
    let mut world = steady(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    // At two σ, every second reading equals the one before (check value V49): still not stuck.
    let step = noise * world.chooser.value("resolution", "sigma", 0.2, 2.0);
    world.sensors[0].resolution = step;
    world.setup.channels[0].resolution = step;
    world
}

fn spikes(chooser: Chooser, longest: u32) -> World {
    let mut world = steady(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    let every = world.chooser.value("every", "d", 0.4, 0.8);
    let height = noise * world.chooser.value("height", "sigma", 12.0, 30.0);
    world.sensors[0].disturbance = Disturbance::Spikes {
        every,
        height,
        longest,
    };
    world
}

fn temperature(chooser: Chooser) -> World {
    let mut world = steady(chooser, WHITE);
    feel_temperature(&mut world, 1.0, 2.0);
    world
}

/// Lets the sensor feel a daily temperature cycle of 8 K that nobody measures; the amplitude of the
/// error that it makes is drawn from this range, in σ.
pub(super) fn feel_temperature(world: &mut World, low: f64, high: f64) {
    let noise = world.sensors[0].noise.deviation();
    let felt = noise * world.chooser.signed("amplitude", "sigma", low, high);
    world.sensors[0].influence = Some(Influence {
        mean: 15.0,
        swing: 8.0,
        wander: 0.0,
        sensitivity: felt / 8.0,
        measured: None,
    });
}
