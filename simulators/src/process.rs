//! The true value of a measured quantity: a level, a daily cycle and a slow wander.

use crate::instrument::{CADENCE_SECONDS, Instrument};
use crate::noise::Autoregressive;
use crate::range::{Draw, Duty};
use std::f64::consts::TAU;

/// The true value on the indications' grid of time; between two instants it runs straight.
#[derive(Clone, Debug)]
pub struct Process {
    level: f64,
    swing: f64,
    phase: f64,
    wander: Autoregressive,
    draw: Draw,
}

impl Process {
    /// The process that `instrument`, the one at `position`, measures.
    #[must_use]
    pub fn new(instrument: &Instrument, seed: u64, position: usize) -> Self {
        Self::of(
            (instrument.level, instrument.swing, instrument.wander),
            CADENCE_SECONDS,
            Draw::new(seed, position, Duty::Process),
        )
    }

    /// A process with this level, amplitude of its daily cycle and standard deviation of its
    /// wander, asked for its value every `cadence_seconds`.
    #[must_use]
    pub fn of(
        (level, swing, wander): (f64, f64, f64),
        cadence_seconds: i64,
        mut draw: Draw,
    ) -> Self {
        let phase = TAU * draw.unit();
        // Correlated over a day: ρ = exp(−cadence / 1 d).
        let memory = libm::exp(-(cadence_seconds as f64) / 86_400.0);
        Self {
            level,
            swing,
            phase,
            wander: Autoregressive::new(wander, memory),
            draw,
        }
    }

    /// The true value at the next grid instant, which is `day` days from the start.
    pub fn next(&mut self, day: f64) -> f64 {
        let cycle = self.swing * libm::sin(TAU * day + self.phase);
        self.level + cycle + self.wander.next(&mut self.draw)
    }
}
