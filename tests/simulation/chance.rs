//! Everything that a run leaves to chance, from its seed.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng as _, SeedableRng as _};
use rand_distr::{Distribution as _, StandardNormal};

/// A source of chance.
pub(crate) struct Chance(ChaCha8Rng);

impl Chance {
    /// The one of this seed; `purpose` tells those of one run apart.
    pub(crate) fn new(seed: u64, purpose: u64) -> Self {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        random.set_stream(purpose);
        Self(random)
    }

    /// A whole number in 0 … `end` − 1; the bias of the remainder is far below one in a million.
    pub(crate) fn below(&mut self, end: usize) -> usize {
        let end = u64::try_from(end).expect("a small number");
        usize::try_from(self.0.next_u64() % end).expect("smaller than a usize")
    }

    /// A whole number from `low` to `high`, both included.
    pub(crate) fn between(&mut self, low: i64, high: i64) -> i64 {
        let width = usize::try_from(high - low + 1).expect("low before high");
        low + i64::try_from(self.below(width)).expect("smaller than the width")
    }

    /// True once in so many times.
    pub(crate) fn one_in(&mut self, times: usize) -> bool {
        self.below(times) == 0
    }

    /// One of these.
    pub(crate) fn pick<T: Copy>(&mut self, choices: &[T]) -> T {
        choices[self.below(choices.len())]
    }

    /// A byte.
    pub(crate) fn byte(&mut self) -> u8 {
        self.0.next_u64().to_le_bytes()[0]
    }

    /// A standard normal deviate.
    pub(crate) fn normal(&mut self) -> f64 {
        StandardNormal.sample(&mut self.0)
    }
}
