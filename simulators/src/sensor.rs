//! One sensor and its reference at work: an endless stream of samples with their truth.

use crate::behaviour::disturbance::Disturber;
use crate::behaviour::{Planted, curve::Curve};
use crate::instrument::{CADENCE_SECONDS, Instrument};
use crate::noise::Autoregressive;
use crate::process::Process;
use crate::range::{Draw, Duty};
use crate::scenario::Kit;
use holdtrue_engine::time::{Duration, Timestamp};
use std::collections::VecDeque;

/// The start of every run: 2026-03-02T00:00:00Z, a Monday.
pub const START: Timestamp = Timestamp(1_772_409_600_000_000_000);

/// Seconds in a day.
const DAY_SECONDS: f64 = 86_400.0;

/// One value that is sent, with what only the simulator knows.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sample {
    /// When it was sampled.
    pub at: Timestamp,
    /// Position of the sensor in the scenario.
    pub sensor: usize,
    /// Whether it is a reference value; otherwise an indication.
    pub is_reference: bool,
    /// The value as sent.
    pub value: f64,
    /// Counts the values of this stream from 1.
    pub sequence: u64,
    /// The true value at that instant.
    pub true_value: f64,
    /// The part of the error that a correction can be expected to remove, or stuck and daily
    /// errors: everything but noise, rounding and spikes.
    pub systematic_error: f64,
}

impl Sample {
    /// The true error: value − true value, everything included.
    #[must_use]
    pub fn true_error(&self) -> f64 {
        self.value - self.true_value
    }
}

/// One sensor with its reference.
#[derive(Clone, Debug)]
pub struct Sensor {
    index: usize,
    instrument: Instrument,
    curve: Curve,
    process: Process,
    noise: Autoregressive,
    noise_draw: Draw,
    reference_draw: Draw,
    reference_bias: f64,
    disturber: Disturber,
    step: u32,
    last_true: f64,
    sent: u64,
    references_sent: u64,
    ready: VecDeque<Sample>,
}

impl Sensor {
    /// The sensor of `kit`, the one at `index` of its scenario.
    #[must_use]
    pub fn new(index: usize, kit: &Kit, planted: &Planted, seed: u64) -> Self {
        let instrument = kit.instrument;
        let draw = |duty| Draw::new(seed, kit.position, duty);
        let mut reference_draw = draw(Duty::Reference);
        let reference_bias = instrument.reference_common * reference_draw.normal();
        Self {
            index,
            instrument,
            curve: planted.curve,
            process: Process::new(&instrument, seed, kit.position),
            noise: Autoregressive::new(instrument.noise, instrument.memory),
            noise_draw: draw(Duty::Noise),
            reference_draw,
            reference_bias,
            disturber: Disturber::new(planted.disturbance, draw(Duty::Disturbance)),
            step: 0,
            last_true: 0.0,
            sent: 0,
            references_sent: 0,
            ready: VecDeque::new(),
        }
    }

    /// The next sample without taking it.
    pub fn peek(&mut self) -> Option<&Sample> {
        while self.ready.is_empty() {
            self.advance();
        }
        self.ready.front()
    }

    /// The next sample.
    pub fn take(&mut self) -> Option<Sample> {
        self.peek();
        self.ready.pop_front()
    }

    /// Goes on by one step of the indications' grid.
    fn advance(&mut self) {
        let seconds = i64::from(self.step) * CADENCE_SECONDS;
        let day = seconds as f64 / DAY_SECONDS;
        let true_value = self.process.next(day);
        // A reference value between two indications is due before the later of them.
        if self.instrument.reference_offset_seconds > 0 && self.step > 0 {
            self.refer(self.step - 1, true_value);
        }
        self.indicate(seconds, day, true_value);
        self.last_true = true_value;
        if self.instrument.reference_offset_seconds == 0 {
            self.refer(self.step, true_value);
        }
        self.step += 1;
    }

    /// Sends the indication of this instant, unless the sensor is silent.
    fn indicate(&mut self, seconds: i64, day: f64, true_value: f64) {
        let noise = self.noise.next(&mut self.noise_draw);
        // No minus before a zero.
        let systematic = self.curve.error(day) + 0.0;
        let clean = true_value + systematic + noise;
        let step_days = CADENCE_SECONDS as f64 / DAY_SECONDS;
        let Some(value) = self.disturber.indication(day, step_days, clean) else {
            return;
        };
        let (low, high) = self.instrument.span;
        let value = rounded(value.clamp(low, high), self.instrument.decimals);
        self.sent += 1;
        let stuck = self.disturber.is_stuck(day);
        self.ready.push_back(Sample {
            at: START.plus(Duration::from_seconds(seconds)),
            sensor: self.index,
            is_reference: false,
            value,
            sequence: self.sent,
            true_value,
            systematic_error: if stuck {
                value - true_value
            } else {
                systematic
            },
        });
    }

    /// Sends the reference value that belongs to grid step `step`, if one is due; `next_true` is
    /// the true value at the end of the step that it falls into.
    fn refer(&mut self, step: u32, next_true: f64) {
        if !step.is_multiple_of(self.instrument.reference_every) {
            return;
        }
        let offset = self.instrument.reference_offset_seconds;
        let seconds = i64::from(step) * CADENCE_SECONDS + offset;
        let day = seconds as f64 / DAY_SECONDS;
        let noise = self.instrument.reference_each * self.reference_draw.normal();
        if !self.disturber.reference_arrives(day) {
            return;
        }
        let share = offset as f64 / CADENCE_SECONDS as f64;
        let true_value = if offset == 0 {
            next_true
        } else {
            self.last_true + share * (next_true - self.last_true)
        };
        let value = true_value + self.reference_bias + noise;
        self.references_sent += 1;
        self.ready.push_back(Sample {
            at: START.plus(Duration::from_seconds(seconds)),
            sensor: self.index,
            is_reference: true,
            value: rounded(value, self.instrument.decimals + 1),
            sequence: self.references_sent,
            true_value,
            systematic_error: self.reference_bias,
        });
    }
}

/// `value` rounded to `decimals`, as the nearest float to the decimal number, so that it prints
/// short.
fn rounded(value: f64, decimals: usize) -> f64 {
    let rounded: f64 = format!("{value:.decimals$}").parse().unwrap_or(value);
    // No minus before a zero.
    rounded + 0.0
}
