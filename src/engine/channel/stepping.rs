//! What follows from a step: the stretch is closed, the step is told, an alarm is raised.

use super::breaks::Finding;
use super::screening::Innovation;
use super::stretch::Carries;
use super::{Channel, Scene};
use crate::event::{Output, Step};
use crate::report::Report;

impl Channel {
    /// Looks whether the sensor stepped, after a pair; if so, closes the stretch. A lock-out of the
    /// screen is looked into at once: where it was a step, it ends with the stretch, and one event
    /// raises one alarm.
    pub(super) fn watch_for_step(
        &mut self,
        innovation: Innovation,
        locks_out: bool,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let Some(confirmation) = scene.setup.steps else {
            return;
        };
        if self.alarms.step_is_raised() && self.stretch.fills_its_window() {
            let why = "a whole window has passed since the step";
            self.alarms.step_is_past(why, scene, report);
        }
        let evidence = (&self.stretch, &self.recent);
        let found = self
            .breaks
            .take(innovation, locks_out, evidence, confirmation, scene.setup);
        if let Some(found) = found {
            self.take_step(&found, scene, report);
        }
    }

    fn take_step(&mut self, found: &Finding, scene: &Scene<'_>, report: &mut Report<'_>) {
        let ended_stretch = self.stretch.number();
        let carries = Carries::Noise {
            latest: found.pairs,
        };
        let why = "the sensor stepped";
        let reentered = self.close_stretch(found.first_after, carries, why, scene, report);
        let step = Step {
            channel: scene.id,
            at: scene.now,
            last_before: found.last_before,
            first_after: found.first_after,
            earliest: found.earliest,
            latest: found.latest,
            size: found.size + 0.0,
            size_u: found.u,
            before: found.before + 0.0,
            after: found.before + found.size + 0.0,
            ratio: found.size.abs() / found.u,
            needed: found.needed,
            gain_over_bend: found.gain,
            ended_stretch,
            pairs: reentered.pairs,
            taken_back: reentered.taken_back,
        };
        self.alarms.stepped(&step, scene, report);
        report.say(Output::Step(Box::new(step)));
    }
}
