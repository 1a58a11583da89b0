//! What follows from a step: the stretch is closed, the step is told, an alarm is raised.

use super::breaks::Finding;
use super::closing::Closing;
use super::screening::Innovation;
use super::stretch::{Carries, Stretch};
use super::{Channel, Scene};
use crate::event::{Output, Step};
use crate::report::Report;
use crate::setup::ChannelSetup;
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// What lies no further apart belongs to the same visit of a person to a sensor: a working day. A
/// step so long after a service was its doing (the sensor was out of its place, and warmed up), and
/// a check so long after a cleaning is about what the cleaning left.
pub(super) const VISIT: Duration = Duration::from_seconds(12 * 3600);

/// A stretch that a step ended.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Stepped {
    /// As it was before the step.
    ended: Stretch,
    /// The latest pair that may have been the first after the step.
    latest: Timestamp,
}

impl Stepped {
    /// The stretch that the step ended.
    pub(super) fn ended(&self) -> &Stretch {
        &self.ended
    }
}

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
            self.stepped = None;
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
        let mut ended = self.stretch.clone();
        ended.rewind(found.first_after, &self.recent, scene.setup);
        let closing = Closing {
            at: found.first_after,
            from: found.first_after,
            carries: Carries::Noise {
                latest: found.pairs,
            },
            opening: &[],
            why: "the sensor stepped",
        };
        let reentered = self.close_stretch(&closing, scene, report);
        let latest = found.latest;
        self.stepped = Some(Box::new(Stepped { ended, latest }));
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
    /// Whether the step that began the present stretch was a service's doing: it was performed at
    /// the same visit, or no later than the step may have come.
    pub(super) fn explains_step(&self, performed: Timestamp) -> bool {
        let step = self.stepped.as_ref().zip(self.stretch.began());
        step.is_some_and(|(step, began)| {
            let about_then = performed <= step.latest && began.since(performed) <= VISIT;
            about_then && step.ended.began() <= Some(performed)
        })
    }

    /// A service explains the step that began the present stretch: the one before goes on, for the
    /// service to end. What came since the step waits in `recent` for the stretch that follows.
    pub(super) fn take_back_step(&mut self) {
        if let Some(step) = self.stepped.take() {
            self.stretch = self.stretch.taken_over_by(step.ended);
        }
    }
}

impl Stepped {
    /// Goes on under an edited setup in which its rows mean the same.
    pub(super) fn edit(&mut self, after: &ChannelSetup) {
        self.ended.edit(after);
    }
}
