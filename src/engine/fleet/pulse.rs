//! The node's pulse: whether anything arrives at all. When everything falls silent it is the link,
//! not the sensors: one alarm on the node then stands for all, and the silence of each source
//! counts from the resumption.

use super::adopt::Routes;
use super::silence;
use crate::alarm::{Alarm, Condition, Delays};
use crate::event::Subject;
use crate::report::Report;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What was heard last from anywhere.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Pulse {
    /// Now when the last input was accepted.
    arrival: Option<Timestamp>,
    /// Newest accepted phenomenon time of any source, not ahead of now.
    newest: Option<Timestamp>,
    /// Phenomenon time of the first input after the node was silent.
    resumed: Option<Timestamp>,
    quiet: Alarm,
}

/// The timer is the delay: raised when it has run out, cleared by the first sign of life.
const AT_ONCE: Delays = Delays { on: 1, off: 1 };

impl Pulse {
    pub(super) fn alarm(&self) -> &Alarm {
        &self.quiet
    }

    /// See the field.
    pub(super) fn resumed(&self) -> Option<Timestamp> {
        self.resumed
    }

    /// The time up to which the node is known to have been listening. With a single source its own
    /// silence is all there is to judge, so now itself.
    pub(super) fn alive(&self, now: Timestamp, routes: &Routes) -> Timestamp {
        if routes.several_sources {
            self.newest.unwrap_or(now)
        } else {
            now
        }
    }

    /// Something was accepted.
    pub(super) fn hear(
        &mut self,
        phenomenon: Timestamp,
        now: Timestamp,
        routes: &Routes,
        report: &mut Report<'_>,
    ) {
        let phenomenon = phenomenon.min(now);
        let beyond = |earlier: Option<Timestamp>, later: Timestamp| {
            let limit = routes.quiet_after.filter(|_| routes.several_sources)?;
            earlier.filter(|&earlier| later.since(earlier) > limit)
        };
        // Either nothing arrived, or nothing was sampled: a backlog with a hole in it.
        let silent_from = beyond(self.arrival, now).or(beyond(self.newest, phenomenon));
        if let Some(from) = silent_from {
            self.resumed = Some(phenomenon);
            report.notice(now, Subject::Node, "resumed", || {
                format!("nothing from any source between {from} and {now}; resumed")
            });
        }
        self.arrival = Some(now);
        self.newest = self.newest.max(Some(phenomenon));
    }

    /// Now was wrong and steps back.
    pub(super) fn step_back(&mut self, to: Timestamp) {
        for time in [&mut self.arrival, &mut self.newest, &mut self.resumed] {
            *time = time.map(|time| time.min(to));
        }
    }

    /// A configuration that no longer asks about silence takes effect: the alarm goes, too.
    pub(super) fn edit(&mut self, routes: &Routes, now: Timestamp, report: &mut Report<'_>) {
        if routes.several_sources && routes.quiet_after.is_some() {
            return;
        }
        if std::mem::take(&mut self.quiet).is_raised() {
            report.say(silence::node_gap_dismissed(now));
        }
    }

    /// When the node counts as silent, if nothing arrives.
    pub(super) fn quiet_at(&self, routes: &Routes) -> Option<Timestamp> {
        if !routes.several_sources {
            return None;
        }
        // One nanosecond past the limit, where "longer than" becomes true.
        let past = |arrival: Timestamp| Some(arrival.plus(routes.quiet_after?).plus(super::TICK));
        self.arrival.and_then(past)
    }

    /// Raises or clears the node's own alarm.
    pub(super) fn watch(&mut self, now: Timestamp, routes: &Routes, report: &mut Report<'_>) {
        let (Some(arrival), Some(limit)) = (self.arrival, routes.quiet_after) else {
            return;
        };
        let quiet = routes.several_sources && now.since(arrival) > limit;
        if quiet == self.quiet.is_raised() {
            return;
        }
        let condition = if quiet {
            Condition::Holds
        } else {
            Condition::Gone
        };
        if let Some(step) = self.quiet.evaluate(condition, now, AT_ONCE) {
            report.say(silence::node_gap(step, now, arrival, limit));
        }
    }
}
