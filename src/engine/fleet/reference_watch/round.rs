//! One round: each channel's newest vote about the reference, gathered until all those have voted
//! that did in the last one, until one votes a second time, or until the others had time enough.

use super::Vote;
use crate::median::median;
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
