//! Draws a scenario's parameters from stated ranges, and keeps what was drawn.

use crate::behaviour::Drawn;
use crate::range::{Draw, Duty, Range};

/// The seeded source of one run's parameters.
#[derive(Clone, Debug)]
pub struct Chooser {
    source: Draw,
    seed: u64,
    place: usize,
    drawn: Vec<Drawn>,
}

impl Chooser {
    /// The source for the run of `scenario` with `seed`. Its numbers depend on these two only, so
    /// that a scenario that is added or moved leaves all others as they were.
    #[must_use]
    pub fn new(scenario: &str, seed: u64) -> Self {
        let place = place_of(scenario);
        Self {
            source: Draw::new(seed, place, Duty::Parameters),
            seed,
            place,
            drawn: Vec::new(),
        }
    }

    /// A value drawn evenly from `low` to `high`, in `unit`.
    pub fn value(&mut self, name: &'static str, unit: &'static str, low: f64, high: f64) -> f64 {
        let range = Range::new(low, high);
        let value = self.source.from(range);
        self.drawn.push(Drawn {
            name,
            value,
            unit,
            range,
        });
        value
    }

    /// The same with either sign.
    pub fn signed(&mut self, name: &'static str, unit: &'static str, low: f64, high: f64) -> f64 {
        let sign = self.source.sign();
        let value = sign * self.value(name, unit, low, high);
        if let Some(drawn) = self.drawn.last_mut() {
            drawn.value = value;
        }
        value
    }

    /// A normal deviate with mean 0 and this standard deviation: an error that is real but unknown
    /// to the engine, which is told the standard deviation alone.
    pub fn hidden(&mut self, name: &'static str, unit: &'static str, deviation: f64) -> f64 {
        let value = deviation * self.source.normal();
        self.drawn.push(Drawn {
            name,
            value,
            unit,
            range: Range::new(-deviation, deviation),
        });
        value
    }

    /// A source of random numbers for one duty of the thing at `index` in this run.
    #[must_use]
    pub fn stream(&self, index: usize, duty: Duty) -> Draw {
        Draw::new(self.seed, self.place + 1 + index, duty)
    }

    /// Everything drawn so far.
    #[must_use]
    pub fn drawn(&self) -> &[Drawn] {
        &self.drawn
    }
}

/// Where a scenario's streams of random numbers begin: a hash of its name (FNV-1a, 32 bits), with
/// room for a thousand things after it.
fn place_of(scenario: &str) -> usize {
    let hash = scenario.bytes().fold(0x811c_9dc5_u32, |hash, byte| {
        (hash ^ u32::from(byte)).wrapping_mul(0x0100_0193)
    });
    hash as usize * 1024
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_is_drawn_lies_in_its_range_and_follows_from_name_and_seed() {
        let draw = |scenario, seed| {
            let mut chooser = Chooser::new(scenario, seed);
            let size = chooser.signed("size", "sigma", 2.0, 3.0);
            let at = chooser.value("at", "run", 0.1, 0.2);
            assert_eq!(chooser.drawn()[0].value.to_bits(), size.to_bits());
            assert!((2.0..=3.0).contains(&size.abs()) && (0.1..=0.2).contains(&at));
            (size.to_bits(), at.to_bits())
        };
        assert_eq!(draw("step", 1), draw("step", 1));
        assert_ne!(draw("step", 1), draw("step", 2));
        assert_ne!(draw("step", 1), draw("stuck", 1));
        let signs: Vec<bool> = (0..64)
            .map(|seed| f64::from_bits(draw("step", seed).0) > 0.0)
            .collect();
        assert!(signs.contains(&true) && signs.contains(&false));
    }
}
