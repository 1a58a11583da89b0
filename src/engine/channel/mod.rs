//! One channel: pairing → screening → fit → judgement → publishing → alarms, one file per station,
//! and the state that ties them.
//!
//! ```text
//!   indication ─┐            ┌─ rejected: told with test and threshold
//!               ├─ pairing ─▶ screening ─▶ fit ─▶ judgement ─┬─▶ publishing: corrections
//!   reference ──┘                          │                 ├─▶ outlook: what lies ahead
//!                                          │                 └─▶ conditions: alarms
//!                                          └─▶ degree changes
//! ```
//!
//! What enters a station never comes back from a later one; the only memory shared between them is
//! in [`Channel`].

mod applying;
mod breaks;
mod check;
mod checks;
mod closing;
mod conditions;
mod conformity;
mod distrust;
mod drafting;
mod forecast;
mod holding;
mod judgement;
mod ladder;
mod levels;
mod limits;
mod outlook;
mod pairing;
mod publishing;
mod recent;
mod refit;
mod review;
mod scene;
mod screening;
mod service;
mod status;
mod stepping;
mod stretch;
mod telling;
#[cfg(test)]
pub(crate) mod testing;
mod waiting;

use crate::event::{Cause, Flag, Output, Subject};
use crate::report::Report;
use crate::setup::{ChannelId, ChannelSetup};
use crate::standing::{AlarmStanding, ChannelStanding};
use crate::time::{Duration, Timestamp};
use crate::track::{Sample, Track};
use breaks::Breaks;
use checks::Checks;
pub(crate) use checks::jumps;
use conditions::ChannelAlarms;
use ladder::{Ladder, Unrenewed, tell_withdrawn};
use outlook::OutlookStation;
pub(crate) use pairing::Pair;
pub(crate) use pairing::{Answer, Check, Holding, Rows, all_pairs, holding};
use pairing::{Found, Pairing};
use publishing::Publishing;
use recent::{Recent, Remembered};
pub(crate) use refit::Rebuilding;
use refit::{Refit, Struck};
pub(crate) use scene::Scene;
pub(crate) use screening::MAD_TO_SD;
use serde::{Deserialize, Serialize};
use service::ServiceBook;
pub(crate) use service::{Effect, Service};
use stepping::Stepped;
use stretch::Stretch;
use waiting::Waiting;

/// The state of one channel.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Channel {
    pairing: Pairing,
    checks: Checks,
    waiting: Waiting,
    stretch: Stretch,
    /// The stretch that a step ended, while the step's alarm stands: a service told later may have
    /// been its cause, and then it is this one that it ended.
    stepped: Option<Box<Stepped>>,
    recent: Recent,
    breaks: Breaks,
    publishing: Publishing,
    outlook: OutlookStation,
    ladder: Ladder,
    /// How long the correction was held, while no pair has renewed it: a silence of the whole node
    /// excuses its reference's, but makes an old correction no younger.
    unrenewed: Option<Unrenewed>,
    alarms: ChannelAlarms,
    service: ServiceBook,
    /// A refit that waits for rows from the record.
    refit: Option<Box<Refit>>,
    struck: Struck,
    /// From when on the channel's silence counts while it has said nothing.
    began: Option<Timestamp>,
    /// Phenomenon time of the newest pair made, whatever its fate.
    last_reference: Option<Timestamp>,
    wake: Option<Timestamp>,
}

impl Channel {
    /// A channel that has seen nothing; its documents are counted on from `issued`.
    pub(crate) fn new(setup: &ChannelSetup, issued: u64) -> Self {
        Self {
            pairing: Pairing::default(),
            checks: Checks::default(),
            waiting: Waiting::default(),
            stretch: Stretch::new(1, setup),
            stepped: None,
            recent: Recent::default(),
            breaks: Breaks::default(),
            publishing: Publishing::new(issued),
            outlook: OutlookStation::default(),
            ladder: Ladder::new(setup),
            unrenewed: None,
            alarms: ChannelAlarms::default(),
            service: ServiceBook::default(),
            refit: None,
            struck: Struck::default(),
            began: None,
            last_reference: None,
            wake: Some(Timestamp(i64::MIN)),
        }
    }

    /// This channel, to begin anew under `setup` because its pairs mean something else now. The
    /// sensor is the same, so its service history stays, unless its errors are told in another
    /// `unit`.
    pub(crate) fn anew(&self, setup: &ChannelSetup, same_unit: bool) -> Self {
        let mut fresh = Self::new(setup, self.issued());
        if same_unit {
            fresh.service = self.service.clone();
            fresh.outlook = self.outlook.anew();
        }
        fresh
    }

    /// Documents issued so far.
    pub(crate) fn issued(&self) -> u64 {
        self.publishing.issued()
    }

    /// Newest instant at which a reference value was at hand for this channel.
    pub(crate) fn last_reference(&self) -> Option<Timestamp> {
        self.last_reference
    }

    /// When it wants to act next, if nothing arrives.
    pub(crate) fn wake(&self) -> Option<Timestamp> {
        self.wake
    }

    /// Counts an indication that came in, before it is taken into its track; what does not pass is
    /// not taken.
    pub(crate) fn check_indication(&mut self, sample: &Sample, setup: &ChannelSetup) -> Flag {
        self.checks
            .take_indication(sample.time, sample.value, setup)
    }

    /// Those of a channel's indications, in order, that nothing speaks against when they are looked
    /// at one by one: none came too fast, none was one of too many repetitions.
    pub(crate) fn credible(indications: &Track, setup: &ChannelSetup) -> Track {
        let mut checks = Checks::default();
        let mut credible = Track::default();
        let limit = setup.screening.max_rate.filter(|_| setup.screening.enabled);
        for sample in indications.all() {
            let leaps = limit.and_then(|limit| jumps(&credible, sample.time, sample.value, limit));
            let flag = checks.take_indication(sample.time, sample.value, setup);
            if leaps.is_none() && flag == Flag::Pass {
                credible.append(*sample);
            }
        }
        credible
    }

    /// Its own indication was kept out as stuck.
    pub(crate) fn keep_out(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        let stuck = self.checks.stuck();
        self.alarms.stuck(stuck, scene, report);
    }

    /// Its own indication was taken into its track.
    pub(crate) fn take_indication(
        &mut self,
        sample: &Sample,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        // A row from the record is no sign of life.
        if scene.indications[scene.id.0 as usize].newest() == Some(sample.time) {
            self.alarms.heard(sample.time, scene, report);
        }
        self.alarms.stuck(self.checks.stuck(), scene, report);
        if scene.setup.corrected_values
            && let Some(corrected) = self.publishing.correct(sample, scene)
        {
            report.say(Output::Corrected(corrected));
        }
        let mut found = Vec::new();
        self.pairing.take_indication(sample, scene, &mut found);
        self.work_through(found, scene, report);
    }

    /// A value of its reference was taken into its track.
    pub(crate) fn take_reference(
        &mut self,
        sample: &Sample,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let mut found = Vec::new();
        self.pairing.take_reference(sample, scene, &mut found);
        self.work_through(found, scene, report);
    }

    /// An indication of another member of its group was taken into that one's track.
    pub(crate) fn take_member(
        &mut self,
        member: ChannelId,
        sample: &Sample,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let mut found = Vec::new();
        let track = &scene.indications[member.0 as usize];
        self.pairing.take_member(sample, track, scene, &mut found);
        self.work_through(found, scene, report);
    }

    /// A value of one of its influence quantities was taken into its track.
    pub(crate) fn take_influence(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.pairing.touch_influences();
        self.work_through(Vec::new(), scene, report);
    }

    /// Rows asked from the record have come.
    pub(crate) fn take_supplied(
        &mut self,
        answer: &Answer,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let mut found = Vec::new();
        self.pairing.take_supplied(answer, scene, &mut found);
        self.act_on(found, scene, report);
    }

    /// Time passed, or something arrived that may complete a pair.
    pub(crate) fn pass_time(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.began.get_or_insert(scene.alive);
        let mut found = Vec::new();
        self.pairing.advance(scene, &mut found);
        self.work_through(found, scene, report);
    }

    /// Something changed about its reference's state.
    pub(crate) fn heed_reference(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.judge(scene, report);
        self.wake = self.next_wake(scene);
    }

    /// Goes on under an edited setup in which its rows mean the same: alarms that nobody asks about
    /// any more are cleared, a screen that is switched off forgets, a correction that may no longer
    /// be published is withdrawn, and one in force is reviewed as soon as anything happens.
    pub(crate) fn edit(
        &mut self,
        id: ChannelId,
        after: &ChannelSetup,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        self.alarms.edit(id, after, now, report);
        if !after.screening.enabled {
            self.stretch.forget_screen();
            self.checks.forget_screens();
        }
        self.stretch.edit(after);
        if after.steps.is_none() {
            self.breaks = Breaks::default();
            self.stepped = None;
        }
        if let Some(step) = &mut self.stepped {
            step.edit(after);
        }
        if after.monitor_only {
            if self.publishing.forget() {
                let why = "the channel is now monitored only";
                tell_withdrawn(id, after, now, why, report);
            }
            self.ladder = Ladder::new(after);
        } else if self.ladder.because() == Some(Cause::MonitorOnly) {
            self.ladder = Ladder::new(after);
        }
        self.publishing.review();
        self.outlook.edit(id, after, now, report);
        self.wake = Some(Timestamp(i64::MIN));
    }

    /// Whether a pair stamped later than `edge` was found.
    pub(crate) fn knows_after(&self, edge: Timestamp) -> bool {
        self.last_reference > Some(edge) || self.stretch.last_pair() > Some(edge)
    }

    /// Now was wrong and steps back: what was issued at a later time is withdrawn.
    pub(crate) fn step_back(
        &mut self,
        id: ChannelId,
        setup: &ChannelSetup,
        to: Timestamp,
        report: &mut Report<'_>,
    ) {
        self.ladder.step_back(to);
        self.unrenewed = None;
        if self.publishing.step_back(to) {
            let why = "it was issued while the host's clock was wrong";
            tell_withdrawn(id, setup, to, why, report);
            self.ladder.drop_correction();
        }
        self.outlook.step_back(id, to, report);
        self.began = self.began.map(|began| began.min(to));
        self.wake = Some(Timestamp(i64::MIN));
    }

    /// Withdraws the correction and clears the alarms of a channel that starts anew or is no more.
    pub(crate) fn dismiss(
        &self,
        id: ChannelId,
        setup: &ChannelSetup,
        now: Timestamp,
        why: &str,
        report: &mut Report<'_>,
    ) {
        if self.publishing.correction().is_some() {
            tell_withdrawn(id, setup, now, why, report);
        }
        if self.outlook.outlook().is_some() {
            report.say(Output::OutlookWithdrawn {
                channel: id,
                at: now,
            });
        }
        self.alarms.dismiss(id, setup, now, why, report);
    }

    /// The alarms that are not normal.
    pub(crate) fn raised_alarms(&self, id: ChannelId) -> Vec<AlarmStanding> {
        self.alarms.raised(id)
    }

    /// How it stands. `in_check`: whether its reference is being shown to it just now.
    pub(crate) fn standing(
        &self,
        channel: ChannelId,
        setup: &ChannelSetup,
        last_indication: Option<Timestamp>,
        in_check: bool,
    ) -> ChannelStanding {
        let judged = self.stretch.judged();
        let offered = judged.filter(|_| !setup.monitor_only);
        let correction = self.publishing.correction();
        ChannelStanding {
            channel,
            last_indication,
            last_pair: self.stretch.last_pair(),
            pairs: self.stretch.pairs(),
            degree: judged.map(|judged| judged.degree),
            correction: offered.map(|judged| judged.correction),
            standard_uncertainty: judged.map(|judged| judged.u),
            zone: judged.and_then(|judged| judged.conformity.zone()),
            accepted: judged.and_then(|judged| judged.conformity.accepted()),
            corrected_zone: correction.and_then(|document| document.corrected_zone),
            issue_number: correction.map(|document| document.issue_number),
            valid_until: correction.map(|document| document.valid_until),
            locked_out: self.stretch.is_locked_out(),
            limit_not_before: self.outlook.outlook().and_then(|it| it.recalibration.by),
            rung: self.ladder.rung(),
            because: self.ladder.because(),
            statuses: self.statuses(channel, in_check),
        }
    }

    /// Attaches influence quantities to what pairing found, and acts on what has them.
    fn work_through(&mut self, mut found: Vec<Found>, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.pairing.attach(&mut found, scene);
        self.act_on(found, scene, report);
    }

    /// Sends what was found through the stations, then sees to what waits for time.
    fn act_on(&mut self, found: Vec<Found>, scene: &Scene<'_>, report: &mut Report<'_>) {
        let subject = Subject::Channel(scene.id);
        for found in found {
            match found {
                Found::Pair(pair) => self.offer_unless_refitted(&pair, scene, report),
                Found::Missed { time, reason } => {
                    report.refuse(scene.now, subject, reason, || {
                        format!(
                            "{}: reference {} for {time}",
                            scene.setup.name, scene.reference.name
                        )
                    });
                }
                Found::Unattached {
                    pair,
                    influence,
                    rejection,
                } => {
                    self.last_reference = self.last_reference.max(Some(pair.time));
                    telling::tell_unattached(&pair, influence, rejection, scene, report);
                }
                Found::Wanted { from, to } => report.say(Output::Wanted {
                    channel: scene.id,
                    from,
                    to,
                }),
            }
        }
        if self.publishing.is_due(scene.now) || self.outlook.is_due(scene.now) {
            self.judge(scene, report);
            self.outlook.expire(scene, report);
        }
        let silent = self.silent(scene);
        self.alarms.silence(silent, scene, report);
        self.wake = self.next_wake(scene);
    }

    fn take_pair(&mut self, pair: &Pair, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.last_reference = self.last_reference.max(Some(pair.time));
        let scatter = self.stretch.scatter();
        let stuck = self.checks.take_pair(pair, scatter, scene.setup);
        self.alarms.stuck(self.checks.stuck(), scene, report);
        if stuck.is_some() {
            telling::tell_fate(pair, stuck, scene, report);
            return;
        }
        let taken = self.offer_to_stretch(pair, None, scene, report);
        if let Some(innovation) = taken.innovation {
            self.watch_for_step(innovation, taken.locks_out, scene, report);
            let locked_out = self.stretch.is_locked_out();
            self.alarms
                .screen(locked_out, innovation.value, scene, report);
            self.checks
                .take_innovation(innovation, taken.rejected.is_some(), scene.setup);
            self.alarms
                .precision(self.checks.precision(), scene, report);
        }
        if self.is_worth_judging(scene) {
            self.judge(scene, report);
        }
    }

    /// How long the channel has been silent while the node was listening.
    fn silent(&self, scene: &Scene<'_>) -> Duration {
        scene.alive.since(self.silent_since(scene))
    }

    fn silent_since(&self, scene: &Scene<'_>) -> Timestamp {
        let newest = scene.indications[scene.id.0 as usize].newest();
        let last = newest.or(self.began).unwrap_or(scene.alive);
        scene.resumed.map_or(last, |resumed| resumed.max(last))
    }

    fn next_wake(&self, scene: &Scene<'_>) -> Option<Timestamp> {
        let gap = scene
            .setup
            .alarms
            .gap_after
            .filter(|_| !self.alarms.gap_is_raised())
            .map(|limit| self.silent_since(scene).plus(limit).plus(Duration(1)));
        [
            self.pairing.due(),
            self.publishing.wake(),
            self.outlook.wake(),
            gap,
        ]
        .into_iter()
        .flatten()
        .min()
    }
}
