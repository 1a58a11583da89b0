//! The record can't be written: nothing is taken, stepped or acknowledged until it can.
//!
//! `state` and an alarm say so. The alarm is the second document that is published unrecorded:
//! there is nothing to record it in. That it was raised and cleared is recorded afterwards.

use super::now;
use super::turn::Daemon;
use crate::broker::{Answer, BackOff, Publish, Token};
use crate::document;
use crate::record::RecordError;
use holdtrue_engine::time::Timestamp;
use tokio::time::Instant;

/// A pause.
pub(super) struct Pause {
    pub(super) why: String,
    pub(super) retry: Instant,
    since: Timestamp,
    back_off: BackOff,
    alarm: Alarm,
}

/// How far the alarm has come.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Alarm {
    Due,
    OnItsWay,
    Told,
}

impl Daemon {
    /// Stops taking anything, or goes on waiting.
    pub(super) fn pause_for(&mut self, error: &RecordError) {
        let why = error.to_string();
        let pause = self.pause.get_or_insert_with(|| {
            tracing::error!(
                why,
                "the record can't be written: nothing is taken or acknowledged until it can, the \
                 broker queues. Is the disk full or read-only?"
            );
            self.rhythm.change();
            Pause {
                why: why.clone(),
                retry: Instant::now(),
                since: now(),
                back_off: BackOff::default(),
                alarm: Alarm::Due,
            }
        });
        pause.why = why;
        let wait = pause.back_off.next_pause();
        pause.retry = Instant::now() + wait;
        tracing::debug!(next_try = ?wait, "record still can't be written");
    }

    /// Goes on.
    pub(super) fn end_pause(&mut self) {
        let Some(pause) = self.pause.take() else {
            return;
        };
        tracing::info!(cause = pause.why, "record can be written again; going on");
        self.rhythm.change();
        let (at, since) = (now(), pause.since);
        let text = format!(
            "the record could not be written from {} to {}: {}. Nothing was taken meanwhile; what \
             the broker kept is taken now",
            document::time_text(since),
            document::time_text(at),
            pause.why
        );
        let keeper = &mut self.shell.keeper;
        let cleared = document::alarm::record_paused(&keeper.setup().node, None, at, since);
        keeper.publish(cleared);
        keeper.tell(at, "record-paused", text);
    }

    /// Hands the alarm over while there is a pause.
    pub(super) fn hand_over_alarm(&mut self) {
        let Some(pause) = &mut self.pause else {
            return;
        };
        if pause.alarm != Alarm::Due || self.link.room() == 0 {
            return;
        }
        let node = &self.shell.keeper.setup().node;
        let (why, since) = (pause.why.as_str(), pause.since);
        let alarm = document::alarm::record_paused(node, Some(why), since, since);
        let publish = Publish {
            topic: &alarm.topic,
            payload: &alarm.payload,
            retain: true,
            ..Publish::default()
        };
        if self.link.publish(Token::Alarm, &publish) {
            pause.alarm = Alarm::OnItsWay;
        }
    }

    /// The broker answered the alarm.
    pub(super) fn settle_alarm(&mut self, answer: &Answer) {
        if let Some(pause) = &mut self.pause {
            pause.alarm = match answer {
                Answer::Taken | Answer::Never(_) => Alarm::Told,
                // With the next state document the broker is asked again.
                Answer::NotNow(_) => Alarm::Due,
            };
        }
    }

    /// The connection is gone: what was on its way may not have arrived.
    pub(super) fn note_alarm_lost(&mut self) {
        if let Some(pause) = &mut self.pause
            && pause.alarm == Alarm::OnItsWay
        {
            pause.alarm = Alarm::Due;
        }
    }
}
