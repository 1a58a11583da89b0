//! What can be wrong with a sensor: each kind with the ranges that its parameters are drawn from.
//!
//! Sizes are in standard deviations of the sensor's noise (σ), instants in parts of the run, so
//! that one table serves every instrument and every length of run. [`curve`] holds the drifts,
//! [`disturbance`] what happens to single readings and whole streams.

pub mod curve;
pub mod disturbance;

use crate::instrument::Instrument;
use crate::range::{Draw, Duty, Range};
use curve::Curve;
use disturbance::Disturbance;
use serde::Serialize;

/// One kind of behaviour.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(tag = "kind", rename_all = "kebab-case")]
pub enum Behaviour {
    /// No drift, correlated noise.
    Steady,
    /// From the onset on, the error changes evenly.
    Linear {
        /// Beginning, in parts of the run.
        onset: Range,
        /// Change from the onset to the end of the run, σ; its sign is drawn.
        change: Range,
    },
    /// Ageing that slows down: exponential approach to a final error.
    Exponential {
        /// Beginning, in parts of the run.
        onset: Range,
        /// Final error, σ.
        change: Range,
        /// Time constant, in parts of the run.
        time_constant: Range,
    },
    /// Ageing that speeds up: quadratic in time.
    Quadratic {
        /// Beginning, in parts of the run.
        onset: Range,
        /// Change from the onset to the end of the run, σ.
        change: Range,
    },
    /// Fouling that grows evenly until the sensor is cleaned, again and again.
    SawTooth {
        /// Days from cleaning to cleaning.
        period_days: Range,
        /// Error just before a cleaning, σ.
        height: Range,
    },
    /// The error jumps once.
    Step {
        /// When, in parts of the run.
        at: Range,
        /// By how much, σ; its sign is drawn.
        size: Range,
    },
    /// The sensor repeats one value until the end.
    Stuck {
        /// From when on, in parts of the run.
        at: Range,
    },
    /// Single readings far off, and bursts of several in a row; no drift.
    Spikes {
        /// Mean days between two disturbances.
        every_days: Range,
        /// How far off, σ; the sign is drawn each time.
        height: Range,
        /// Longest burst, readings.
        longest: u32,
    },
    /// The sensor feels the daily temperature: a sine of one day in the error; no drift.
    DailyCycle {
        /// Amplitude, σ.
        amplitude: Range,
    },
    /// The reference misses half of its values for a day, then falls silent.
    ReferenceDying {
        /// Silence, in parts of the run.
        at: Range,
    },
    /// The sensor sends nothing for a while.
    DataGap {
        /// Beginning, in parts of the run.
        at: Range,
        /// How long, days.
        length_days: Range,
    },
}

/// One drawn parameter, beside the range that it came from.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Drawn {
    /// What it is.
    pub name: &'static str,
    /// Its value, with its sign.
    pub value: f64,
    /// What the value counts: a unit, or `1` for a part of the run.
    pub unit: &'static str,
    /// The stated range, in σ where the behaviour counts so.
    pub range: Range,
}

/// Everything drawn for one sensor.
#[derive(Clone, Debug)]
pub struct Planted {
    /// The systematic error over time.
    pub curve: Curve,
    /// What happens to readings.
    pub disturbance: Disturbance,
    /// The drawn parameters.
    pub drawn: Vec<Drawn>,
}

impl Behaviour {
    /// The behaviour's name in lists and documents.
    #[must_use]
    pub fn name(&self) -> &'static str {
        match self {
            Self::Steady => "steady",
            Self::Linear { .. } => "linear",
            Self::Exponential { .. } => "ageing-exponential",
            Self::Quadratic { .. } => "ageing-quadratic",
            Self::SawTooth { .. } => "saw-tooth",
            Self::Step { .. } => "step",
            Self::Stuck { .. } => "stuck",
            Self::Spikes { .. } => "spikes",
            Self::DailyCycle { .. } => "daily-cycle",
            Self::ReferenceDying { .. } => "reference-dying",
            Self::DataGap { .. } => "data-gap",
        }
    }

    /// Its stated ranges: name, unit (`sigma`, `d`, or `run` for parts of the run), range.
    #[must_use]
    pub fn ranges(&self) -> Vec<(&'static str, &'static str, Range)> {
        match *self {
            Self::Steady => Vec::new(),
            Self::Linear { onset, change } | Self::Quadratic { onset, change } => {
                vec![("onset", "run", onset), ("change", "sigma", change)]
            }
            Self::Exponential {
                onset,
                change,
                time_constant,
            } => vec![
                ("onset", "run", onset),
                ("change", "sigma", change),
                ("time_constant", "run", time_constant),
            ],
            Self::SawTooth {
                period_days,
                height,
            } => {
                vec![("period", "d", period_days), ("height", "sigma", height)]
            }
            Self::Step { at, size } => vec![("at", "run", at), ("size", "sigma", size)],
            Self::Stuck { at } | Self::ReferenceDying { at } => vec![("at", "run", at)],
            Self::Spikes {
                every_days, height, ..
            } => {
                vec![("every", "d", every_days), ("height", "sigma", height)]
            }
            Self::DailyCycle { amplitude } => vec![("amplitude", "sigma", amplitude)],
            Self::DataGap { at, length_days } => {
                vec![("at", "run", at), ("length", "d", length_days)]
            }
        }
    }

    /// Draws the parameters for the instrument at `position`, for a run laid out over `days`.
    #[must_use]
    pub fn draw(&self, instrument: &Instrument, position: usize, seed: u64, days: f64) -> Planted {
        let mut source = Draw::new(seed, position, Duty::Parameters);
        let sign = if self.is_signed() { source.sign() } else { 1.0 };
        let drawn: Vec<Drawn> = self
            .ranges()
            .into_iter()
            .map(|(name, counted_in, range)| {
                let drawn = source.from(range);
                let (value, unit) = match counted_in {
                    "sigma" => (sign * drawn * instrument.noise, instrument.unit),
                    "run" => (drawn * days, "d"),
                    _ => (drawn, "d"),
                };
                Drawn {
                    name,
                    value,
                    unit,
                    range,
                }
            })
            .collect();
        let phase = source.unit();
        let value = |name: &str| {
            drawn
                .iter()
                .find(|d| d.name == name)
                .map_or(0.0, |d| d.value)
        };
        let curve = self.curve(&value, phase, days);
        let disturbance = self.disturbance(&value);
        Planted {
            curve,
            disturbance,
            drawn,
        }
    }

    /// Whether its sizes may have either sign; spikes draw theirs one by one.
    fn is_signed(&self) -> bool {
        !matches!(self, Self::Spikes { .. } | Self::DailyCycle { .. })
    }

    /// The systematic error with the drawn values.
    fn curve(&self, value: &dyn Fn(&str) -> f64, phase: f64, days: f64) -> Curve {
        let onset = value("onset");
        let change = value("change");
        match self {
            Self::Linear { .. } => Curve::Linear {
                onset,
                rate: change / (days - onset),
            },
            Self::Exponential { .. } => Curve::Exponential {
                onset,
                change,
                time_constant: value("time_constant"),
            },
            Self::Quadratic { .. } => Curve::Quadratic {
                onset,
                factor: change / ((days - onset) * (days - onset)),
            },
            Self::SawTooth { .. } => Curve::SawTooth {
                period: value("period"),
                height: value("height"),
            },
            Self::Step { .. } => Curve::Step {
                at: value("at"),
                size: value("size"),
            },
            Self::DailyCycle { .. } => Curve::DailyCycle {
                amplitude: value("amplitude"),
                phase,
            },
            _ => Curve::None,
        }
    }

    /// What happens to readings with the drawn values.
    fn disturbance(&self, value: &dyn Fn(&str) -> f64) -> Disturbance {
        let at = value("at");
        match *self {
            Self::Stuck { .. } => Disturbance::Stuck { at },
            Self::Spikes { longest, .. } => Disturbance::Spikes {
                every: value("every"),
                height: value("height"),
                longest,
            },
            Self::ReferenceDying { .. } => Disturbance::ReferenceDying { at },
            Self::DataGap { .. } => Disturbance::DataGap {
                from: at,
                to: at + value("length"),
            },
            _ => Disturbance::None,
        }
    }
}
