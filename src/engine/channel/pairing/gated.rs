//! Pairs with known values that hold only while their gates are open: the gates' states at the
//! instant that the indication answers to (its own time less `lag`) decide.

use super::{Fate, Found, Pair, Scene, awaited, missed, settles};
use crate::gate::GateHistory;
use crate::time::Timestamp;
use crate::track::Sample;

/// A known value behind a gate.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Check<'a> {
    /// The value, in the channel's unit.
    pub(crate) value: f64,
    /// When it holds.
    pub(crate) gate: &'a GateHistory,
}

/// Which of several known values holds at an instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Holding {
    /// This one, whose gate alone is open.
    One(f64),
    /// None: all gates are shut.
    None,
    /// There is no telling: a gate's state was forgotten, or several are open at once.
    Unknown,
}

/// Which of the known values holds at `instant`.
pub(crate) fn holding(checks: &[Check<'_>], instant: Timestamp) -> Holding {
    let mut holding = Holding::None;
    for check in checks {
        holding = match (check.gate.is_open(instant), holding) {
            (Some(false), before) => before,
            (Some(true), Holding::None) => Holding::One(check.value),
            (Some(true) | None, _) => return Holding::Unknown,
        };
    }
    holding
}

pub(super) fn resolve(sample: &Sample, scene: &Scene<'_>, found: &mut Vec<Found>) -> Fate {
    let instant = awaited(sample, scene);
    // With a negative lag the gates' events for it come after the indication itself.
    let settled = settles(sample, scene).max(instant.plus(scene.setup.lateness));
    if scene.now < settled {
        return Fate::Waits(Some(settled));
    }
    match holding(&scene.checks, instant) {
        Holding::One(value) => found.push(Found::Pair(Pair::at(sample.time, sample.value, value))),
        Holding::None => {}
        Holding::Unknown => found.push(missed(sample)),
    }
    Fate::Done
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::event::Gate;
    use crate::setup::ReferenceId;
    use crate::time::Duration;

    #[test]
    fn the_value_whose_gate_alone_is_open_holds() {
        let mut gates = [GateHistory::default(), GateHistory::default()];
        for (gate, time, open) in [(0, 10, true), (0, 20, false), (1, 15, true), (1, 30, false)] {
            let event = Gate {
                reference: ReferenceId(0),
                received: Timestamp(time),
                phenomenon: Timestamp(time),
                open,
            };
            gates[gate].insert(&event, Duration::ZERO);
        }
        let checks =
            [(0.0, &gates[0]), (80.0, &gates[1])].map(|(value, gate)| Check { value, gate });
        let at = |time| holding(&checks, Timestamp(time));
        assert_eq!(at(9), Holding::None);
        assert_eq!(at(14), Holding::One(0.0));
        assert_eq!(at(15), Holding::Unknown, "both open contradict each other");
        assert_eq!(at(20), Holding::One(80.0));
        assert_eq!(at(30), Holding::None);
    }
}
