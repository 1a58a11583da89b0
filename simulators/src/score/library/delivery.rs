//! Readings that travel badly: lost, twice, out of order, late, or stamped by a wrong clock.

use super::drifting::offset_ramp;
use super::{Class, Scenario};
use crate::score::chooser::Chooser;
use crate::score::ground::days;
use crate::score::world::{Delivery, World};

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
];

fn bad_delivery(chooser: Chooser) -> World {
    let mut world = offset_ramp(chooser);
    world.sensors[0].delivery = Delivery {
        lost: world.chooser.value("lost", "1", 0.05, 0.2),
        twice: world.chooser.value("twice", "1", 0.05, 0.2),
        delay: world.chooser.value("delay", "steps", 1.0, 4.0),
        clock_off: None,
    };
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
