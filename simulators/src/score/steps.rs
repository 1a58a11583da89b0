//! Steps, found and invented: how often the engine calls noise or drift a step, and how soon and
//! where it finds a real one.
//!
//! One channel against a constant, so that every reading is a pair. Scales are in standard
//! deviations of the noise, times in readings.

use super::ground;
use crate::noise::Autoregressive;
use crate::range::{Draw, Duty};
use crate::sensor::START;
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Reading, Source, Step};
use holdtrue_engine::setup::{
    ChannelId, ChannelSetup, Clock, FitSetup, PairNoise, ReferenceKind, ReferenceSetup, Setup,
    WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};

/// Time between two readings.
const PERIOD: Duration = Duration::from_seconds(60);

/// Noise of standard deviation 1.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Kind {
    /// AR(1) with this lag-1 correlation; white at 0.
    Autoregressive(f64),
    /// Equal parts of variance: white, and AR(1) 0.95.
    Mixture,
}

/// A systematic error that changes smoothly, from `onset` windows after the beginning on. Sizes are
/// standard deviations per window.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Drift {
    /// None.
    None,
    /// a·t.
    Ramp(f64),
    /// a·t².
    Quadratic(f64),
    /// Ageing: fastest at its onset, with a per window there, e-folding in two windows.
    Exponential(f64),
    /// Growth of a film: a per window at the end of four windows, e-folding in one; then wiped off
    /// by nobody, so it stops growing.
    Growth(f64),
}

impl Drift {
    /// The error so many windows after the onset.
    fn at(self, windows: f64) -> f64 {
        let t = windows.max(0.0);
        match self {
            Self::None => 0.0,
            Self::Ramp(rate) => rate * t,
            Self::Quadratic(rate) => rate * t * t,
            Self::Exponential(rate) => 2.0 * rate * (1.0 - libm::exp(-0.5 * t)),
            Self::Growth(rate) => {
                let grown = libm::exp(t.min(4.0) - 4.0) - libm::exp(-4.0);
                let after = (t - 4.0).max(0.0);
                rate * (grown + 1.0 - libm::exp(-after))
            }
        }
    }
}

/// One run.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Run {
    /// The noise.
    pub kind: Kind,
    /// What it rides on.
    pub drift: Drift,
    /// Windows before the drift begins.
    pub onset: f64,
    /// Readings before a step, and its size.
    pub step: Option<(u32, f64)>,
    /// Window, in readings.
    pub window: u32,
    /// Readings in all.
    pub readings: u32,
    /// Seed of the noise.
    pub seed: u64,
}

/// The steps that the engine tells, each with the number of readings at which it does.
fn told(run: &Run) -> Vec<(u32, Step)> {
    let mut engine = Engine::new();
    let mut outputs = Vec::new();
    engine.step(&Input::Setup(Box::new(setup(run))), &mut outputs);
    let mut draw = Draw::new(run.seed, 0, Duty::Noise);
    let mut noise = Noise::new(run.kind);
    let mut steps = Vec::new();
    for reading in 0..run.readings {
        let windows = f64::from(reading) / f64::from(run.window) - run.onset;
        let jump = match run.step {
            Some((at, size)) if reading >= at => size,
            _ => 0.0,
        };
        let value = noise.next(&mut draw) + run.drift.at(windows) + jump;
        let time = time_of(reading);
        outputs.clear();
        engine.step(
            &Input::Reading(Reading {
                source: Source::Indication(ChannelId(0)),
                received: time,
                phenomenon: time,
                value,
                sequence: None,
                excluded: false,
            }),
            &mut outputs,
        );
        steps.extend(outputs.drain(..).filter_map(|output| match output {
            Output::Step(step) => Some((reading + 1, *step)),
            _ => None,
        }));
    }
    steps
}

/// When a reading was sampled.
fn time_of(reading: u32) -> Timestamp {
    START.plus(Duration(PERIOD.0 * i64::from(reading)))
}

/// How many readings an instant lies after another one.
fn readings_between(from: Timestamp, to: Timestamp) -> f64 {
    to.since(from).seconds() / PERIOD.seconds()
}

/// How often no step was called one.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct FalseSteps {
    /// Readings seen.
    pub readings: u64,
    /// Steps told.
    pub steps: u64,
}

impl FalseSteps {
    /// Per 100 000 readings.
    #[must_use]
    pub fn rate(&self) -> f64 {
        self.steps as f64 / self.readings as f64 * 1e5
    }
}

/// Runs without a step, with seeds from `first_seed` on.
#[must_use]
pub fn false_steps(run: Run, first_seed: u64, runs: u64) -> FalseSteps {
    let mut all = FalseSteps::default();
    for seed in first_seed..first_seed + runs {
        let run = Run { seed, ..run };
        all.steps += told(&run).len() as u64;
        all.readings += u64::from(run.readings);
    }
    all
}

/// How real steps were found.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Found {
    /// Readings from the step to its being told, sorted; infinite if it never was.
    delays: Vec<f64>,
    /// Readings by which the time told is off, sorted by size; of those found.
    off: Vec<f64>,
    /// Error of the size told, in its own u.
    size_errors: Vec<f64>,
    /// Share of those found whose interval of time holds the truth.
    pub held: f64,
    /// Steps told before there was one, in the readings until then.
    pub early: FalseSteps,
}

impl Found {
    /// The delay that this share of the runs does not exceed.
    #[must_use]
    pub fn delay(&self, share: f64) -> f64 {
        part(&self.delays, share)
    }

    /// The error in time that this share of the found does not exceed.
    #[must_use]
    pub fn off(&self, share: f64) -> f64 {
        part(&self.off, share)
    }

    /// The share of the runs in which it was found.
    #[must_use]
    pub fn found(&self) -> f64 {
        self.off.len() as f64 / self.delays.len().max(1) as f64
    }

    /// Mean square of the error of the size told, in its own u.
    #[must_use]
    pub fn size_square(&self) -> f64 {
        let squares: f64 = self.size_errors.iter().map(|error| error * error).sum();
        squares / self.size_errors.len().max(1) as f64
    }
}

fn part(sorted: &[f64], share: f64) -> f64 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a place in a list"
    )]
    let place = (share * sorted.len() as f64) as usize;
    sorted
        .get(place.min(sorted.len().saturating_sub(1)))
        .copied()
        .unwrap_or(f64::INFINITY)
}

/// Runs with a step, with seeds from `first_seed` on.
#[must_use]
pub fn found(run: Run, first_seed: u64, runs: u64) -> Found {
    let mut all = Found::default();
    let Some((at, size)) = run.step else {
        return all;
    };
    let mut held = 0_u32;
    for seed in first_seed..first_seed + runs {
        let sign = if seed % 2 == 0 { 1.0 } else { -1.0 };
        let run = Run {
            seed,
            step: Some((at, sign * size)),
            ..run
        };
        let steps = told(&run);
        all.early.steps += steps.iter().filter(|(reading, _)| *reading <= at).count() as u64;
        all.early.readings += u64::from(at);
        let Some((reading, step)) = steps.iter().find(|(reading, _)| *reading > at) else {
            all.delays.push(f64::INFINITY);
            continue;
        };
        all.delays.push(f64::from(reading - at));
        all.off
            .push(readings_between(time_of(at), step.first_after).abs());
        all.size_errors
            .push((step.size - sign * size) / step.size_u);
        held += u32::from((step.earliest..=step.latest).contains(&time_of(at)));
    }
    all.delays.sort_by(f64::total_cmp);
    all.held = f64::from(held) / all.off.len().max(1) as f64;
    all.off.sort_by(f64::total_cmp);
    all
}

struct Noise {
    white: f64,
    slow: Autoregressive,
}

impl Noise {
    fn new(kind: Kind) -> Self {
        let half = libm::sqrt(0.5);
        match kind {
            Kind::Autoregressive(memory) => Self {
                white: 0.0,
                slow: Autoregressive::new(1.0, memory),
            },
            Kind::Mixture => Self {
                white: half,
                slow: Autoregressive::new(half, 0.95),
            },
        }
    }

    fn next(&mut self, draw: &mut Draw) -> f64 {
        self.slow.next(draw) + self.white * draw.normal()
    }
}

/// A channel with the configuration's defaults, against a constant that always holds.
fn setup(run: &Run) -> Setup {
    let channel = ChannelSetup {
        fit: FitSetup {
            window: WindowLength::Pairs(run.window),
            noise: PairNoise::default(),
            ..ground::channel_setup(String::new(), 0, 1.0).fit
        },
        noise: 0.0,
        max_permissible_error: None,
        ..ground::channel_setup("sensor".to_owned(), 0, 1.0)
    };
    let reference = ReferenceSetup {
        kind: ReferenceKind::Constant {
            value: 0.0,
            gated: false,
        },
        ..ground::reference_setup("zero".to_owned(), 0.0)
    };
    Setup {
        node: "steps".to_owned(),
        clock: Clock::Readings,
        references: vec![reference],
        channels: vec![channel],
        ..Setup::default()
    }
}
