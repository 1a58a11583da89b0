//! The recent history of a `valid_when` gate: whether it was open at an instant.
//!
//! Bounded: at most [`CAPACITY`] changes; when it is full the oldest becomes the state before
//! everything.

use crate::event::{Gate, RefusedReason};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Most changes that are kept.
const CAPACITY: usize = 1024;

/// Whether a reference held, over time. Shut before the first event.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct GateHistory {
    /// State from each instant on.
    changes: BTreeMap<Timestamp, bool>,
    /// State before the first remembered change.
    before: bool,
    /// Instant of the newest forgotten change.
    forgotten: Option<Timestamp>,
    newest: Option<Timestamp>,
}

impl GateHistory {
    /// Whether the event may be taken.
    pub(crate) fn check(&self, gate: &Gate, lateness: Duration) -> Result<(), RefusedReason> {
        if self.changes.get(&gate.phenomenon) == Some(&gate.open) {
            return Err(RefusedReason::Duplicate);
        }
        let too_old = self
            .newest
            .is_some_and(|newest| gate.phenomenon < newest.minus(lateness));
        let beyond_memory = self.forgotten.is_some_and(|edge| gate.phenomenon <= edge);
        if too_old || beyond_memory {
            return Err(RefusedReason::Late);
        }
        Ok(())
    }

    /// Instant of the newest event ever taken.
    pub(crate) fn newest(&self) -> Option<Timestamp> {
        self.newest
    }

    /// Takes an event. Of two that contradict each other at one instant, shut wins: a wrong pair
    /// harms more than a missing one, and the order of arrival must not decide.
    pub(crate) fn insert(&mut self, gate: &Gate) {
        self.changes
            .entry(gate.phenomenon)
            .and_modify(|open| *open &= gate.open)
            .or_insert(gate.open);
        self.newest = self.newest.max(Some(gate.phenomenon));
        if self.changes.len() > CAPACITY
            && let Some((at, open)) = self.changes.pop_first()
        {
            self.before = open;
            self.forgotten = Some(at);
        }
    }

    /// Whether it was open at `time`.
    pub(crate) fn is_open(&self, time: Timestamp) -> bool {
        self.changes
            .range(..=time)
            .next_back()
            .map_or(self.before, |(_, &open)| open)
    }

    /// The newest instant up to `now` at which it was open; `None` if it never was.
    pub(crate) fn last_open(&self, now: Timestamp) -> Option<Timestamp> {
        let mut shut_from = None;
        for (&at, &open) in self.changes.range(..=now).rev() {
            if open {
                return Some(shut_from.unwrap_or(now));
            }
            shut_from = Some(at);
        }
        self.before.then_some(shut_from.unwrap_or(now))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::setup::ReferenceId;

    fn event(time: i64, open: bool) -> Gate {
        Gate {
            reference: ReferenceId(0),
            received: Timestamp(time),
            phenomenon: Timestamp(time),
            open,
        }
    }

    #[test]
    fn the_last_event_at_or_before_decides() {
        let mut gate = GateHistory::default();
        assert!(!gate.is_open(Timestamp(0)));
        gate.insert(&event(20, false));
        gate.insert(&event(10, true));
        let open: Vec<bool> = [9, 10, 19, 20, 21]
            .iter()
            .map(|&t| gate.is_open(Timestamp(t)))
            .collect();
        assert_eq!(open, [false, true, true, false, false]);
        assert_eq!(gate.last_open(Timestamp(15)), Some(Timestamp(15)));
        assert_eq!(gate.last_open(Timestamp(99)), Some(Timestamp(20)));
        assert_eq!(gate.last_open(Timestamp(5)), None);
    }

    #[test]
    fn contradiction_at_one_instant_means_shut_in_either_order() {
        for (first, second) in [(true, false), (false, true)] {
            let mut gate = GateHistory::default();
            gate.insert(&event(10, first));
            gate.insert(&event(10, second));
            assert!(!gate.is_open(Timestamp(10)));
        }
    }

    #[test]
    fn a_full_history_keeps_its_oldest_state() {
        let mut gate = GateHistory::default();
        for time in (0..).take(CAPACITY + 1) {
            gate.insert(&event(time, time == 0));
        }
        assert_eq!(gate.changes.len(), CAPACITY);
        assert!(gate.is_open(Timestamp(0)));
        let far = Duration(i64::MAX);
        assert_eq!(gate.check(&event(0, false), far), Err(RefusedReason::Late));
    }
}
