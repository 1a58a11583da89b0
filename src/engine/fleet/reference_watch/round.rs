//! One round: each channel's newest vote about the reference, gathered until all those have voted
//! that did in the last one, until one votes a second time, or until the others had time enough.

use super::Vote;
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Fewest channels that can outvote a reference.
pub(crate) const QUORUM: usize = 3;

/// The votes gathered so far.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Round {
    /// By position of the channel.
    pub(super) votes: BTreeMap<u32, Vote>,
    /// When the others have had time enough.
    pub(super) deadline: Option<Timestamp>,
}

/// What a complete round comes to.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Tally {
    /// Channels that voted.
    pub(super) channels: usize,
    /// Median of the standardised innovations.
    pub(super) score: f64,
    /// Median of the innovations, in the channels' unit.
    pub(super) shift: f64,
    /// Median of their standard deviations, in the channels' unit.
    pub(super) sd: f64,
    /// The oldest instant voted about.
    pub(super) from: Timestamp,
    /// The newest.
    pub(super) to: Timestamp,
}

impl Round {
    /// Takes a vote at `now`; the others have `patience` from the first.
    pub(super) fn take(&mut self, channel: u32, vote: Vote, now: Timestamp, patience: Duration) {
        self.votes.insert(channel, vote);
        self.deadline.get_or_insert(now.plus(patience));
    }

    /// What the votes come to; `None` without any.
    pub(super) fn tally(&self) -> Option<Tally> {
        let times = self.votes.values().map(|vote| vote.time);
        let of =
            |part: fn(&Vote) -> f64| median(&mut self.votes.values().map(part).collect::<Vec<_>>());
        Some(Tally {
            channels: self.votes.len(),
            score: of(|vote| vote.innovation / vote.sd),
            shift: of(|vote| vote.innovation),
            sd: of(|vote| vote.sd),
            from: times.clone().min()?,
            to: times.max()?,
        })
    }
}

/// Middle value, the mean of the two middle ones of an even number; 0 of nothing.
pub(super) fn median(values: &mut [f64]) -> f64 {
    values.sort_unstable_by(f64::total_cmp);
    let half = values.len() / 2;
    match (values.get(half.wrapping_sub(1)), values.get(half)) {
        (Some(below), Some(above)) if values.len().is_multiple_of(2) => 0.5 * (below + above),
        (_, Some(middle)) => *middle,
        _ => 0.0,
    }
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    #[test]
    fn the_middle_of_few_values() {
        assert_eq!(median(&mut []), 0.0);
        assert_eq!(median(&mut [3.0]), 3.0);
        assert_eq!(median(&mut [4.0, 1.0]), 2.5);
        assert_eq!(median(&mut [9.0, 1.0, 2.0]), 2.0);
    }
}
