//! Whether a reference repeats one value more often than its resolution explains, while its
//! channels see the process move.
//!
//! Neighbours in white noise σ at resolution q ≪ σ are equal with probability q/(2σ√π) (check
//! value V49); a run of m equal values then has that to the power m − 1. Both are learned from the
//! values before the run: q as the smallest difference, σ from the successive differences (so that
//! a process that moves slowly is none the worse), and where equal neighbours were more frequent
//! than the formula says, their frequency counts. What never varied is not judged.

use super::Vote;
use crate::median::median;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, VecDeque};

/// Successive differences that are remembered.
const RECENT: usize = 128;
/// Fewest of them that say something.
const ENOUGH: usize = 16;
/// Fewest equal values that count as stuck (common practice: three to five).
const FEWEST: u32 = 4;
/// A run as improbable as this is stuck.
const IMPROBABLE: f64 = 1e-6;
/// A run as improbable as this is odd.
const ODD: f64 = 0.02;
/// A run as long as this is improbable whatever equal neighbours are.
const LONGEST: u32 = 400;
/// Half the channels must have moved by so many standard deviations of their own since it began.
const MOVED: f64 = 3.0;

/// The run of equal values that a reference is in.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Repetition {
    /// Sizes of the successive differences before the run.
    differences: VecDeque<f64>,
    value: f64,
    /// Equal values in a row; 0 before the first value.
    run: u32,
    /// Time of the newest value.
    newest: Option<Timestamp>,
    /// Time of the run's second value, from which on it repeats.
    since: Option<Timestamp>,
    /// What each channel showed when the run began, with the standard deviation it had then.
    then: BTreeMap<u32, (f64, f64)>,
}

impl Repetition {
    /// Equal values in a row.
    pub(super) fn run(&self) -> u32 {
        self.run
    }

    /// Takes a value; one that comes late says nothing about the order.
    pub(super) fn take(&mut self, time: Timestamp, value: f64) {
        if self.newest.is_some_and(|newest| time <= newest) {
            return;
        }
        self.newest = Some(time);
        let difference = (value - self.value).abs();
        if self.run > 0 && difference <= 0.0 {
            self.run = self.run.saturating_add(1);
            self.since.get_or_insert(time);
            return;
        }
        if self.run > 0 {
            let zeros = usize::try_from(self.run - 1).unwrap_or(RECENT).min(RECENT);
            self.differences.extend(std::iter::repeat_n(0.0, zeros));
            self.differences.push_back(difference);
            let surplus = self.differences.len().saturating_sub(RECENT);
            self.differences.drain(..surplus);
        }
        self.value = value;
        self.run = 1;
        self.since = None;
        self.then.clear();
    }

    /// Looks at a round's votes: the time from which on the reference is stuck.
    pub(super) fn judge(&mut self, votes: &BTreeMap<u32, Vote>) -> Option<Timestamp> {
        let mut moves = Vec::new();
        for (&channel, vote) in votes {
            let (indication, sd) = *self
                .then
                .entry(channel)
                .or_insert((vote.indication, vote.sd));
            moves.push((vote.indication - indication).abs() / (sd * std::f64::consts::SQRT_2));
        }
        let since = self.since.filter(|_| self.run >= FEWEST)?;
        let improbable = self.probability()? < IMPROBABLE;
        (improbable && median(&mut moves) >= MOVED).then_some(since)
    }

    /// Whether the reference repeats itself more than it should: not enough to call it stuck, but
    /// enough to know what to make of it when all channels disagree with it.
    pub(super) fn is_odd(&self) -> bool {
        self.probability()
            .is_some_and(|probability| self.run > 1 && probability < ODD)
    }

    /// Probability of the run; `None` while too little is known.
    fn probability(&self) -> Option<f64> {
        let equal = self.equal_neighbours()?;
        let repeats = 1..self.run.min(LONGEST);
        Some(repeats.fold(1.0, |so_far, _| so_far * equal))
    }

    /// Probability that two neighbours are equal; `None` while too little is known.
    fn equal_neighbours(&self) -> Option<f64> {
        let count = self.differences.len();
        let moved = self.differences.iter().filter(|size| **size > 0.0);
        let resolution = moved.copied().fold(f64::INFINITY, f64::min);
        if count < ENOUGH || !resolution.is_finite() {
            return None;
        }
        let squares: f64 = self.differences.iter().map(|size| size * size).sum();
        let sd = (squares / count as f64 / 2.0).sqrt();
        let equal = self.differences.iter().filter(|size| **size <= 0.0).count();
        let seen = (equal + 1) as f64 / (count + 2) as f64;
        Some(by_resolution(resolution, sd).max(seen).min(MOST_EQUAL))
    }
}

/// Equality is not taken to be more normal than this, so that any run ends up improbable.
const MOST_EQUAL: f64 = 0.95;

/// q/(2σ√π).
fn by_resolution(resolution: f64, sd: f64) -> f64 {
    resolution * std::f64::consts::FRAC_2_SQRT_PI / (4.0 * sd)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check value V49: q = 0.1σ gives 0.0282.
    #[test]
    fn equal_neighbours_by_resolution() {
        assert!((by_resolution(0.1, 1.0) - 0.0282).abs() < 5e-5);
    }

    fn votes(indication: f64) -> BTreeMap<u32, Vote> {
        let vote = |channel| {
            let vote = Vote {
                time: Timestamp(0),
                innovation: 0.0,
                sd: 0.1,
                indication,
            };
            (channel, vote)
        };
        (0..3).map(vote).collect()
    }

    /// A reference that moves by 0.1 to 0.4, then repeats its last value `times` times.
    fn repeated(times: i64) -> Repetition {
        let mut repetition = Repetition::default();
        for time in 0..40 {
            let value = [0.0, 0.1, 0.4, 0.2][usize::try_from(time % 4).unwrap()];
            repetition.take(Timestamp(time), value);
        }
        assert_eq!(repetition.judge(&votes(5.0)), None);
        for time in 40..40 + times {
            repetition.take(Timestamp(time), 0.2);
        }
        repetition
    }

    #[test]
    fn a_run_is_stuck_only_while_the_channels_move() {
        // Half the differences being 0.1 to 0.3, equal neighbours are by formula about as probable
        // as one in seven: eight in a row are needed.
        let mut short = repeated(3);
        assert_eq!(short.judge(&votes(9.0)), None);
        let mut long = repeated(11);
        assert_eq!(long.judge(&votes(5.1)), None, "nothing moved");
        assert_eq!(long.judge(&votes(9.0)), Some(Timestamp(40)));
        long.take(Timestamp(99), 0.3);
        assert_eq!(long.judge(&votes(9.0)), None, "it moves again");
    }

    #[test]
    fn what_never_varied_is_not_judged() {
        let mut constant = Repetition::default();
        for time in 0..100 {
            constant.take(Timestamp(time), 7.0);
        }
        constant.judge(&votes(1.0));
        assert_eq!(constant.judge(&votes(9.0)), None);
    }
}
