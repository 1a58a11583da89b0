//! Pairs that wait until their reference has been judged by all its channels (`reference_watch`).
//!
//! A pair that the fit expects something of is a vote about its reference, and waits. What has no
//! expectation yet has no vote: it goes on as soon as none waits before it, unless the reference is
//! under suspicion.

use super::pairing::Pair;
use super::{Channel, Scene, telling};
use crate::event::Cause;
use crate::fleet::{Ruling, Vote};
use crate::report::Report;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Most pairs that wait; the oldest of more go on. Far above what a reference's doubt can last.
const MOST: usize = 256;

/// The pairs that wait, in the order in which they were found.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Waiting {
    pairs: Vec<Waiter>,
}

#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Waiter {
    pair: Pair,
    vote: Option<Vote>,
    /// The round that it waits for; `None` before it was heard.
    round: Option<u64>,
}

impl Channel {
    /// Takes a pair, at once or when its reference has been judged.
    pub(super) fn offer(&mut self, pair: &Pair, scene: &Scene<'_>, report: &mut Report<'_>) {
        if !scene.watched {
            self.take_pair(pair, scene, report);
            return;
        }
        self.last_reference = self.last_reference.max(Some(pair.time));
        self.waiting.pairs.push(Waiter {
            pair: *pair,
            vote: self.stretch.vote(pair, scene.setup),
            round: None,
        });
        if self.waiting.pairs.len() > MOST {
            let oldest = self.waiting.pairs.remove(0);
            self.release(&oldest.pair, None, scene, report);
        }
        self.release_voteless(scene, report);
    }

    /// Lets those go on, or keeps them out, that have no vote and nobody waiting before them.
    fn release_voteless(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        let suspect = matches!(
            scene.trouble,
            Some(Cause::ReferenceStep | Cause::ReferenceStuck)
        );
        while let Some(first) = self.waiting.pairs.first()
            && first.vote.is_none()
        {
            let pair = self.waiting.pairs.remove(0).pair;
            self.release(&pair, suspect.then_some((0.0, 0.0)), scene, report);
        }
    }

    /// Whether a pair of this time is still to come out of pairing, or waits for a judgement.
    pub(super) fn waits(&self, time: Timestamp, scene: &Scene<'_>) -> bool {
        let mut waiting = self.waiting.pairs.iter();
        waiting.any(|waiter| waiter.pair.time == time) || self.pairing.is_making(time, scene)
    }

    /// Drops the pairs that wait and rest on something that no longer counts.
    pub(super) fn drop_votes(&mut self, rests: impl Fn(&Pair) -> bool) {
        self.waiting.pairs.retain(|waiter| !rests(&waiter.pair));
    }

    /// Whether a vote has found no hearing yet.
    pub(crate) fn has_votes(&self) -> bool {
        let newest = self.waiting.pairs.iter().rev();
        let mut unheard = newest.take_while(|waiter| waiter.round.is_none());
        unheard.any(|waiter| waiter.vote.is_some())
    }

    /// Gives its votes a hearing, which says for which round each is to wait.
    pub(crate) fn cast_votes(&mut self, mut hear: impl FnMut(Vote) -> u64) {
        for waiter in &mut self.waiting.pairs {
            if waiter.round.is_none() {
                waiter.round = waiter.vote.map(&mut hear);
            }
        }
    }

    /// A round has been decided on.
    pub(crate) fn obey(&mut self, ruling: &Ruling, scene: &Scene<'_>, report: &mut Report<'_>) {
        let (ruled, left) = std::mem::take(&mut self.waiting.pairs)
            .into_iter()
            .partition(|waiter: &Waiter| waiter.round == Some(ruling.round));
        self.waiting.pairs = left;
        if ruled.is_empty() {
            return;
        }
        for waiter in ruled {
            self.release(&waiter.pair, ruling.struck, scene, report);
        }
        self.release_voteless(scene, report);
        self.wake = self.next_wake(scene);
    }

    /// Lets a pair go on, or keeps it out.
    fn release(
        &mut self,
        pair: &Pair,
        struck: Option<(f64, f64)>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        match struck {
            None => self.take_pair(pair, scene, report),
            Some(shift) => {
                self.struck.note(pair.time);
                telling::tell_struck(pair, shift, scene, report);
            }
        }
    }
}
