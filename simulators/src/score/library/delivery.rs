//! Readings that travel badly: lost, twice, out of order, late, or stamped by a wrong clock.

use super::drifting::offset_ramp;
use super::{Class, Scenario};
use crate::behaviour::disturbance::Disturbance;
use crate::score::chooser::Chooser;
use crate::score::ground::{WHITE, days, one};
use crate::score::observe::STEP;
use crate::score::world::{Delivery, Fault, Place, World};

/// The scenarios of this file.
pub(super) const SCENARIOS: &[Scenario] = &[
    Scenario::new(
        Class::Correctable,
        "bad-delivery",
        "the zero creeps while readings get lost, come twice and overtake each other",
        bad_delivery,
    ),
    Scenario::new(
        Class::Correctable,
        "late-laboratory",
        "the zero creeps, and reference values come days after they were sampled",
        late_laboratory,
    ),
    Scenario::new(
        Class::Correctable,
        "leap-second",
        "the zero creeps, and the sensor's clock misses a leap second: a second is no fault",
        leap_second,
    ),
    Scenario::new(
        Class::MustRefuse,
        "clock-step",
        "the sensor's clock is an hour off for some days: its pairs say nothing of its drift",
        clock_step,
    ),
];

fn bad_delivery(chooser: Chooser) -> World {
    let mut world = offset_ramp(chooser);
    world.sensors[0].delivery = Delivery {
        lost: world.chooser.value("lost", "1", 0.05, 0.2),
        twice: world.chooser.value("twice", "1", 0.05, 0.2),
        delay: world.chooser.value("delay", "steps", 1.0, 4.0),
        clock_off: None,
    };
    let from = world.chooser.value("gap", "d", 15.0, 30.0);
    let to = from + world.chooser.value("gap_length", "d", 0.5, 2.0);
    world.sensors[0].disturbance = Disturbance::DataGap { from, to };
    // Longer than the longest delay of 40 min.
    world.setup.channels[0].lateness = days(1.0 / 24.0);
    world
}

fn late_laboratory(chooser: Chooser) -> World {
    let mut world = offset_ramp(chooser);
    world.references[0].every = 12;
    world.references[0].late = (
        world.chooser.value("soonest", "d", 0.2, 0.5),
        world.chooser.value("latest", "d", 0.6, 1.5),
    );
    world.setup.channels[0].lateness = days(2.0);
    world
}

/// An hour at a daily swing of so many σ is a false error of up to 2π/24 of the swing.
fn clock_step(chooser: Chooser) -> World {
    let mut world = one(chooser, WHITE);
    let noise = world.sensors[0].noise.deviation();
    world.quantities[0].swing = noise * world.chooser.value("daily", "sigma", 2.0, 6.0);
    world.quantities[0].wander = 0.0;
    let from = world.chooser.value("from", "d", 12.0, 24.0);
    let to = from + world.chooser.value("length", "d", 1.0, 4.0);
    #[allow(clippy::cast_possible_truncation, reason = "an hour in seconds")]
    let seconds = world.chooser.signed("hours", "h", 1.0, 1.0) as i64 * 3600;
    world.sensors[0].delivery.clock_off = Some((from, to, seconds));
    // The pairs do step when the clock does, once each time, and their errors swing in between.
    let place = Place::Sensor(0);
    for at in [from, to] {
        let words = &[STEP, "screen-locked-out"];
        world.faults.push(Fault::excuse(place, at, to + 1.0, words));
    }
    world
        .faults
        .push(Fault::excuse(place, from, to + 1.0, &["noise-growth"]));
    world
}

/// A clock that knows nothing of the leap second at midnight runs a second ahead until somebody
/// sets it: each of its readings stands beside a reference value of the second before.
fn leap_second(chooser: Chooser) -> World {
    let mut world = offset_ramp(chooser);
    let midnight = libm::floor(world.chooser.value("midnight", "d", 12.0, 24.0));
    let set = midnight + world.chooser.value("set_after", "d", 0.5, 10.0);
    world.sensors[0].delivery.clock_off = Some((midnight, set, 1));
    world
}
