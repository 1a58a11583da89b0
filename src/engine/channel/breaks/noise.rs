//! What is known of the noise that a step must stand out from: its scale, how far one reading
//! predicts the next, and how much longer-lasting it is than that explains.
//!
//! *Whitening*: w = d − φ·d₋₁, with d the innovation's deviation from its recent mean (a fit that
//! lags behind a steady drift has innovations off zero; that is no step). φ is the lag-1
//! autocorrelation with Kendall's bias (1 + 3φ)/n added back.
//!
//! *Widening*: the variance of differences of adjacent block means of w, for blocks of 1, 2, 4 …
//! 64, against white noise, where it is var(w)/block. Slow noise (white + AR(1) 0.95) has more in
//! long blocks; the chart is widened by the root of the largest ratio V. Differences, so that drift
//! does not count as noise; each block length is drawn towards the next shorter one until it has
//! been seen often enough.
//!
//! Both together are what a mean of n readings has to be judged by: its variance is at most
//! σ²·min(1, Λ/n) with Λ = V·(1+φ)/(1−φ).
//!
//! Deviations are clipped, so that outliers leave no mark, and learned only when they are
//! [`DELAY`] pairs old, so that a step is found before it has become part of the noise. Own
//! derivation; the parts are textbook estimators.

use super::chart::CLIP;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Pairs after which an innovation is learned. A step of 3σ is found within some ten.
const DELAY: usize = 16;
/// Innovations that make a scale.
const ENOUGH: u32 = 16;
/// Innovations that scale and φ look back on …
const MEMORY: u32 = 1024;
/// … and their mean: short, since the lag of a fit behind a drift comes and goes with the degree.
const LEVEL_MEMORY: u32 = 64;
/// Readings that the variances of block means look back on.
const BLOCK_MEMORY: u32 = 4096;
/// Block lengths 1, 2, 4 … 64.
const LENGTHS: usize = 7;
/// Deviations are clipped at so many standard deviations before they are learned.
const LEARNED_CLIP: f64 = 3.0;
/// V is this before anything is known …
const PRIOR: f64 = 4.0;
/// … which weighs as much as so many pairs of blocks.
const PRIOR_BLOCKS: f64 = 4.0;
/// φ is never taken for more.
const HIGHEST: f64 = 0.98;
/// Readings that give a degree of freedom to the variance of a mean.
const PER_FREEDOM: f64 = 8.0;

/// The state.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Noise {
    /// Standardised innovations not yet learned, oldest first.
    waiting: VecDeque<f64>,
    /// Learned so far, up to [`BLOCK_MEMORY`].
    count: u32,
    level: f64,
    variance: f64,
    /// Covariance of neighbours.
    lagged: f64,
    /// The deviation learned last.
    last: f64,
    /// Variance of the whitened.
    whitened: f64,
    blocks: [Blocks; LENGTHS],
}

/// Blocks of one length.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Blocks {
    /// Sum of the first of two blocks, once it is complete.
    first: Option<f64>,
    /// Pairs of blocks seen, up to what the memory holds.
    pairs: u32,
    /// Mean of ½·(difference of two sums)²/length: var(w) in white noise.
    variance: f64,
}

/// What a step is measured against.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Known {
    /// Mean of the innovations.
    pub(super) level: f64,
    /// Standard deviation of a reading of full weight.
    pub(super) sd: f64,
    /// φ.
    pub(super) phi: f64,
    /// Standard deviation of a whitened reading, widened: the chart's unit.
    pub(super) unit: f64,
    /// Λ.
    pub(super) inflation: f64,
    /// Degrees of freedom of the variance of a mean.
    pub(super) degrees_of_freedom: f64,
}

impl Noise {
    /// Takes note of a standardised innovation, to be learned later.
    pub(super) fn take(&mut self, innovation: f64) {
        self.waiting.push_back(innovation);
        if self.waiting.len() > DELAY
            && let Some(oldest) = self.waiting.pop_front()
        {
            self.learn(oldest);
        }
    }

    /// The innovations of a new stretch have nothing to do with the latest `latest` of the old one.
    pub(super) fn forget(&mut self, latest: usize) {
        let kept = self.waiting.len().saturating_sub(latest);
        self.waiting.truncate(kept);
    }

    /// What is known; `None` while that is too little, or there is no noise.
    pub(super) fn known(&self) -> Option<Known> {
        if self.count < ENOUGH || self.whitened <= 0.0 {
            return None;
        }
        let phi = self.phi();
        let widening = self.widening();
        let known = Known {
            level: self.level,
            sd: (self.whitened / (1.0 - phi * phi))
                .max(self.variance)
                .sqrt(),
            phi,
            unit: (self.whitened * widening).sqrt(),
            inflation: widening * (1.0 + phi) / (1.0 - phi),
            degrees_of_freedom: f64::from(self.count.min(MEMORY)) / PER_FREEDOM,
        };
        [known.sd, known.unit, known.inflation]
            .iter()
            .all(|number| number.is_finite() && *number > 0.0)
            .then_some(known)
    }

    fn phi(&self) -> f64 {
        if self.variance <= 0.0 {
            return 0.0;
        }
        let phi = self.lagged / self.variance;
        let n = f64::from(self.count.clamp(1, MEMORY));
        (phi + (1.0 + 3.0 * phi) / n).clamp(0.0, HIGHEST)
    }

    /// V ≥ 1.
    fn widening(&self) -> f64 {
        let mut expected = PRIOR;
        let mut largest = 1.0_f64;
        for blocks in &self.blocks {
            let seen = f64::from(blocks.pairs);
            let ratio = blocks.variance / self.whitened;
            expected = (seen * ratio + PRIOR_BLOCKS * expected) / (seen + PRIOR_BLOCKS);
            largest = largest.max(expected);
        }
        largest
    }

    fn learn(&mut self, innovation: f64) {
        let n = self.count + 1;
        if self.count == 0 {
            self.level = innovation;
        }
        let gain = 1.0 / f64::from(n.min(MEMORY));
        let limit = if self.count >= ENOUGH {
            LEARNED_CLIP * self.variance.sqrt()
        } else {
            f64::INFINITY
        };
        let deviation = (innovation - self.level).clamp(-limit, limit);
        let whitened = deviation - self.phi() * self.last;
        self.level += deviation / f64::from(n.min(LEVEL_MEMORY));
        self.variance += gain * (deviation * deviation - self.variance);
        if n > 1 {
            self.lagged += gain * (deviation * self.last - self.lagged);
        }
        self.last = deviation;
        let limit = if self.count >= ENOUGH {
            LEARNED_CLIP * self.whitened.sqrt()
        } else {
            f64::INFINITY
        };
        let whitened = whitened.clamp(-limit, limit);
        self.whitened += gain * (whitened * whitened - self.whitened);
        self.add_to_blocks(whitened);
        self.count = n.min(BLOCK_MEMORY);
    }

    fn add_to_blocks(&mut self, whitened: f64) {
        let mut sum = whitened;
        let mut length = 1_u32;
        for blocks in &mut self.blocks {
            let Some(first) = blocks.first.take() else {
                blocks.first = Some(sum);
                return;
            };
            let difference = sum - first;
            let memory = BLOCK_MEMORY / (2 * length);
            blocks.pairs = (blocks.pairs + 1).min(memory);
            let found = 0.5 * difference * difference / f64::from(length);
            blocks.variance += (found - blocks.variance) / f64::from(blocks.pairs);
            sum += first;
            length *= 2;
        }
    }
}

impl Known {
    /// A standardised innovation after the one before it, whitened, in the chart's unit. What came
    /// before is clipped: no correlation explains two in a row beyond that.
    pub(super) fn whiten(&self, innovation: f64, before: Option<f64>) -> f64 {
        let deviation = innovation - self.level;
        let reach = CLIP * self.sd;
        let whitened = match before {
            Some(before) => deviation - self.phi * (before - self.level).clamp(-reach, reach),
            None => deviation * (1.0 - self.phi * self.phi).sqrt(),
        };
        (whitened / self.unit).clamp(-CLIP, CLIP)
    }

    /// Upper bound of the variance of a mean of n neighbours, in units of a reading's.
    pub(super) fn of_mean(&self, n: f64) -> f64 {
        (self.inflation / n).min(1.0)
    }
}
