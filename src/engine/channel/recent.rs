//! The newest pairs of a channel with their fate, so that a stretch can be ended at an instant that
//! has passed: what came since then begins the next one. They also put back what a whole segment
//! takes with it when rows are taken out of a fit.
//!
//! In the order in which they came, across stretches: a service event told late may lie before the
//! step that it caused.

use super::pairing::Pair;
use crate::event::Rejection;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Most pairs remembered. A step is confirmed within some tens of pairs; a quarter of a window of
/// 512 is in reach for what people tell late.
pub(super) const REMEMBERED: usize = 128;

/// The newest pairs of a channel, oldest first.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Recent {
    pairs: VecDeque<Remembered>,
}

/// A pair and what became of it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Remembered {
    pub(super) pair: Pair,
    /// The stretch that it was offered to last.
    pub(super) stretch: u32,
    /// What kept it out of the fit; `None`: it entered.
    pub(super) rejected: Option<Rejection>,
}

impl Recent {
    /// Remembers a pair; the oldest of too many is forgotten.
    pub(super) fn push(&mut self, remembered: Remembered) {
        if self.pairs.len() == REMEMBERED {
            self.pairs.pop_front();
        }
        self.pairs.push_back(remembered);
    }

    /// All of them, in the order in which they came.
    pub(super) fn iter(
        &self,
    ) -> impl DoubleEndedIterator<Item = &Remembered> + ExactSizeIterator + Clone {
        self.pairs.iter()
    }

    /// Those that entered the fit of this stretch, in the order in which they did.
    pub(super) fn entered(
        &self,
        stretch: u32,
    ) -> impl DoubleEndedIterator<Item = &Remembered> + Clone {
        self.pairs.iter().filter(move |remembered| {
            remembered.stretch == stretch && remembered.rejected.is_none()
        })
    }

    /// Forgets all pairs of this stretch.
    pub(super) fn forget_stretch(&mut self, stretch: u32) {
        self.pairs
            .retain(|remembered| remembered.stretch != stretch);
    }

    /// Takes out those that are not older than `at`, in the order in which they came.
    pub(super) fn take_since(&mut self, at: Timestamp) -> Vec<Remembered> {
        self.take(|held| held.pair.time >= at)
    }

    /// The same for what is offered to the stretch after `ended`, and with it what a stretch was
    /// offered that was none: one begun by a step that a service explains.
    pub(super) fn take_for_next(&mut self, at: Timestamp, ended: u32) -> Vec<Remembered> {
        self.take(|held| held.pair.time >= at || held.stretch > ended)
    }

    fn take(&mut self, wanted: impl Fn(&Remembered) -> bool) -> Vec<Remembered> {
        let (taken, left) = std::mem::take(&mut self.pairs)
            .into_iter()
            .partition(wanted);
        self.pairs = left;
        Vec::from(taken)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn remembered(time: i64, stretch: u32) -> Remembered {
        Remembered {
            pair: Pair::at(Timestamp(time), 1.0, 0.0),
            stretch,
            rejected: None,
        }
    }

    #[test]
    fn the_oldest_is_forgotten() {
        let mut recent = Recent::default();
        for time in 0..200 {
            recent.push(remembered(time, 1));
        }
        assert_eq!(recent.iter().len(), REMEMBERED);
        assert_eq!(
            recent.iter().next().map(|first| first.pair.time),
            Some(Timestamp(72))
        );
    }

    #[test]
    fn taking_since_an_instant_leaves_the_older_ones_and_keeps_the_order() {
        let mut recent = Recent::default();
        for time in [1, 5, 3, 2, 6] {
            recent.push(remembered(time, 1));
        }
        let times = |pairs: Vec<Remembered>| -> Vec<i64> {
            pairs.iter().map(|held| held.pair.time.0).collect()
        };
        assert_eq!(times(recent.take_since(Timestamp(3))), [5, 3, 6]);
        assert_eq!(times(recent.iter().copied().collect()), [1, 2]);
        assert!(recent.take_since(Timestamp(3)).is_empty());
    }
}
