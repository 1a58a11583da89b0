//! The alarm of a step. A step is an event that a person should look at, not a state that passes:
//! it stays raised until the next stretch begins (a service event, or another step, which is raised
//! anew) or until the window holds nothing from the stretch's beginning any more.

use super::super::Scene;
use super::{ChannelAlarms, Said, tell};
use crate::alarm::{Condition, Delays};
use crate::event::{AlarmKind, Step};
use crate::report::Report;
use crate::wording::readable;

/// The evidence is the delay.
const AT_ONCE: Delays = Delays { on: 1, off: 1 };

impl ChannelAlarms {
    /// Whether the step alarm is raised.
    pub(crate) fn step_is_raised(&self) -> bool {
        self.step.is_raised()
    }

    /// Raises the alarm of a step.
    pub(crate) fn stepped(&mut self, step: &Step, scene: &Scene<'_>, report: &mut Report<'_>) {
        let said = || raised(step, scene);
        let moved = self.step.evaluate(Condition::Holds, scene.now, AT_ONCE);
        tell(AlarmKind::Step, moved, said, scene, report);
    }

    /// The stretch that a step began has ended, or fills its window.
    pub(crate) fn step_is_past(&mut self, why: &str, scene: &Scene<'_>, report: &mut Report<'_>) {
        let said = || Said {
            value: 0.0,
            limit: 0.0,
            unit: scene.setup.unit.clone(),
            raised: String::new(),
            cleared: why.to_owned(),
        };
        let moved = self.step.evaluate(Condition::Gone, scene.now, AT_ONCE);
        tell(AlarmKind::Step, moved, said, scene, report);
    }
}

fn raised(step: &Step, scene: &Scene<'_>) -> Said {
    let unit = &scene.setup.unit;
    let expanded = readable(step.needed * step.size_u);
    let (size, size_u) = (readable(step.size), readable(step.size_u));
    Said {
        value: step.size,
        limit: step.needed * step.size_u,
        unit: unit.clone(),
        raised: format!(
            "the error stepped by {size} {unit} (u {size_u} {unit}; {expanded} {unit} make a \
             step) just before {}, from {} to {} {unit}: was the sensor serviced, knocked or \
             damaged, or did reference {} change? Corrections rest on what came since",
            step.first_after,
            readable(step.before),
            readable(step.after),
            scene.reference.name
        ),
        cleared: String::new(),
    }
}
