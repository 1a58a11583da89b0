//! Stated ranges and the seeded source that draws from them.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use serde::Serialize;

/// A stated range; values are drawn evenly from it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Range {
    /// Smallest value.
    pub low: f64,
    /// Largest value.
    pub high: f64,
}

impl Range {
    /// The range from `low` to `high`.
    #[must_use]
    pub const fn new(low: f64, high: f64) -> Self {
        Self { low, high }
    }

    /// Whether `value` lies inside, ends included.
    #[must_use]
    pub fn holds(self, value: f64) -> bool {
        (self.low..=self.high).contains(&value)
    }
}

/// A seeded source of random numbers.
///
/// Every sensor has one for each of its duties, so that a change to one part of a scenario leaves
/// all other numbers as they were.
#[derive(Clone, Debug)]
pub struct Draw(ChaCha8Rng);

/// What a sensor's numbers are drawn for.
#[derive(Clone, Copy, Debug)]
pub enum Duty {
    /// Its parameters.
    Parameters = 0,
    /// The true value.
    Process = 1,
    /// The indication's noise.
    Noise = 2,
    /// The reference.
    Reference = 3,
    /// Single disturbed readings.
    Disturbance = 4,
    /// How readings travel.
    Delivery = 5,
}

impl Draw {
    /// The source for one duty of the instrument at `position` in the catalogue.
    #[must_use]
    pub fn new(seed: u64, position: usize, duty: Duty) -> Self {
        let mut source = ChaCha8Rng::seed_from_u64(seed);
        source.set_stream(position as u64 * 8 + duty as u64);
        Self(source)
    }

    /// A value from `range`.
    pub fn from(&mut self, range: Range) -> f64 {
        range.low + (range.high - range.low) * self.unit()
    }

    /// A value from 0 (included) to 1 (excluded).
    pub fn unit(&mut self) -> f64 {
        self.0.random::<f64>()
    }

    /// Plus or minus one.
    pub fn sign(&mut self) -> f64 {
        if self.0.random::<bool>() { 1.0 } else { -1.0 }
    }

    /// A normal deviate with mean 0 and standard deviation 1.
    pub fn normal(&mut self) -> f64 {
        StandardNormal.sample(&mut self.0)
    }
}
