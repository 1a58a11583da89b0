//! Silence of references and of the node: when the last value is too old, and how the alarms say
//! so.

use super::Fleet;
use crate::alarm::{Condition, Delays, Move};
use crate::event::{AlarmChange, AlarmKind, AlarmState, Output, Subject};
use crate::report::Report;
use crate::setup::{ReferenceId, ReferenceKind};
use crate::standing::AlarmStanding;
use crate::time::{Duration, Timestamp};

/// The timer is the delay: raised when it has run out, cleared by the first value.
const AT_ONCE: Delays = Delays { on: 1, off: 1 };

impl Fleet {
    /// The newest instant at which the reference's value was known. A group's is when a channel
    /// last got a median from it, that of several known values when a channel last met one.
    pub(super) fn last_known(&self, id: ReferenceId) -> Option<Timestamp> {
        let index = id.0 as usize;
        let reference = &self.references[index];
        match self.setup.references[index].kind {
            ReferenceKind::Measured => reference.values.newest(),
            ReferenceKind::Constant { gated: false, .. } => None,
            ReferenceKind::Constant { gated: true, .. } => {
                self.now.and_then(|now| reference.gate.last_open(now))
            }
            ReferenceKind::Checks { .. } | ReferenceKind::Group { .. } => self
                .routes
                .reference_users(id)
                .iter()
                .filter_map(|&user| self.channels[user].last_reference())
                .max(),
        }
    }

    /// A value or gate event of the reference came: its silence starts anew.
    pub(super) fn hear_reference(&mut self, id: ReferenceId, report: &mut Report<'_>) {
        self.watch_reference(id.0 as usize, report);
    }

    /// Since when the reference has been silent, as far as the node was listening.
    fn silent_since(&self, index: usize) -> Option<Timestamp> {
        let id = ReferenceId(u32::try_from(index).ok()?);
        let last = self.last_known(id).or(self.references[index].began)?;
        Some(self.pulse.resumed().map_or(last, |time| time.max(last)))
    }

    /// From when on the reference is to be watched.
    pub(super) fn watched_from(&self, index: usize) -> Option<Timestamp> {
        let round = self.references[index].watch.deadline();
        let due = [self.silence_due(index), self.certificate_due(index), round];
        due.into_iter().flatten().min()
    }

    /// When it becomes stale if nothing comes; now, while it is stale or before its silence has
    /// begun to count; never without a limit.
    fn silence_due(&self, index: usize) -> Option<Timestamp> {
        let limit = self.limit(index)?;
        let silent_since = self
            .silent_since(index)
            .filter(|_| !self.references[index].stale.is_raised());
        Some(silent_since.map_or(Timestamp(i64::MIN), |since| {
            since.plus(limit).plus(super::TICK)
        }))
    }

    /// The age limit that applies: a constant without a gate never goes stale.
    fn limit(&self, index: usize) -> Option<Duration> {
        let setup = &self.setup.references[index];
        match setup.kind {
            ReferenceKind::Constant { gated: false, .. } => None,
            _ => setup.stale_after,
        }
    }

    /// Looks at all that time may bring about for a reference.
    pub(super) fn watch_reference(&mut self, index: usize, report: &mut Report<'_>) {
        self.judge_silence(index, report);
        self.watch_certificate(index, report);
        self.watch_round(index, report);
        self.schedule_reference(index);
    }

    fn judge_silence(&mut self, index: usize, report: &mut Report<'_>) {
        let (Some(limit), Some(now)) = (self.limit(index), self.now) else {
            return;
        };
        let alive = self.pulse.alive(now, &self.routes);
        let began = &mut self.references[index].began;
        began.get_or_insert(alive);
        let Some(since) = self.silent_since(index) else {
            return;
        };
        let silent = alive.since(since);
        let stale = silent > limit;
        let alarm = &mut self.references[index].stale;
        if stale == alarm.is_raised() {
            return;
        }
        let condition = if stale {
            Condition::Holds
        } else {
            Condition::Gone
        };
        if let Some(step) = alarm.evaluate(condition, now, AT_ONCE) {
            let id = ReferenceId::at(index);
            let name = &self.setup.references[index].name;
            report.say(stale_change(id, name, step, now, silent, limit));
            self.tell_channels(index, report);
        }
    }
}

fn stale_change(
    id: ReferenceId,
    name: &str,
    step: Move,
    now: Timestamp,
    silent: Duration,
    limit: Duration,
) -> Output {
    let text = if step.state == AlarmState::Normal {
        format!("reference {name} gives values again")
    } else {
        format!(
            "reference {name} has given no value for {:.1} h (limit {:.1} h); its channels hold \
             their last correction for a limited time; look at the reference and its link",
            hours(silent),
            hours(limit)
        )
    };
    Output::Alarm(AlarmChange {
        subject: Subject::Reference(id),
        kind: AlarmKind::ReferenceStale,
        state: step.state,
        at: now,
        since: step.since,
        value: hours(silent),
        limit: hours(limit),
        unit: "h".to_owned(),
        text,
    })
}

/// The alarm change of the whole node's silence.
pub(super) fn node_gap(step: Move, now: Timestamp, arrival: Timestamp, limit: Duration) -> Output {
    let silent = now.since(arrival);
    let text = if step.state == AlarmState::Normal {
        "readings arrive again".to_owned()
    } else {
        format!(
            "nothing has arrived from any source for {:.2} h; look at the broker and the \
             network first, then at the sensors",
            hours(silent)
        )
    };
    Output::Alarm(AlarmChange {
        subject: Subject::Node,
        kind: AlarmKind::DataGap,
        state: step.state,
        at: now,
        since: step.since,
        value: hours(silent),
        limit: hours(limit),
        unit: "h".to_owned(),
        text,
    })
}

/// The alarm change of the whole node when nobody asks about its silence any more.
pub(super) fn node_gap_dismissed(now: Timestamp) -> Output {
    Output::Alarm(AlarmChange {
        subject: Subject::Node,
        kind: AlarmKind::DataGap,
        state: AlarmState::Normal,
        at: now,
        since: now,
        value: 0.0,
        limit: 0.0,
        unit: "h".to_owned(),
        text: "no channel or reference has a limit on silence any more".to_owned(),
    })
}

pub(super) fn data_gap_standing(subject: Subject, state: AlarmState) -> AlarmStanding {
    AlarmStanding {
        subject,
        kind: AlarmKind::DataGap,
        state,
    }
}

/// Hours as a float.
fn hours(duration: Duration) -> f64 {
    duration.seconds() / 3600.0
}
