//! All channels and references of a node: routes each input to what it concerns, keeps what
//! channels share (recent readings, gates, references' alarms), and says what "now" is.
//!
//! Channels never touch each other: they read shared tracks, and only what arrives writes these.
//! Channels joined by a reference or a group form an island; nothing crosses islands but now.

mod adopt;
mod agenda;
mod certificate;
mod door;
mod known;
mod leap;
mod orders;
mod parts;
mod pulse;
mod quarantine;
mod reference;
mod reference_watch;
mod silence;
mod trust;

use crate::channel::{Answer, Channel, Rows, Scene};
use crate::counters::Counters;
use crate::event::{Flag, Gate, Reading, Refused, RefusedReason, Source, Subject, Supplied};
use crate::kept::Kept;
use crate::report::Report;
use crate::setup::{ChannelId, Clock, InfluenceId, ReferenceId, ReferenceKind, Setup};
use crate::standing::{AlarmStanding, ReferenceStanding, Standing};
use crate::time::{Duration, Timestamp};
use crate::track::{Sample, Track};
use crate::wording::readable;
use adopt::Routes;
use agenda::{Agenda, Waiter};
use known::known_values;
pub(crate) use leap::LeapWatch;
use orders::OrderBook;
pub(crate) use parts::{FleetDraft, FleetPart};
use pulse::Pulse;
use quarantine::Quarantines;
use reference::Reference;
use reference_watch::QUORUM;
pub(crate) use reference_watch::{Ruling, Vote};
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, BTreeSet};

/// Everything that a refused input must not change.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Fleet {
    setup: Kept<Setup>,
    routes: Routes,
    /// Newest time known, as the clock's kind says; `None` before the first accepted input.
    now: Option<Timestamp>,
    pulse: Pulse,
    /// Recent indications, by channel.
    indications: Vec<Kept<Track>>,
    /// By reference.
    references: Vec<Kept<Reference>>,
    /// Recent values of influence quantities, by source.
    influences: Vec<Kept<Track>>,
    /// By channel.
    channels: Vec<Kept<Channel>>,
    agenda: Agenda,
    orders: Kept<OrderBook>,
    quarantines: Kept<Quarantines>,
    /// References whose channels' votes came with the input at hand; none between two inputs.
    heard: BTreeSet<usize>,
    /// Last issue number of channels that were removed, by name: a number is never used twice.
    retired: BTreeMap<String, u64>,
}

impl Fleet {
    /// The configuration in force.
    pub(crate) fn setup(&self) -> &Setup {
        &self.setup
    }

    /// Newest time known.
    pub(crate) fn now(&self) -> Option<Timestamp> {
        self.now
    }

    /// What now is.
    pub(crate) fn clock(&self) -> Clock {
        self.setup.clock
    }

    /// Takes a value or refuses it.
    pub(crate) fn take_reading(&mut self, reading: &Reading, report: &mut Report<'_>) {
        let (source, phenomenon) = (reading.source, reading.phenomenon);
        let admit = |fleet: &Self, leap| fleet.admit(reading, leap);
        match self.admit_watching(source, phenomenon, reading.received, report, admit) {
            Ok(now) => {
                self.advance_to(now);
                self.pulse
                    .hear(reading.phenomenon, now, &self.routes, report);
                self.route(reading, report);
                self.trim(reading.source);
                self.pass_time(report);
            }
            Err(reason) => self.refuse_reading(reading, reason, report),
        }
    }

    /// Takes recorded rows that were asked for, however late. What was refused when it first came
    /// was counted then; time does not move.
    pub(crate) fn take_supplied(&mut self, supplied: &Supplied, report: &mut Report<'_>) {
        let mut rows = Rows::default();
        for reading in &supplied.readings {
            if !self.concerns(reading.source, supplied.channel) {
                self.refuse_reading(reading, RefusedReason::UnknownTopic, report);
            } else if self.may_be_supplied(reading) && !self.is_quarantined(reading) {
                rows.add(supplied.channel, reading);
            }
        }
        self.take_refit(supplied, report);
        let answer = Answer {
            from: supplied.from,
            to: supplied.to,
            rows,
        };
        self.visit(supplied.channel.0 as usize, |channel, scene| {
            channel.take_supplied(&answer, scene, report);
        });
        self.pass_time(report);
    }

    /// Takes the state of a gate or refuses it.
    pub(crate) fn take_gate(&mut self, gate: &Gate, report: &mut Report<'_>) {
        let source = Source::Reference(gate.reference);
        let admit = |fleet: &Self, leap| fleet.admit_gate(gate, leap);
        match self.admit_watching(source, gate.phenomenon, gate.received, report, admit) {
            Ok(now) => {
                self.advance_to(now);
                self.pulse.hear(gate.phenomenon, now, &self.routes, report);
                let lateness = self.gate_lateness(gate.reference, now);
                let reference = &mut self.references[gate.reference.0 as usize];
                reference.gate.insert(gate, lateness);
                self.hear_reference(gate.reference, report);
                self.pass_time(report);
            }
            Err(reason) => {
                let subject = self.subject(Source::Reference(gate.reference));
                let at = self.notice_time(gate.received);
                report.refuse(at, subject, reason, || {
                    format!("gate of {} at {}", self.name(subject), gate.phenomenon)
                });
            }
        }
    }

    /// Counts what the shell could not turn into a reading.
    pub(crate) fn note_refused(&self, refused: &Refused, report: &mut Report<'_>) {
        let subject = refused
            .source
            .map_or(Subject::Node, |source| self.subject(source));
        let at = self.notice_time(refused.received);
        report.refuse(at, subject, refused.reason, || {
            format!("topic {} ({})", refused.topic, refused.detail)
        });
    }

    /// Time passed.
    pub(crate) fn tick(&mut self, now: Timestamp, report: &mut Report<'_>) {
        if self.setup.clock == Clock::Live {
            self.watch_clock(now, report);
            self.advance_to(now);
            self.pass_time(report);
        }
    }

    /// How things stand.
    pub(crate) fn standing(&self, counters: &Counters) -> Standing {
        let channels = self.channels.iter().zip(&self.setup.channels);
        let channels = (0..).zip(channels).zip(&self.indications);
        let references = (0..).zip(&self.references);
        Standing {
            now: self.now,
            counters: counters.clone(),
            channels: channels
                .map(|((id, (channel, setup)), track)| {
                    let id = ChannelId(id);
                    channel.standing(id, setup, track.newest(), self.is_in_check(id))
                })
                .collect(),
            references: references
                .map(|(id, reference)| ReferenceStanding {
                    reference: ReferenceId(id),
                    last_value: self.last_known(ReferenceId(id)),
                    trouble: reference.trouble(),
                })
                .collect(),
            alarms: self.raised_alarms(),
        }
    }

    /// Whether a gated reference is being shown to the channel just now.
    fn is_in_check(&self, id: ChannelId) -> bool {
        let reference = self.setup.channels[id.0 as usize].reference;
        let is_open = |id: &ReferenceId| {
            let open = |now| self.references[id.0 as usize].gate.is_open(now);
            self.now.and_then(open) == Some(true)
        };
        match &self.setup.references[reference.0 as usize].kind {
            ReferenceKind::Constant { gated: true, .. } => is_open(&reference),
            ReferenceKind::Checks { points } => points.iter().any(is_open),
            _ => false,
        }
    }

    /// Has the channels of a reference heed what has changed about it.
    fn tell_channels(&mut self, index: usize, report: &mut Report<'_>) {
        let id = ReferenceId::at(index);
        for user in self.routes.reference_users(id).to_vec() {
            self.visit(user, |channel, scene| channel.heed_reference(scene, report));
        }
    }

    fn raised_alarms(&self) -> Vec<AlarmStanding> {
        let node = self.pulse.alarm();
        let mut alarms = Vec::from_iter(
            node.is_raised()
                .then(|| silence::data_gap_standing(Subject::Node, node.state())),
        );
        for (id, channel) in (0..).zip(&self.channels) {
            alarms.extend(channel.raised_alarms(ChannelId(id)));
        }
        for (id, reference) in (0..).zip(&self.references) {
            alarms.extend(reference.raised(ReferenceId(id)));
        }
        alarms
    }

    /// Moves now forward, never back.
    fn advance_to(&mut self, now: Timestamp) {
        self.now = self.now.max(Some(now));
    }

    /// Puts an admitted reading where it belongs and lets those concerned act on it.
    fn route(&mut self, reading: &Reading, report: &mut Report<'_>) {
        let Some(now) = self.now else { return };
        let sample = Sample {
            time: reading.phenomenon,
            arrived: match self.setup.clock {
                Clock::Live => now,
                Clock::Readings => reading.phenomenon,
            },
            value: reading.value,
            sequence: reading.sequence,
        };
        if self.is_quarantined(reading) {
            self.track_of(reading.source).insert_aside(sample);
            self.refuse_reading(reading, RefusedReason::Quarantined, report);
            return;
        }
        match reading.source {
            Source::Indication(id) => {
                let index = id.0 as usize;
                let setup = &self.setup.channels[index];
                if self.channels[index].check_indication(&sample, setup) != Flag::Pass {
                    self.visit(index, |channel, scene| channel.keep_out(scene, report));
                    self.refuse_reading(reading, RefusedReason::Stuck, report);
                    return;
                }
                self.indications[index].insert(sample);
                self.visit(index, |channel, scene| {
                    channel.take_indication(&sample, scene, report);
                });
                for user in self.routes.group_users(id).to_vec() {
                    self.visit(user, |channel, scene| {
                        channel.take_member(id, &sample, scene, report);
                    });
                }
            }
            Source::Reference(id) => {
                let index = id.0 as usize;
                let reference = &mut self.references[index];
                reference.values.insert(sample);
                if self.routes.is_watched(index) {
                    reference.watch.take_value(sample.time, sample.value);
                    self.heard.insert(index);
                }
                self.hear_reference(id, report);
                for user in self.routes.reference_users(id).to_vec() {
                    self.visit(user, |channel, scene| {
                        channel.take_reference(&sample, scene, report);
                    });
                }
            }
            Source::Influence(id) => {
                self.influences[id.0 as usize].insert(sample);
                for user in self.routes.influence_users(id).to_vec() {
                    self.visit(user, |channel, scene| {
                        channel.take_influence(scene, report);
                    });
                }
            }
        }
    }

    /// Forgets what is too old to matter to anyone.
    fn trim(&mut self, source: Source) {
        match source {
            Source::Indication(id) => {
                if let Some(track) = self.indications.get_mut(id.0 as usize) {
                    self.routes.trim_indications(id, track);
                }
            }
            Source::Reference(id) => {
                if let Some(reference) = self.references.get_mut(id.0 as usize) {
                    self.routes.trim_references(id, &mut reference.values);
                }
            }
            Source::Influence(id) => {
                if let Some(track) = self.influences.get_mut(id.0 as usize) {
                    self.routes.trim_influences(id, track);
                }
            }
        }
    }

    /// Lets one channel act in its surroundings.
    fn visit(&mut self, index: usize, act: impl FnOnce(&mut Channel, &Scene<'_>)) {
        let (Some(now), Some(setup)) = (self.now, self.setup.channels.get(index)) else {
            return;
        };
        let reference = setup.reference.0 as usize;
        let scene = Scene {
            id: ChannelId::at(index),
            setup,
            reference: &self.setup.references[reference],
            values: &self.references[reference].values,
            checks: known_values(&self.setup, &self.references, setup.reference),
            indications: &self.indications,
            influences: &self.influences,
            now,
            alive: self.pulse.alive(now, &self.routes),
            resumed: self.pulse.resumed(),
            trouble: self.references[reference]
                .trouble()
                .or_else(|| self.quarantined_now(ChannelId::at(index), now)),
            watched: self.routes.is_watched(reference),
            barred: self.quarantines.of_constants(&self.setup, setup.reference),
        };
        let channel = &mut self.channels[index];
        act(channel, &scene);
        self.agenda.put(Waiter::Channel(index), channel.wake());
        if channel.has_votes() {
            self.hear_votes(index, now);
        }
    }

    /// Lets everything act whose time has come.
    fn pass_time(&mut self, report: &mut Report<'_>) {
        let Some(now) = self.now else { return };
        self.pulse.watch(now, &self.routes, report);
        self.carry_out(report);
        for waiter in self.agenda.due(now) {
            match waiter {
                Waiter::Reference(index) => self.watch_reference(index, report),
                Waiter::Channel(index) => {
                    self.visit(index, |channel, scene| channel.pass_time(scene, report));
                }
            }
        }
        self.carry_out(report);
    }

    /// The earliest time after now at which something waits.
    pub(crate) fn next_wake(&self) -> Option<Timestamp> {
        let node = self.pulse.quiet_at(&self.routes);
        let node = node.filter(|&time| self.now.is_none_or(|now| time > now));
        self.agenda.next(self.now).into_iter().chain(node).min()
    }

    /// Writes everybody into the agenda: another configuration is in force.
    fn schedule_all(&mut self) {
        self.agenda = Agenda::default();
        for (index, channel) in self.channels.iter().enumerate() {
            self.agenda.put(Waiter::Channel(index), channel.wake());
        }
        for index in 0..self.references.len() {
            self.schedule_reference(index);
        }
    }

    /// Writes into the agenda when a reference is next to be looked at.
    fn schedule_reference(&mut self, index: usize) {
        let time = self.watched_from(index);
        if self.references[index].wake != time {
            self.references[index].wake = time;
        }
        self.agenda.put(Waiter::Reference(index), time);
    }

    /// Whose counters a source's refusals go to.
    fn subject(&self, source: Source) -> Subject {
        match source {
            Source::Indication(id) if (id.0 as usize) < self.channels.len() => Subject::Channel(id),
            Source::Reference(id) if (id.0 as usize) < self.references.len() => {
                Subject::Reference(id)
            }
            Source::Influence(id) if (id.0 as usize) < self.influences.len() => {
                Subject::Influence(id)
            }
            _ => Subject::Node,
        }
    }

    /// What people call it.
    fn name(&self, subject: Subject) -> &str {
        match subject {
            Subject::Node => &self.setup.node,
            Subject::Channel(id) => &self.setup.channels[id.0 as usize].name,
            Subject::Reference(id) => &self.setup.references[id.0 as usize].name,
            Subject::Influence(InfluenceId(id)) => &self.setup.influences[id as usize].name,
        }
    }

    /// When a notice about something refused is said to be: now, or live the received time if that
    /// is newer (it does not move now).
    fn notice_time(&self, received: Timestamp) -> Timestamp {
        match self.setup.clock {
            Clock::Live => self.now.map_or(received, |now| now.max(received)),
            Clock::Readings => self.now.unwrap_or(received),
        }
    }

    fn refuse_reading(&self, reading: &Reading, reason: RefusedReason, report: &mut Report<'_>) {
        if reason == RefusedReason::OutOfRange {
            report.outputs.extend(self.fate_out_of_range(reading));
        }
        let subject = self.subject(reading.source);
        let at = self.notice_time(reading.received);
        report.refuse(at, subject, reason, || {
            let unit = match subject {
                Subject::Channel(id) => self.setup.channels[id.0 as usize].unit.as_str(),
                _ => "",
            };
            format!(
                "{} {} {unit} at {}",
                self.name(subject),
                readable(reading.value),
                reading.phenomenon
            )
        });
    }
}

/// The shortest step of time: what lies one past a limit exceeds it.
const TICK: Duration = Duration(1);

/// Longest `lateness` among channels, or nothing.
fn longest(durations: impl Iterator<Item = Duration>) -> Duration {
    durations.max().unwrap_or(Duration::ZERO)
}
