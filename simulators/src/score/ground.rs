//! The plain world that every scenario starts from: one or more sensors without a fault, each
//! beside its reference, and the configuration that an operator would write for them.

use super::chooser::Chooser;
use super::world::{Delivery, Noise, Quantity, Reference, Sensor, World};
use crate::behaviour::disturbance::Disturbance;
use holdtrue_engine::setup::{
    ChannelId, ChannelInfluence, ChannelSetup, Clock, FitSetup, InfluenceId, InfluenceSetup,
    PairNoise, ReferenceId, ReferenceKind, ReferenceSetup, Setup, WindowLength,
};
use holdtrue_engine::time::Duration;

/// Ten minutes between two indications.
pub const CADENCE_SECONDS: i64 = 600;
/// A window of a week: 1008 pairs, in which a day comes seven times.
pub const WINDOW_DAYS: f64 = 7.0;
/// Noise of a reference value as a part of the sensor's: a reference clearly better than the
/// sensor, 4 to 1 (common practice).
const REFERENCE_NOISE: f64 = 0.25;
/// Six windows: one to fill, five to judge.
pub const RUN_DAYS: f64 = 42.0;

/// A world with one sensor whose noise has these parts: shares of the variance with their lag-1
/// correlations.
#[must_use]
pub fn one(chooser: Chooser, noise: &[(f64, f64)]) -> World {
    many(chooser, 1, 1, noise)
}

/// White noise alone.
pub const WHITE: &[(f64, f64)] = &[(1.0, 0.0)];

/// `sensors` sensors on each of `references` references. Each reference measures a quantity of its
/// own; all values are of one order.
#[must_use]
pub fn many(
    mut chooser: Chooser,
    references: usize,
    sensors: usize,
    noise: &[(f64, f64)],
) -> World {
    // Orders of magnitude from pH units to millibars.
    let deviation = chooser.value("noise", "unit", 0.01, 1.0);
    let level = deviation * chooser.value("level", "sigma", 50.0, 500.0);
    let swing = deviation * chooser.value("swing", "sigma", 0.0, 5.0);
    let wander = deviation * chooser.value("wander", "sigma", 0.0, 2.0);
    let quantity = Quantity {
        level,
        swing,
        wander,
        moves: None,
    };
    let noise = Noise {
        parts: noise
            .iter()
            .map(|&(share, memory)| (deviation * libm::sqrt(share), memory))
            .collect(),
        grows: None,
    };
    let mut world = World {
        quantities: vec![quantity; references],
        references: Vec::new(),
        sensors: Vec::new(),
        faults: Vec::new(),
        beyond_from: None,
        setup: Setup {
            node: "scorecard".to_owned(),
            clock: Clock::Readings,
            ..Setup::default()
        },
        cadence_seconds: CADENCE_SECONDS,
        days: RUN_DAYS,
        chooser,
    };
    for reference in 0..references {
        world.references.push(Reference {
            quantity: Some(reference),
            every: 1,
            each: REFERENCE_NOISE * deviation,
            error: Vec::new(),
            silent_from: None,
            stuck_from: None,
            late: (0.0, 0.0),
        });
        let name = format!("reference-{reference}");
        let setup = reference_setup(name, REFERENCE_NOISE * deviation);
        world.setup.references.push(setup);
        for _ in 0..sensors {
            world.sensors.push(sensor(reference, noise.clone()));
            let name = format!("sensor-{}", world.setup.channels.len());
            let setup = channel_setup(name, reference, deviation);
            world.setup.channels.push(setup);
        }
    }
    world
}

/// A world of `members` sensors of one quantity, each judged against the median of the others.
#[must_use]
pub fn group(chooser: Chooser, members: usize, noise: &[(f64, f64)]) -> World {
    let mut world = many(chooser, 1, members, noise);
    let deviation = world.sensors[0].noise.deviation();
    let post = Reference {
        quantity: None,
        ..world.references[0].clone()
    };
    // The median of four: its own noise, and half a sigma that it is off by while one of the four
    // is (the middle of the other three then is the mean of their larger two: 0.42 σ).
    let setup = ReferenceSetup {
        uncertainty_each: 0.55 * deviation,
        uncertainty_common: 0.5 * deviation,
        ..world.setup.references[0].clone()
    };
    world.references = vec![post; members];
    world.setup.references = (0..members)
        .map(|own| ReferenceSetup {
            name: format!("group-of-{own}"),
            kind: ReferenceKind::Group {
                members: (0..members)
                    .filter(|other| *other != own)
                    .map(channel_id)
                    .collect(),
            },
            ..setup.clone()
        })
        .collect();
    for (own, channel) in world.setup.channels.iter_mut().enumerate() {
        channel.reference = reference_id(own);
    }
    world
}

/// Has the influence on the first sensor measured with this noise, and tells the engine of it.
pub fn declare_influence(world: &mut World, noise: f64) {
    if let Some(influence) = &mut world.sensors[0].influence {
        influence.measured = Some(noise);
    }
    world.setup.influences.push(InfluenceSetup {
        name: "temperature".to_owned(),
    });
    let channel = &mut world.setup.channels[0];
    channel.influences.push(ChannelInfluence {
        source: InfluenceId(0),
        name: "temperature".to_owned(),
        unit: Some("degC".to_owned()),
    });
    channel.fit.influences = 1;
}

fn sensor(quantity: usize, noise: Noise) -> Sensor {
    Sensor {
        quantity,
        lag: 0,
        noise,
        zero: Vec::new(),
        span: Vec::new(),
        influence: None,
        resolution: 0.0,
        disturbance: Disturbance::None,
        other_unit: None,
        delivery: Delivery::default(),
        cleaned: Vec::new(),
        degrees: None,
    }
}

/// A reference that is measured, each value with this standard uncertainty.
pub(super) fn reference_setup(name: String, each: f64) -> ReferenceSetup {
    ReferenceSetup {
        uncertainty_each: each,
        ..ReferenceSetup::new(name, ReferenceKind::Measured)
    }
}

/// A channel with the configuration's defaults but for these: a window of a week, its noise
/// declared, a permissible error of ten standard deviations of the noise, and corrections of any
/// size, since planted errors run past the permissible one, to see the correction follow them.
pub(super) fn channel_setup(name: String, reference: usize, deviation: f64) -> ChannelSetup {
    ChannelSetup {
        fit: FitSetup {
            window: WindowLength::Time(days(WINDOW_DAYS)),
            noise: PairNoise {
                reference: REFERENCE_NOISE * deviation,
                indication: deviation,
            },
            ..FitSetup::default()
        },
        max_permissible_error: Some(10.0 * deviation),
        noise: deviation,
        max_correction: Some(f64::MAX),
        ..ChannelSetup::new(name, "unit", reference_id(reference))
    }
}

/// The engine's name for the reference at `position`.
#[must_use]
pub fn reference_id(position: usize) -> ReferenceId {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a world has a few references"
    )]
    let id = ReferenceId(position as u32);
    id
}

/// The engine's name for the sensor at `position`.
#[must_use]
pub fn channel_id(position: usize) -> ChannelId {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a world has a few hundred sensors"
    )]
    let id = ChannelId(position as u32);
    id
}

/// A length in days, to the nanosecond.
#[must_use]
pub fn days(length: f64) -> Duration {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "runs of weeks are far below 2^63 ns"
    )]
    let nanoseconds = libm::round(length * 86_400e9) as i64;
    Duration(nanoseconds)
}
