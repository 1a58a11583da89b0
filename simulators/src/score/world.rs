//! What one run consists of, everything drawn: quantities, references, sensors, faults, and the
//! engine's configuration.
//!
//! Instants are in days from the start of the run, sizes in the channel's unit. One grid of time
//! serves all: a step every [`World::cadence_seconds`].

use super::chooser::Chooser;
use super::observe::STEP;
use crate::behaviour::Drawn;
use crate::behaviour::curve::Curve;
use crate::behaviour::disturbance::Disturbance;
use holdtrue_engine::setup::Setup;

/// Everything drawn for one run.
#[derive(Clone, Debug)]
pub struct World {
    /// The true values.
    pub quantities: Vec<Quantity>,
    /// What the sensors are judged against; position as in the configuration.
    pub references: Vec<Reference>,
    /// The sensors; position as the channels' in the configuration.
    pub sensors: Vec<Sensor>,
    /// What must be noticed.
    pub faults: Vec<Fault>,
    /// From this day on every true value lies beyond all that pairs have shown.
    pub beyond_from: Option<f64>,
    /// The engine's configuration.
    pub setup: Setup,
    /// Seconds from one indication to the next.
    pub cadence_seconds: i64,
    /// Length of the run.
    pub days: f64,
    /// The source of all of this; its streams make the readings.
    pub chooser: Chooser,
}

impl World {
    /// The drawn parameters.
    #[must_use]
    pub fn drawn(&self) -> &[Drawn] {
        self.chooser.drawn()
    }

    /// Has every sensor's drift bring at least one degree and justify no more than another.
    pub fn expect_degrees(&mut self, least: u8, most: u8) {
        for sensor in &mut self.sensors {
            sensor.degrees = Some((least, most));
        }
    }

    /// Grid steps of the run.
    #[must_use]
    pub fn steps(&self) -> i64 {
        #[allow(
            clippy::cast_possible_truncation,
            reason = "a run has a few thousand steps"
        )]
        let steps = libm::round(self.days * 86_400.0 / self.cadence_seconds as f64) as i64;
        steps
    }
}

/// A true value over time.
#[derive(Clone, Copy, Debug)]
pub struct Quantity {
    /// Its mean.
    pub level: f64,
    /// Amplitude of its daily cycle.
    pub swing: f64,
    /// Standard deviation of its slow wander.
    pub wander: f64,
    /// From this day on it is higher by so much.
    pub moves: Option<(f64, f64)>,
}

/// A source of reference values.
#[derive(Clone, Debug)]
pub struct Reference {
    /// What it measures. A reference that is the median of a group has none.
    pub quantity: Option<usize>,
    /// Grid steps from one value to the next.
    pub every: i64,
    /// Standard deviation of each value.
    pub each: f64,
    /// Its own systematic error.
    pub error: Vec<Curve>,
    /// From when on it says nothing.
    pub silent_from: Option<f64>,
    /// From when on it repeats one value.
    pub stuck_from: Option<f64>,
    /// How long, in days, each value takes to arrive: shortest and longest.
    pub late: (f64, f64),
}

/// A sensor: indication = x + zero(t) + span(t)·x + influence + noise, then whatever disturbs it.
#[derive(Clone, Debug)]
pub struct Sensor {
    /// What it measures.
    pub quantity: usize,
    /// Grid steps by which it answers late.
    pub lag: i64,
    /// Its noise.
    pub noise: Noise,
    /// Zero error over time: the sum of these.
    pub zero: Vec<Curve>,
    /// Span error, a part of the true value: the sum of these.
    pub span: Vec<Curve>,
    /// What it feels beside the measurand.
    pub influence: Option<Influence>,
    /// Smallest step that it shows; 0: none.
    pub resolution: f64,
    /// What happens to single readings.
    pub disturbance: Disturbance,
    /// From when on it answers in another unit: indication = factor·value + offset.
    pub other_unit: Option<OtherUnit>,
    /// How its readings travel.
    pub delivery: Delivery,
    /// When it is cleaned, and when an order says so.
    pub cleaned: Vec<Cleaning>,
    /// The least degree that its drift must bring, and the highest that it can justify; `None`
    /// where the notion fails (steps, resets).
    pub degrees: Option<(u8, u8)>,
}

impl Sensor {
    /// The systematic error at `day` where the true value is `x` and the influence is `q`.
    #[must_use]
    pub fn systematic(&self, day: f64, x: f64, q: f64) -> f64 {
        let sum = |curves: &[Curve]| curves.iter().map(|curve| curve.error(day)).sum::<f64>();
        let felt = self.influence.map_or(0.0, |influence| {
            influence.sensitivity * (q - influence.mean)
        });
        sum(&self.zero) + sum(&self.span) * x + felt + 0.0
    }
}

/// A cleaning that somebody reports.
#[derive(Clone, Copy, Debug)]
pub struct Cleaning {
    /// When it happens.
    pub at: f64,
    /// When the order arrives.
    pub told: f64,
}

/// A sensor's noise: a sum of first-order autoregressive parts, which may grow.
#[derive(Clone, Debug)]
pub struct Noise {
    /// Standard deviation and lag-1 correlation of each part.
    pub parts: Vec<(f64, f64)>,
    /// From this day on it is so many times as large.
    pub grows: Option<(f64, f64)>,
}

impl Noise {
    /// Its standard deviation before it grows.
    #[must_use]
    pub fn deviation(&self) -> f64 {
        let variance: f64 = self.parts.iter().map(|(sd, _)| sd * sd).sum();
        libm::sqrt(variance)
    }
}

/// An influence quantity with a daily cycle, and how much of it the sensor feels.
#[derive(Clone, Copy, Debug)]
pub struct Influence {
    /// Its mean.
    pub mean: f64,
    /// Amplitude of its daily cycle.
    pub swing: f64,
    /// Standard deviation of its slow wander.
    pub wander: f64,
    /// Error per unit of it.
    pub sensitivity: f64,
    /// Standard deviation of its readings' noise; `None`: nobody measures it.
    pub measured: Option<f64>,
}

/// Readings in another unit.
#[derive(Clone, Copy, Debug)]
pub struct OtherUnit {
    /// From when on.
    pub from: f64,
    /// Indication per unit.
    pub factor: f64,
    /// Indication at zero.
    pub offset: f64,
}

/// How readings travel.
#[derive(Clone, Copy, Debug, Default)]
pub struct Delivery {
    /// Part of the readings that is lost.
    pub lost: f64,
    /// Part that comes twice.
    pub twice: f64,
    /// Longest delay, in grid steps; each reading draws its own, so that they overtake each other.
    pub delay: f64,
    /// The sensor's clock is wrong by so many seconds between these days.
    pub clock_off: Option<(f64, f64, i64)>,
}

/// Something planted: it must be noticed, or makes words plausible that would be false without it.
///
/// It explains one word of each of its kinds. A second step would close the history for nothing;
/// any other second word is counted as a repetition.
#[derive(Clone, Debug)]
pub struct Fault {
    /// Any of these words answers it: an alarm's kind, `step`, or `degree-raised`.
    pub answers: Vec<&'static str>,
    /// Whose.
    pub place: Place,
    /// When it happens; delays count from here.
    pub at: f64,
    /// It must have been noticed by then.
    pub due: f64,
    /// A word of this kind said from `at` until here is about this fault, and no false one.
    pub until: f64,
    /// By how much the error jumps, if it does.
    pub size: Option<f64>,
    /// Whether it must be noticed; otherwise it explains what is said, and no more.
    pub required: bool,
}

impl Fault {
    /// What lasts until the end of the run, and must be answered by one of these words within so
    /// many days.
    #[must_use]
    pub fn lasting(place: Place, at: f64, within: f64, words: &[&'static str]) -> Self {
        Self {
            answers: words.to_vec(),
            place,
            at,
            due: at + within,
            until: f64::INFINITY,
            size: None,
            required: true,
        }
    }

    /// A jump of a sensor's error, to be confirmed within a day; a step told later than two days
    /// after it is about something else.
    #[must_use]
    pub fn jump(sensor: usize, at: f64, size: f64) -> Self {
        Self {
            answers: vec![STEP],
            place: Place::Sensor(sensor),
            at,
            due: at + 1.0,
            until: at + 2.0,
            size: Some(size),
            required: true,
        }
    }

    /// What may make somebody say these words from `at` to `until`, and need not.
    #[must_use]
    pub fn excuse(place: Place, at: f64, until: f64, words: &[&'static str]) -> Self {
        Self {
            due: until,
            until,
            required: false,
            ..Self::lasting(place, at, 0.0, words)
        }
    }
}

/// Whose fault.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Place {
    /// A sensor's.
    Sensor(usize),
    /// A reference's.
    Reference(usize),
}
