//! The recent history of a `valid_when` gate: whether it was open at an instant.
//!
//! A gate that repeats its state with every message costs no memory: once nothing can come between
//! two events any more, the later one is dropped if it says the same. (Not before: a late event of
//! the other state holds only until the next message.)
//!
//! Bounded: at most [`CAPACITY`] events; when it is full the oldest is forgotten, and the state
//! before it is unknown from then on.

use crate::event::{Gate, RefusedReason};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;

/// Most events that are kept.
const CAPACITY: usize = 4096;

/// Whether a reference held, over time. Shut before the first event.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct GateHistory {
    /// State from each instant on.
    changes: BTreeMap<Timestamp, bool>,
    /// State before the first remembered change.
    before: bool,
    /// Instant of the newest event forgotten for lack of room.
    forgotten: Option<Timestamp>,
    newest: Option<Timestamp>,
    /// Up to this instant, repetitions have been dropped.
    merged: Option<Timestamp>,
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
    /// harms more than a missing one, and the order of arrival must not decide. `lateness` as in
    /// [`GateHistory::check`].
    pub(crate) fn insert(&mut self, gate: &Gate, lateness: Duration) {
        self.changes
            .entry(gate.phenomenon)
            .and_modify(|open| *open &= gate.open)
            .or_insert(gate.open);
        self.newest = self.newest.max(Some(gate.phenomenon));
        self.merge(lateness);
        if self.changes.len() > CAPACITY
            && let Some((at, open)) = self.changes.pop_first()
        {
            self.before = open;
            self.forgotten = Some(at);
        }
    }

    /// Whether it was open at `time`; `None` where that was forgotten.
    pub(crate) fn is_open(&self, time: Timestamp) -> Option<bool> {
        if self.forgotten.is_some_and(|edge| time < edge) {
            return None;
        }
        Some(self.state_at(time))
    }

    /// State at `time`, from what is remembered.
    fn state_at(&self, time: Timestamp) -> bool {
        let last = self.changes.range(..=time).next_back();
        last.map_or(self.before, |(_, &open)| open)
    }

    /// Drops repetitions that nothing can come before any more.
    fn merge(&mut self, lateness: Duration) {
        let Some(edge) = self.newest.map(|newest| newest.minus(lateness)) else {
            return;
        };
        if self.merged.is_some_and(|merged| merged >= edge) {
            return;
        }
        let from = self.merged.unwrap_or(Timestamp(i64::MIN));
        let mut state = self.state_at(from.minus(Duration(1)));
        let mut repetitions = Vec::new();
        for (&at, &open) in self.changes.range(from..edge) {
            if open == state {
                repetitions.push(at);
            }
            state = open;
        }
        for at in repetitions {
            self.changes.remove(&at);
        }
        self.merged = Some(edge);
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
        assert_eq!(gate.is_open(Timestamp(0)), Some(false));
        gate.insert(&event(20, false), Duration(10));
        gate.insert(&event(10, true), Duration(10));
        let open: Vec<bool> = [9, 10, 19, 20, 21]
            .iter()
            .map(|&t| gate.is_open(Timestamp(t)).unwrap())
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
            gate.insert(&event(10, first), Duration(10));
            gate.insert(&event(10, second), Duration(10));
            assert_eq!(gate.is_open(Timestamp(10)), Some(false));
        }
    }

    #[test]
    fn a_full_history_does_not_know_what_it_forgot() {
        let mut gate = GateHistory::default();
        let far = Duration(i64::MAX);
        for time in (0..).take(CAPACITY + 2) {
            gate.insert(&event(10 * time, time != 1), far);
        }
        assert_eq!(gate.changes.len(), CAPACITY);
        let open = [9, 10, 19, 20].map(|time| gate.is_open(Timestamp(time)));
        assert_eq!(open, [None, Some(false), Some(false), Some(true)]);
        assert_eq!(gate.check(&event(10, true), far), Err(RefusedReason::Late));
    }

    #[test]
    fn a_state_repeated_for_ever_costs_no_memory() {
        let mut gate = GateHistory::default();
        for time in 0..3 * i64::try_from(CAPACITY).unwrap() {
            gate.insert(&event(time, time >= 100), Duration(5));
        }
        assert!(gate.changes.len() <= 8, "{}", gate.changes.len());
        let open = [0, 99, 100].map(|time| gate.is_open(Timestamp(time)));
        assert_eq!(open, [Some(false), Some(false), Some(true)]);
    }

    #[test]
    fn a_late_event_between_repetitions_holds_until_the_next_message() {
        let mut gate = GateHistory::default();
        for (time, open) in [(0, true), (10, true), (20, true), (15, false), (40, true)] {
            gate.insert(&event(time, open), Duration(10));
        }
        let open = [14, 15, 19, 20].map(|time| gate.is_open(Timestamp(time)));
        assert_eq!(open, [Some(true), Some(false), Some(false), Some(true)]);
    }
}
