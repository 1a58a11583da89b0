//! What came of one channel in a run: what a person compares between two configurations.

use holdtrue_engine::event::{AlarmChange, AlarmState, Correction, Output, PairFate, Subject};
use holdtrue_engine::fit::Term;
use holdtrue_engine::setup::{ChannelId, Setup};
use holdtrue_engine::time::Timestamp;
use holdtrue_simulators::score::consumer::{Indicated, apply};
use std::collections::BTreeMap;

/// An alarm that was raised.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct AlarmAt {
    /// Its kind.
    pub kind: &'static str,
    /// When it was raised.
    pub at: Timestamp,
}

/// A change of the announced degree of the zero.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Change {
    /// When.
    pub at: Timestamp,
    /// The new degree.
    pub to: u8,
}

/// What came of one channel.
#[derive(Clone, Debug, Default)]
pub struct Account {
    /// Pairs that entered the fit.
    pub pairs: u64,
    /// Pairs that were kept out.
    pub kept_out: u64,
    /// Corrections that came into force.
    pub corrections: u64,
    /// Corrections that were taken back.
    pub withdrawn: u64,
    /// Alarms that were raised, in order.
    pub alarms: Vec<AlarmAt>,
    /// Changes of the announced degree, in order.
    pub degrees: Vec<Change>,
    /// Steps told, with the time of the change.
    pub steps: Vec<Timestamp>,
    /// The correction in force at the end.
    pub last: Option<Box<Correction>>,
    /// Of pairs made while a correction was in force: how many, and the sums of the squares of the
    /// error before and after correcting the indication by it.
    squares: (u64, f64, f64),
}

impl Account {
    /// Root mean square of the error of pairs, uncorrected and corrected by the correction that was
    /// in force when the pair was made, in the channel's unit; `None` where none was.
    #[must_use]
    pub fn errors(&self) -> Option<(f64, f64)> {
        let (count, before, after) = self.squares;
        let mean = |sum: f64| (sum / count as f64).sqrt();
        (count > 0).then(|| (mean(before), mean(after)))
    }

    fn note_error(&mut self, pair: &PairFate, setup: &Setup) {
        let Some(correction) = &self.last else { return };
        let channel = setup.channels.get(correction.channel.0 as usize);
        let Some(channel) = channel else { return };
        // Influence quantities are taken at their centre: the record of a pair does not hold them.
        let influence = correction.influences.first().map_or(0.0, |it| it.centre);
        let indicated = Indicated {
            at: pair.phenomenon,
            value: pair.indication,
            influence,
        };
        let Some(applied) = apply(correction, channel.lateness, indicated) else {
            return;
        };
        let error = pair.indication - pair.reference;
        let left = error + applied.correction;
        let (count, before, after) = self.squares;
        self.squares = (count + 1, before + error * error, after + left * left);
    }
}

/// Accounts by the name of the channel.
#[derive(Clone, Debug, Default)]
pub(super) struct Accounts {
    pub(super) by_channel: BTreeMap<String, Account>,
    /// Alarms of references and of the node.
    pub(super) others: Vec<(String, AlarmAt)>,
}

impl Accounts {
    /// The account of a channel; `None` if the configuration has no such.
    fn of(&mut self, id: ChannelId, setup: &Setup) -> Option<&mut Account> {
        let name = setup.channels.get(id.0 as usize)?.name.clone();
        Some(self.by_channel.entry(name).or_default())
    }

    /// Notes an output; `setup` is the one whose positions it bears. What is about no channel of it
    /// is passed over.
    pub(super) fn note(&mut self, output: &Output, setup: &Setup) {
        match output {
            Output::Alarm(alarm) if alarm.state == AlarmState::Unacknowledged => {
                self.note_alarm(alarm, setup);
            }
            Output::Pair(pair) => {
                let Some(account) = self.of(pair.channel, setup) else {
                    return;
                };
                if pair.rejected.is_some() {
                    account.kept_out += 1;
                } else {
                    account.pairs += 1;
                    account.note_error(pair, setup);
                }
            }
            Output::Correction(correction) => {
                if let Some(account) = self.of(correction.channel, setup) {
                    account.corrections += 1;
                    account.last = Some(correction.clone());
                }
            }
            Output::Withdrawn { channel, .. } => {
                if let Some(account) = self.of(*channel, setup) {
                    account.withdrawn += 1;
                    account.last = None;
                }
            }
            Output::Degree(change) if change.term == Term::Zero => {
                if let Some(account) = self.of(change.channel, setup) {
                    let (at, to) = (change.at, change.to);
                    account.degrees.push(Change { at, to });
                }
            }
            Output::Step(step) => {
                if let Some(account) = self.of(step.channel, setup) {
                    account.steps.push(step.first_after);
                }
            }
            _ => {}
        }
    }

    fn note_alarm(&mut self, alarm: &AlarmChange, setup: &Setup) {
        let raised = AlarmAt {
            kind: alarm.kind.code(),
            at: alarm.at,
        };
        if let Subject::Channel(id) = alarm.subject {
            if let Some(account) = self.of(id, setup) {
                account.alarms.push(raised);
            }
            return;
        }
        let name = crate::document::topic::subject_name(alarm.subject, setup);
        let name = name.unwrap_or_default().to_owned();
        self.others.push((name, raised));
    }
}
