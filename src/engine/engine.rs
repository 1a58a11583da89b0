//! The engine: one input event in, output events appended to a list owned by the caller, nothing
//! else.
//!
//! Call contract:
//! - The first input should be a [`Input::Setup`]; before it every reading is refused as unknown.
//! - Inputs come in the order in which they were received. A received time that goes backwards does
//!   no harm: the engine goes on with its own now, until ten in a row show that now was wrong; it
//!   then steps back to them and says so. In a recording, a phenomenon time far ahead of now is
//!   refused until another reading confirms it.
//! - Phenomenon times may come in any order within a channel's `lateness`; the pairs that result
//!   are the same. What is older than that behind its own source's newest reading is refused,
//!   counted, and changes nothing else.
//! - A refused input changes counters, notices and what is counted against a wrong clock only:
//!   [`Engine::state`] compares equal before and after.
//! - With [`Clock::Live`], send a tick at or after [`Engine::next_tick`]; with [`Clock::Readings`]
//!   ticks are ignored.

use crate::counters::Counters;
use crate::event::{Input, Output};
use crate::fleet::{Fleet, LeapWatch};
use crate::kept::Kept;
use crate::notice::NoticeLimiter;
use crate::report::Report;
use crate::setup::{Clock, Setup};
use crate::standing::Standing;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The whole engine, a plain value.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Engine {
    pub(crate) fleet: Fleet,
    pub(crate) counters: Kept<Counters>,
    pub(crate) notices: Kept<NoticeLimiter>,
    pub(crate) leaps: LeapWatch,
}

impl Engine {
    /// An engine without a configuration.
    #[must_use]
    pub fn new() -> Self {
        Self::default()
    }

    /// Takes one input and appends what follows from it. Cannot fail: bad input is an expected
    /// event with a reason.
    pub fn step(&mut self, input: &Input, outputs: &mut Vec<Output>) {
        let report = &mut Report {
            outputs,
            counters: &mut self.counters,
            notices: &mut self.notices,
            leaps: &mut self.leaps,
        };
        match input {
            Input::Setup(setup) => self.fleet.adopt(setup, report),
            Input::Reading(reading) => self.fleet.take_reading(reading, report),
            Input::Gate(gate) => self.fleet.take_gate(gate, report),
            Input::Refused(refused) => self.fleet.note_refused(refused, report),
            Input::Tick { now } => self.fleet.tick(*now, report),
            Input::Supplied(supplied) => self.fleet.take_supplied(supplied, report),
            Input::Order(order) => self.fleet.take_order(order, report),
        }
    }

    /// When the engine next wants a tick; `None` when nothing waits for time, and always with
    /// [`Clock::Readings`]. On whole seconds, so that many deadlines cost at most one recorded tick
    /// a second.
    #[must_use]
    pub fn next_tick(&self) -> Option<Timestamp> {
        match self.fleet.clock() {
            Clock::Live => self.fleet.next_wake().map(Timestamp::up_to_second),
            Clock::Readings => None,
        }
    }

    /// How things stand.
    #[must_use]
    pub fn standing(&self) -> Standing {
        self.fleet.standing(&self.counters)
    }

    /// The configuration in force; without channels before the first.
    #[must_use]
    pub fn setup(&self) -> &Setup {
        self.fleet.setup()
    }

    /// Newest time known, as the clock's kind says; `None` before the first accepted input.
    #[must_use]
    pub fn now(&self) -> Option<Timestamp> {
        self.fleet.now()
    }

    /// Everything that a refused input must not change: the state without counters, held-back
    /// notices and doubts about clocks.
    #[must_use]
    pub fn state(&self) -> &Fleet {
        &self.fleet
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_engine_without_a_configuration_waits_for_nothing_and_can_be_stored() {
        let engine = Engine::new();
        assert_eq!(engine.next_tick(), None);
        assert!(engine.standing().channels.is_empty());
        let stored = serde_json::to_string(&engine).unwrap();
        assert_eq!(serde_json::from_str::<Engine>(&stored).unwrap(), engine);
    }
}
