//! The scenarios: which instrument behaves how.

use crate::behaviour::Behaviour;
use crate::instrument::{INSTRUMENTS, Instrument};
use crate::range::Range;
use serde::Serialize;

/// One instrument with what is planted in it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Kit {
    /// Position in the catalogue; decides the random numbers.
    pub position: usize,
    /// The instrument.
    pub instrument: Instrument,
    /// What it does.
    pub behaviour: Behaviour,
    /// Whether its drift rate is watched: then the planted drift is at least twice as fast as
    /// permitted.
    pub rate_watched: bool,
}

impl Kit {
    /// The drift rate that is permitted in a run of `days` days, unit per day: half of the slowest
    /// that can be drawn;
    /// `None` if the rate is not watched.
    #[must_use]
    pub fn permitted_rate(&self, days: f64) -> Option<f64> {
        match self.behaviour {
            Behaviour::Linear { onset, change } if self.rate_watched => {
                Some(0.5 * change.low * self.instrument.noise / (days * (1.0 - onset.low)))
            }
            _ => None,
        }
    }
}

/// A named set of kits.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Scenario {
    /// Its name on the command line.
    pub name: &'static str,
    /// What it is for, one sentence.
    pub purpose: &'static str,
    /// Its sensors.
    pub kits: Vec<Kit>,
}

/// Names and purposes; each but the first is one instrument of the whole plant by itself.
const NAMES: [(&str, &str, &str); 14] = [
    (
        "harrow-mere",
        "the whole works: every behaviour at once",
        "",
    ),
    (
        "steady",
        "no drift, correlated noise: nothing to correct",
        "contact-tank/ph-2",
    ),
    (
        "slow-noise",
        "no drift, strongly correlated noise",
        "weather-mast/pressure-1",
    ),
    (
        "linear",
        "zero creeps evenly past the permissible error",
        "intake/ph-1",
    ),
    (
        "fast-drift",
        "drifts faster than permitted",
        "weather-mast/humidity-1",
    ),
    (
        "ageing-exponential",
        "ageing that slows down",
        "contact-tank/chlorine-1",
    ),
    (
        "ageing-quadratic",
        "coating that speeds up",
        "clearwell/conductivity-1",
    ),
    (
        "saw-tooth",
        "fouling with unannounced cleanings",
        "intake/turbidity-1",
    ),
    (
        "step",
        "bumped once: the error jumps",
        "pump-house/pressure-1",
    ),
    (
        "stuck",
        "repeats one value until the end",
        "intake/oxygen-1",
    ),
    (
        "spikes",
        "air bubbles: single spikes and bursts",
        "filter-hall/turbidity-2",
    ),
    (
        "daily-cycle",
        "feels the daily temperature",
        "intake/temperature-1",
    ),
    (
        "reference-dying",
        "the reference thins out and falls silent",
        "pump-house/flow-1",
    ),
    (
        "data-gap",
        "the sensor sends nothing for a while",
        "clearwell/level-1",
    ),
];

/// Behaviour of each instrument, in the catalogue's order, and whether its drift rate is watched.
const PLANTED: [(Behaviour, bool); INSTRUMENTS.len()] = [
    (
        Behaviour::Linear {
            onset: Range::new(0.1, 0.2),
            change: Range::new(18.0, 25.0),
        },
        false,
    ),
    (
        Behaviour::Stuck {
            at: Range::new(0.5, 0.7),
        },
        false,
    ),
    (
        Behaviour::SawTooth {
            period_days: Range::new(7.0, 9.0),
            height: Range::new(12.0, 18.0),
        },
        false,
    ),
    (
        Behaviour::DailyCycle {
            amplitude: Range::new(1.0, 2.0),
        },
        false,
    ),
    (
        Behaviour::Spikes {
            every_days: Range::new(0.4, 0.8),
            height: Range::new(12.0, 30.0),
            longest: 6,
        },
        false,
    ),
    (
        Behaviour::Exponential {
            onset: Range::new(0.1, 0.2),
            change: Range::new(15.0, 25.0),
            time_constant: Range::new(0.2, 0.4),
        },
        false,
    ),
    (Behaviour::Steady, false),
    (
        Behaviour::Quadratic {
            onset: Range::new(0.05, 0.15),
            change: Range::new(15.0, 25.0),
        },
        false,
    ),
    (
        Behaviour::DataGap {
            at: Range::new(0.3, 0.6),
            length_days: Range::new(0.8, 1.6),
        },
        false,
    ),
    (
        Behaviour::Step {
            at: Range::new(0.4, 0.6),
            size: Range::new(12.0, 18.0),
        },
        false,
    ),
    (
        Behaviour::ReferenceDying {
            at: Range::new(0.5, 0.7),
        },
        false,
    ),
    (Behaviour::Steady, false),
    (
        Behaviour::Linear {
            onset: Range::new(0.2, 0.3),
            change: Range::new(15.0, 20.0),
        },
        true,
    ),
];

/// All scenarios, the whole plant first.
#[must_use]
pub fn all() -> Vec<Scenario> {
    NAMES
        .iter()
        .map(|(name, purpose, instrument)| Scenario {
            name,
            purpose,
            kits: kits(instrument),
        })
        .collect()
}

/// The scenario called `name`.
#[must_use]
pub fn find(name: &str) -> Option<Scenario> {
    all().into_iter().find(|scenario| scenario.name == name)
}

/// The kit of one instrument, or of all for an empty name.
fn kits(name: &str) -> Vec<Kit> {
    INSTRUMENTS
        .iter()
        .zip(PLANTED)
        .enumerate()
        .filter(|(_, (instrument, _))| name.is_empty() || instrument.name == name)
        .map(|(position, (instrument, (behaviour, rate_watched)))| Kit {
            position,
            instrument: *instrument,
            behaviour,
            rate_watched,
        })
        .collect()
}
