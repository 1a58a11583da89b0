//! Carries out what a reference's channels have decided about it: one alarm on the reference,
//! pairs that go on or stay out, and channels that hold or take up again.

use super::reference_watch::{Turn, Vote};
use super::{Fleet, QUORUM};
use crate::alarm::{Condition, Delays};
use crate::event::{AlarmChange, AlarmKind, AlarmState, Cause, Output, Subject};
use crate::report::Report;
use crate::setup::{ReferenceId, ReferenceKind, Setup};
use crate::time::{Duration, Timestamp};
use crate::wording::readable;

/// The decision has its own delay.
const AT_ONCE: Delays = Delays { on: 1, off: 1 };

/// Whether a reference of this setup is judged by its channels: one whose values are measured, with
/// enough of them to outvote it.
pub(super) fn is_watched(setup: &Setup, reference: usize, users: &[usize]) -> bool {
    setup.references[reference].kind == ReferenceKind::Measured && users.len() >= QUORUM
}

/// How long the votes of these channels may lie apart: each may have to wait for its next
/// indication, and for stragglers before it.
pub(super) fn patience(setup: &Setup, users: &[usize]) -> Duration {
    let waits = users.iter().map(|&user| {
        let channel = &setup.channels[user];
        Duration(channel.lateness.0.saturating_add(channel.max_gap.0))
    });
    super::longest(waits)
}

impl Fleet {
    /// Gives the votes of a channel a hearing.
    pub(super) fn hear_votes(&mut self, channel: usize, now: Timestamp) {
        let reference = self.setup.channels[channel].reference.0 as usize;
        let patience = self.routes.patience(reference);
        let watch = &mut self.references[reference].watch;
        let voter = u32::try_from(channel).expect("as many channels as a u32 numbers");
        let hear = |vote: Vote| watch.hear(voter, vote, now, patience);
        self.channels[channel].cast_votes(hear);
        self.heard.insert(reference);
    }

    /// Carries out what was decided by votes that came.
    pub(super) fn carry_out(&mut self, report: &mut Report<'_>) {
        while let Some(index) = self.heard.pop_first() {
            self.carry_out_for(index, report);
            self.schedule_reference(index);
        }
    }

    /// The round in progress may be over.
    pub(super) fn watch_round(&mut self, index: usize, report: &mut Report<'_>) {
        let Some(now) = self.now else { return };
        self.references[index].watch.pass_time(now);
        self.carry_out_for(index, report);
    }

    /// Somebody answers for a reference: it is trusted from now on. What its channels held back
    /// stays out; whether they have moved since is theirs to find.
    pub(crate) fn trust_reference(&mut self, id: ReferenceId, report: &mut Report<'_>) {
        let index = id.0 as usize;
        if let Some(reference) = self.references.get_mut(index) {
            reference.watch.trust();
            self.carry_out_for(index, report);
            self.schedule_reference(index);
        }
    }

    /// Has everything that waits for a judgement of its reference decided on now: places and
    /// clocks are about to change.
    pub(super) fn settle_references(&mut self, report: &mut Report<'_>) {
        for index in 0..self.references.len() {
            self.references[index].watch.settle();
            self.carry_out_for(index, report);
        }
    }

    fn carry_out_for(&mut self, index: usize, report: &mut Report<'_>) {
        if !self.references[index].watch.has_decided() {
            return;
        }
        let id = ReferenceId::at(index);
        let (turns, rulings) = self.references[index].watch.decided();
        for turn in &turns {
            self.tell_turn(id, turn, report);
        }
        let users = self.routes.reference_users(id).to_vec();
        for ruling in &rulings {
            for &user in &users {
                self.visit(user, |channel, scene| channel.obey(ruling, scene, report));
            }
        }
        for turn in &turns {
            for &user in &users {
                self.visit(user, |channel, scene| match turn.since {
                    Some(since) => {
                        let shift = (turn.shift.abs(), turn.limit);
                        channel.distrust(since, shift, scene, report);
                    }
                    None => channel.heed_reference(scene, report),
                });
            }
        }
    }

    fn tell_turn(&mut self, id: ReferenceId, turn: &Turn, report: &mut Report<'_>) {
        let Some(now) = self.now else { return };
        let index = id.0 as usize;
        let (kind, alarm) = match turn.cause {
            Cause::ReferenceStuck => (AlarmKind::ReferenceStuck, &mut self.references[index].stuck),
            _ => (AlarmKind::ReferenceStep, &mut self.references[index].step),
        };
        let condition = match turn.since {
            Some(_) => Condition::Holds,
            None => Condition::Gone,
        };
        let Some(step) = alarm.evaluate(condition, now, AT_ONCE) else {
            return;
        };
        let unit = self.unit_of_reference(id);
        let (value, limit, unit) = match kind {
            AlarmKind::ReferenceStuck => (f64::from(turn.run), 1.0, "values".to_owned()),
            _ => (0.0 - turn.shift, turn.limit, unit),
        };
        report.say(Output::Alarm(AlarmChange {
            subject: Subject::Reference(id),
            kind,
            state: step.state,
            at: now,
            since: turn.since.unwrap_or(step.since),
            value: value + 0.0,
            limit,
            text: text(&self.setup.references[index].name, step.state, turn, &unit),
            unit,
        }));
    }

    /// The unit of a reference's values, which all its channels share.
    fn unit_of_reference(&self, id: ReferenceId) -> String {
        let user = self.routes.reference_users(id).first();
        user.map_or_else(String::new, |&user| self.setup.channels[user].unit.clone())
    }
}

fn text(name: &str, state: AlarmState, turn: &Turn, unit: &str) -> String {
    let Turn { channels, run, .. } = turn;
    if state == AlarmState::Normal {
        return format!("reference {name} agrees with its channels again");
    }
    let since = turn
        .since
        .map_or_else(String::new, |since| format!(" since {since}"));
    match turn.cause {
        Cause::ReferenceStuck => format!(
            "reference {name} has shown the same value {run} times in a row{since} while its \
             {channels} channels moved; they hold their corrections; look at the reference and \
             its link"
        ),
        _ => format!(
            "reference {name} moved by {} {unit} against all of its {channels} channels \
             together{since}; they hold their corrections; check the reference, and what else \
             they have in common",
            readable(0.0 - turn.shift)
        ),
    }
}
