//! When which channel and which reference next waits for time, in order: so that a reading touches
//! those whose time has come and no others, however many there are.

use crate::time::Timestamp;
use serde::{Deserialize, Serialize};
use std::collections::BTreeSet;
use std::ops::Bound;

/// Who waits; in the order in which those due at once act.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub(super) enum Waiter {
    /// The reference of this position.
    Reference(usize),
    /// The channel of this position.
    Channel(usize),
}

/// Who waits until when. Each waits for at most one instant.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Agenda {
    order: BTreeSet<(Timestamp, Waiter)>,
    /// By position.
    references: Vec<Option<Timestamp>>,
    channels: Vec<Option<Timestamp>>,
}

impl Agenda {
    /// Lets someone wait until `time`, or for nothing; replaces what it waited for before.
    pub(super) fn put(&mut self, waiter: Waiter, time: Option<Timestamp>) {
        let (places, index) = match waiter {
            Waiter::Reference(index) => (&mut self.references, index),
            Waiter::Channel(index) => (&mut self.channels, index),
        };
        if places.len() <= index {
            places.resize(index + 1, None);
        }
        let before = std::mem::replace(&mut places[index], time);
        if before == time {
            return;
        }
        if let Some(before) = before {
            self.order.remove(&(before, waiter));
        }
        if let Some(time) = time {
            self.order.insert((time, waiter));
        }
    }

    /// Those whose time has come: first references, then channels, each by position.
    pub(super) fn due(&self, now: Timestamp) -> Vec<Waiter> {
        let mut due: Vec<Waiter> = self
            .order
            .range(..=(now, LAST))
            .map(|&(_, waiter)| waiter)
            .collect();
        due.sort_unstable();
        due
    }

    /// The earliest time after `now` that anyone waits for.
    pub(super) fn next(&self, now: Option<Timestamp>) -> Option<Timestamp> {
        let start = now.map_or(Bound::Unbounded, |now| Bound::Excluded((now, LAST)));
        let mut later = self.order.range((start, Bound::Unbounded));
        later.next().map(|&(time, _)| time)
    }
}

/// After all that wait for one instant.
const LAST: Waiter = Waiter::Channel(usize::MAX);

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_those_due_act_references_first() {
        let mut agenda = Agenda::default();
        agenda.put(Waiter::Channel(1), Some(Timestamp(5)));
        agenda.put(Waiter::Channel(0), Some(Timestamp(9)));
        agenda.put(Waiter::Reference(3), Some(Timestamp(9)));
        assert!(agenda.due(Timestamp(4)).is_empty());
        assert_eq!(agenda.due(Timestamp(8)), [Waiter::Channel(1)]);
        let all = [Waiter::Reference(3), Waiter::Channel(0), Waiter::Channel(1)];
        assert_eq!(agenda.due(Timestamp(9)), all);
        assert_eq!(agenda.next(None), Some(Timestamp(5)));
        assert_eq!(agenda.next(Some(Timestamp(5))), Some(Timestamp(9)));
        assert_eq!(agenda.next(Some(Timestamp(9))), None);
    }

    #[test]
    fn a_later_word_replaces_an_earlier_one() {
        let mut agenda = Agenda::default();
        agenda.put(Waiter::Channel(0), Some(Timestamp(5)));
        agenda.put(Waiter::Channel(0), Some(Timestamp(7)));
        assert!(agenda.due(Timestamp(6)).is_empty());
        agenda.put(Waiter::Channel(0), None);
        assert_eq!(agenda.next(None), None);
    }
}
