//! The state machine of one alarm, apart from the conditions that drive it.
//!
//! ```text
//!            condition held for `on` evaluations in a row
//!   Normal ───────────────────────────────────────────────▶ Unacknowledged
//!          ◀───────────────────────────────────────────────
//!            condition gone for `off` evaluations in a row
//! ```
//!
//! Evaluations are counted, not seconds, so that a replay at any speed moves the same way (ISA-18.2
//! on- and off-delay, from memory). Acknowledging, latching, shelving and suppression are further
//! moves of this machine: the conditions in `channel/conditions.rs` need not change for them.

use crate::event::AlarmState;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What one evaluation found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Condition {
    /// Past the limit.
    Holds,
    /// Inside the deadband, or not decidable: the alarm stays as it is and a run of evaluations
    /// ends.
    Between,
    /// Clear of limit and deadband.
    Gone,
}

/// How many evaluations in a row move an alarm.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Delays {
    /// To raise it.
    pub(crate) on: u32,
    /// To clear it.
    pub(crate) off: u32,
}

/// A move of the alarm.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Move {
    /// The new state.
    pub(crate) state: AlarmState,
    /// Time of the first evaluation of the run that caused it.
    pub(crate) since: Timestamp,
}

/// One alarm.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Alarm {
    state: AlarmState,
    /// Evaluations in a row that speak for the other state.
    run: u32,
    /// Time of the first of them.
    run_began: Timestamp,
}

impl Default for Alarm {
    fn default() -> Self {
        Self {
            state: AlarmState::Normal,
            run: 0,
            run_began: Timestamp(0),
        }
    }
}

impl Alarm {
    /// The state.
    pub(crate) fn state(&self) -> AlarmState {
        self.state
    }

    /// Whether it is raised.
    pub(crate) fn is_raised(&self) -> bool {
        self.state != AlarmState::Normal
    }

    /// Whether it counts evaluations that speak for another state.
    pub(crate) fn is_moving(&self) -> bool {
        self.run > 0
    }

    /// Takes one evaluation.
    pub(crate) fn evaluate(
        &mut self,
        condition: Condition,
        at: Timestamp,
        delays: Delays,
    ) -> Option<Move> {
        let (speaks_for_other, needed, other) = match self.state {
            AlarmState::Normal => (
                condition == Condition::Holds,
                delays.on,
                AlarmState::Unacknowledged,
            ),
            AlarmState::Unacknowledged => {
                (condition == Condition::Gone, delays.off, AlarmState::Normal)
            }
        };
        if !speaks_for_other {
            self.run = 0;
            return None;
        }
        if self.run == 0 {
            self.run_began = at;
        }
        self.run += 1;
        if self.run < needed {
            return None;
        }
        self.state = other;
        self.run = 0;
        Some(Move {
            state: other,
            since: self.run_began,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use Condition::{Between, Gone, Holds};

    const DELAYS: Delays = Delays { on: 3, off: 2 };

    type Moves = Vec<(i64, AlarmState, i64)>;

    /// Feeds conditions at times 0, 1, 2 … and lists the moves as (time, state, since).
    fn moves(conditions: &[Condition]) -> Moves {
        let mut alarm = Alarm::default();
        conditions
            .iter()
            .zip(0..)
            .filter_map(|(&condition, time)| {
                alarm
                    .evaluate(condition, Timestamp(time), DELAYS)
                    .map(|step| (time, step.state, step.since.0))
            })
            .collect()
    }

    #[test]
    fn delays_count_evaluations_in_a_row() {
        let raised = AlarmState::Unacknowledged;
        let cases: &[(&[Condition], Moves)] = &[
            (&[Holds, Holds], vec![]),
            (&[Holds, Holds, Holds], vec![(2, raised, 0)]),
            (&[Holds, Holds, Gone, Holds, Holds], vec![]),
            (&[Holds, Holds, Between, Holds, Holds], vec![]),
            (
                &[Holds, Holds, Holds, Holds, Gone, Gone],
                vec![(2, raised, 0), (5, AlarmState::Normal, 4)],
            ),
            (
                &[Holds, Holds, Holds, Gone, Between, Gone],
                vec![(2, raised, 0)],
            ),
        ];
        for (conditions, expected) in cases {
            assert_eq!(&moves(conditions), expected, "{conditions:?}");
        }
    }
}
