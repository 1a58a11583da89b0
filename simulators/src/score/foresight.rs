//! How often the true crossing of a limit lies between the earliest and the latest instant that a
//! forecast names, over many seeds.

use crate::range::{Draw, Duty};
use holdtrue_engine::fit::factor::Factor;
use holdtrue_engine::fit::forecast::Line;
use serde::Serialize;
use std::ops::Range;

/// An even drift, watched for a while in white noise of known size, and the limit it drifts to.
/// Times in any unit, values one unit of time apart.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Watched {
    /// The error at time 0.
    pub level: f64,
    /// Its change per unit of time.
    pub rate: f64,
    /// How many values are seen, from time 0 on.
    pub values: u32,
    /// Standard deviation of the noise.
    pub noise: f64,
    /// The limit.
    pub limit: f64,
}

/// ê = 0.10 + 0.02·t from 30 points at t = 0 … 29, σ = 0.05 known, limit 1.0: it is crossed at
/// t = 45 (check value V31).
pub const EVEN_DRIFT: Watched = Watched {
    level: 0.10,
    rate: 0.02,
    values: 30,
    noise: 0.05,
    limit: 1.0,
};

/// Where the true crossing lay, in numbers of runs.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct Foresight {
    /// Before the earliest instant named.
    pub before: u32,
    /// Between earliest and latest.
    pub inside: u32,
    /// After the latest.
    pub after: u32,
    /// The drift was not resolved, so that no interval was named.
    pub unresolved: u32,
}

impl Foresight {
    /// Runs in which an interval was named and held the crossing, as a part of all runs.
    #[must_use]
    pub fn coverage(&self) -> f64 {
        let runs = self.before + self.inside + self.after + self.unresolved;
        f64::from(self.inside) / f64::from(runs)
    }
}

/// Forecasts once per seed, with the band ±k·u of the line through the values seen.
#[must_use]
pub fn study(watched: Watched, k: f64, seeds: Range<u64>) -> Foresight {
    let truth = (watched.limit - watched.level) / watched.rate;
    let mut foresight = Foresight::default();
    for seed in seeds {
        let line = line_seen(watched, seed).filter(|line| line.is_resolved(k));
        let from = f64::from(watched.values) - 1.0;
        let reached = |edge: f64| line?.reaches(watched.limit, edge, from);
        let count = match (reached(k), reached(-k)) {
            (Some(earliest), _) if truth < earliest => &mut foresight.before,
            (Some(_), Some(latest)) if truth > latest => &mut foresight.after,
            (Some(_), Some(_)) => &mut foresight.inside,
            _ => &mut foresight.unresolved,
        };
        *count += 1;
    }
    foresight
}

/// The line through one seed's values.
fn line_seen(watched: Watched, seed: u64) -> Option<Line> {
    let mut draw = Draw::new(seed, 0, Duty::Noise);
    let mut factor = Factor::new(2);
    for index in 0..watched.values {
        let t = f64::from(index);
        let error = watched.level + watched.rate * t + watched.noise * draw.normal();
        factor.insert(&[1.0, t, error]);
    }
    Line::through(&factor, watched.noise * watched.noise)
}
