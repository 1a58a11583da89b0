//! A stretch fitted anew from the record, because a quarantine or its release changed which values
//! count.
//!
//! The rows are asked for; until they come the correction is held, and pairs that are made
//! meanwhile wait. Then the stretch begins again with nothing and takes its pairs in the order of
//! their time, through screen and fit as they did the first time, without being told again: only
//! those that are out now, or in again, are. Steps and services stand, since nothing reaches across
//! the beginning of the stretch.
//!
//! A stretch that has filled its window begins two windows back: what leaves the window again
//! taught the screen and the announced model. So its numbers may differ in the last digits from
//! those of a history that never held the bad rows, and where segments are counted in pairs they
//! may begin at other pairs; those of a shorter stretch do not differ at all.

use super::pairing::Pair;
use super::{Breaks, Channel, Scene, telling};
use crate::event::{Interval, Output, RefusedReason, Rejection, Source, Subject};
use crate::kept::Kept;
use crate::report::Report;
use crate::setup::{ReferenceKind, WindowLength};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, VecDeque};

/// Most pairs that wait for the rows; when there are more, rows are asked for again, up to now.
const MEANWHILE_MAX: usize = 4096;

/// Most struck pairs remembered.
const STRUCK_MAX: usize = 256;

/// A refit that waits for its rows.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Refit {
    /// The newest order that asked for it.
    order: String,
    /// The rows wanted: from (inclusive) …
    from: Timestamp,
    /// … to (exclusive).
    to: Timestamp,
    /// The newest pair made before it: later ones wait.
    until: Timestamp,
    /// What was quarantined before.
    before: Vec<(Source, Interval)>,
    /// Pairs made since.
    meanwhile: Vec<Pair>,
}

impl Refit {
    /// The time of the newest pair made, until it was asked for and since.
    fn newest(&self) -> Timestamp {
        let times = self.meanwhile.iter().map(|pair| pair.time);
        times.fold(self.until, Timestamp::max)
    }
}

/// Times of the newest pairs that were kept out because their reference was doubted: what its
/// channels decided together cannot be decided again by one of them.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Struck(VecDeque<Timestamp>);

impl Struck {
    /// Remembers a pair; the oldest of too many is forgotten.
    pub(super) fn note(&mut self, time: Timestamp) {
        if self.0.len() == STRUCK_MAX {
            self.0.pop_front();
        }
        self.0.push_back(time);
    }
}

/// All pairs of the time that was asked for, as they are to be now and as they were before.
pub(crate) struct Rebuilding {
    pub(crate) now: Vec<Pair>,
    pub(crate) before: Vec<Pair>,
}

impl Channel {
    /// An order has changed what counts in an interval. If the present fit holds anything of it, or
    /// would, asks for the rows to make it anew; whether it does. `before`: what was quarantined
    /// until now.
    pub(crate) fn ask_refit(
        &mut self,
        order: &str,
        (source, interval): (Source, Interval),
        before: &[(Source, Interval)],
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> bool {
        let Some((from, until)) = self.reach(interval, scene) else {
            return false;
        };
        self.drop_waiting(source, interval, scene);
        let (from, until, before) = match self.refit.take() {
            // Pairs that wait for it are made again with the others.
            Some(earlier) => (
                from.min(earlier.from),
                earlier.newest().max(until),
                earlier.before,
            ),
            None => (from, until, before.to_vec()),
        };
        self.ask(
            Refit {
                order: order.to_owned(),
                from,
                to: until.plus(margin(scene)).plus(Duration(1)),
                until,
                before,
                meanwhile: Vec::new(),
            },
            scene,
            report,
        );
        self.judge(scene, report);
        self.wake = self.next_wake(scene);
        true
    }

    fn ask(&mut self, refit: Refit, scene: &Scene<'_>, report: &mut Report<'_>) {
        report.say(Output::Wanted {
            channel: scene.id,
            from: refit.from,
            to: refit.to,
        });
        self.refit = Some(Box::new(refit));
    }

    /// From when on rows are needed to fit the stretch without or with an interval, and the newest
    /// pair that they are to make; `None` if no pair that it holds or could hold is concerned.
    fn reach(&self, interval: Interval, scene: &Scene<'_>) -> Option<(Timestamp, Timestamp)> {
        let shown = scene.indications[scene.id.0 as usize].newest();
        let made = self.last_reference.or(shown)?;
        // Pairs that were never made, since their readings were set aside as they came.
        let is_open = interval.to.is_none_or(|to| to > made);
        let until = if is_open {
            shown.map_or(made, |shown| shown.max(made))
        } else {
            made
        };
        let window = self.stretch.fit().window();
        let newest = window.newest().unwrap_or(until).max(until);
        let oldest = window.oldest().unwrap_or(newest);
        let first = if self.stretch.fills_its_window() {
            oldest.minus(newest.since(oldest))
        } else {
            // What is put back may be older than all that is left.
            let reach = match scene.setup.fit.window {
                WindowLength::Time(length) => newest.minus(length),
                WindowLength::Pairs(_) => interval.from,
            };
            oldest.min(interval.from.max(reach))
        };
        let first = self
            .stretch
            .takes_from()
            .map_or(first, |from| first.max(from));
        let held_from = if self.stretch.fills_its_window() {
            oldest
        } else {
            first
        };
        let margin = margin(scene);
        let concerned = interval.from <= newest.plus(margin)
            && interval.to.is_none_or(|to| to > held_from.minus(margin));
        concerned.then(|| (first.minus(margin), until))
    }

    /// What waits and rests on values of the interval is dropped: the refit makes it again, if it
    /// is to be made.
    fn drop_waiting(&mut self, source: Source, interval: Interval, scene: &Scene<'_>) {
        let own = source == Source::Indication(scene.id);
        let lag = scene.setup.lag;
        let rests = |pair: &Pair| {
            let instant = if own { pair.time } else { pair.time.minus(lag) };
            interval.holds(instant)
        };
        self.drop_votes(rests);
        let measured = scene.reference.kind == ReferenceKind::Measured;
        let makes_pairs = match source {
            Source::Reference(_) => measured,
            Source::Indication(_) => own && !measured,
            Source::Influence(_) => false,
        };
        let is_maker = |time: Timestamp| makes_pairs && interval.holds(time);
        self.pairing.drop_waiting(is_maker, rests);
    }

    /// What was quarantined before the refit whose rows these are; `None` if they are another's.
    pub(crate) fn refit_before(
        &self,
        from: Timestamp,
        to: Timestamp,
    ) -> Option<&[(Source, Interval)]> {
        let refit = self.refit.as_ref()?;
        (refit.from == from && refit.to == to).then_some(&refit.before)
    }

    /// Takes a pair, or has it wait for the refit.
    pub(super) fn offer_unless_refitted(
        &mut self,
        pair: &Pair,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        if scene.bars(pair) {
            self.last_reference = self.last_reference.max(Some(pair.time));
            telling::tell_fate(pair, Some(QUARANTINED), scene, report);
            return;
        }
        let Some(refit) = &mut self.refit else {
            self.offer(pair, scene, report);
            return;
        };
        refit.meanwhile.push(*pair);
        if refit.meanwhile.len() > MEANWHILE_MAX
            && let Some(refit) = self.refit.take()
        {
            let until = refit.newest();
            let again = Refit {
                until,
                to: until.plus(margin(scene)).plus(Duration(1)),
                meanwhile: Vec::new(),
                ..*refit
            };
            self.ask(again, scene, report);
        }
    }

    /// The rows have come: makes the fit anew.
    pub(crate) fn rebuild(
        &mut self,
        pairs: &Rebuilding,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let Some(refit) = self.refit.take() else {
            return;
        };
        let mine = |pairs: &[Pair]| self.of_the_stretch(pairs, refit.until, scene);
        let (now, before) = (mine(&pairs.now), mine(&pairs.before));
        let (oldest, newest) = {
            let window = self.stretch.fit().window();
            (window.oldest(), window.newest())
        };
        let reaches = before.last().map(|pair| pair.time) >= newest;
        let held = self.stretch.pairs();
        let newest_made = now.last().map(|pair| pair.time);
        self.last_reference = self.last_reference.max(newest_made);
        let fates = self.take_again(&now, scene);
        tell_changes(&before, &now, &fates, scene, report);
        let (out, back) = (only_in(&before, &now), only_in(&now, &before));
        if self.stretch.fills_its_window() {
            let pairs = held.saturating_sub(out.len() as u64) + back.len() as u64;
            self.stretch.set_pairs(pairs);
        }
        let first = before.first().map(|pair| pair.time);
        let falls_short = oldest.is_some() && (first.is_none() || first > oldest);
        report.notice(scene.now, Subject::Channel(scene.id), "refitted", || {
            let short = match (reaches, falls_short) {
                (false, _) => "; the record does not hold its newest rows",
                (true, true) => "; the record no longer reaches back to its beginning",
                (true, false) => "",
            };
            format!(
                "{}: fitted anew from the record as order {} demands: {} pairs out, {} in \
                     again, {} in all{short}",
                scene.setup.name,
                refit.order,
                out.len(),
                back.len(),
                self.stretch.pairs()
            )
        });
        self.publish_again(&refit.order, reaches, scene, report);
        for pair in &refit.meanwhile {
            self.offer_unless_refitted(pair, scene, report);
        }
        self.wake = self.next_wake(scene);
    }

    /// Those of the pairs that the stretch is to hold: not older than it, made before the refit was
    /// asked for, and neither waiting for anything else nor struck with its reference.
    fn of_the_stretch(&self, pairs: &[Pair], until: Timestamp, scene: &Scene<'_>) -> Vec<Pair> {
        let begins = self.stretch.takes_from();
        let is_mine = |pair: &&Pair| {
            begins.is_none_or(|begins| begins <= pair.time)
                && pair.time <= until
                && !self.waits(pair.time, scene)
                && !self.struck.0.contains(&pair.time)
        };
        pairs.iter().filter(is_mine).copied().collect()
    }

    /// Begins the stretch again with these pairs; what became of each.
    fn take_again(
        &mut self,
        pairs: &[Pair],
        scene: &Scene<'_>,
    ) -> BTreeMap<Timestamp, Option<Rejection>> {
        self.recent.forget_stretch(self.stretch.number());
        self.stretch = self.stretch.afresh(scene.setup);
        self.breaks = Breaks::default();
        self.checks.forget_pairs();
        let (mut said, mut counters, mut notices) = (Vec::new(), Kept::default(), Kept::default());
        let mut leaps = crate::fleet::LeapWatch::default();
        let unheard = &mut Report {
            outputs: &mut said,
            counters: &mut counters,
            notices: &mut notices,
            leaps: &mut leaps,
        };
        for pair in self.stretch.opening().to_vec() {
            self.offer_to_stretch(&pair, None, scene, unheard);
        }
        pairs
            .iter()
            .map(|pair| (pair.time, self.take_unheard(pair, scene, unheard)))
            .collect()
    }

    /// As [`Channel::take_pair`], but that nothing follows from it.
    fn take_unheard(
        &mut self,
        pair: &Pair,
        scene: &Scene<'_>,
        unheard: &mut Report<'_>,
    ) -> Option<Rejection> {
        let scatter = self.stretch.scatter();
        let stuck = self.checks.take_pair(pair, scatter, scene.setup);
        if stuck.is_some() {
            return stuck;
        }
        let taken = self.offer_to_stretch(pair, None, scene, unheard);
        if let Some(innovation) = taken.innovation {
            if let Some(confirmation) = scene.setup.steps {
                let evidence = (&self.stretch, &self.recent);
                // A step that was not found the first time is found as soon as it goes on.
                let _ = self.breaks.take(
                    innovation,
                    taken.locks_out,
                    evidence,
                    confirmation,
                    scene.setup,
                );
            }
            self.checks
                .take_innovation(innovation, taken.rejected.is_some(), scene.setup);
        }
        unheard.outputs.clear();
        taken.rejected
    }

    /// Publishes what the new fit says in place of all that rested on the old one; where it says
    /// nothing, or is not whole, what rests on the old one is taken back.
    fn publish_again(
        &mut self,
        order: &str,
        is_whole: bool,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        self.publishing.supersede(order);
        let in_force = self.publishing.correction().is_some();
        if in_force
            && is_whole
            && let Some(judgement) = self.judgement(scene, report)
        {
            let stretch = self.stretch.number();
            self.publishing.consider(&judgement, stretch, scene, report);
        }
        if in_force && self.publishing.is_to_supersede() {
            let why =
                format!("order {order} changed what it rests on, and what is left says too little");
            self.withdraw(&why, scene, report);
            self.ladder.drop_correction();
        }
        self.outlook.leave_stretch(scene, report);
        if is_whole {
            self.judge(scene, report);
        }
    }
}

/// What is said of a pair that is out because of a quarantine.
const QUARANTINED: Rejection = Rejection {
    reason: RefusedReason::Quarantined,
    value: 0.0,
    threshold: 0.0,
};

/// Tells the pairs that are out now, and those that are in again.
fn tell_changes(
    before: &[Pair],
    now: &[Pair],
    fates: &BTreeMap<Timestamp, Option<Rejection>>,
    scene: &Scene<'_>,
    report: &mut Report<'_>,
) {
    for pair in only_in(before, now) {
        telling::tell_quietly(pair, Some(QUARANTINED), scene, report);
    }
    for pair in only_in(now, before) {
        let fate = fates.get(&pair.time).copied().flatten();
        telling::tell_quietly(pair, fate, scene, report);
    }
}

/// Those of the first pairs that are not among the second; both are in order of time.
fn only_in<'a>(these: &'a [Pair], others: &[Pair]) -> Vec<&'a Pair> {
    let same = |pair: &Pair| {
        let place = others.partition_point(|other| other.time < pair.time);
        others[place..]
            .iter()
            .take_while(|other| other.time == pair.time)
            .any(|other| other == pair)
    };
    these.iter().filter(|pair| !same(pair)).collect()
}

/// How far beside its time the readings of a pair may lie.
fn margin(scene: &Scene<'_>) -> Duration {
    let parts = [
        scene.setup.max_gap.0.saturating_mul(2),
        scene.setup.lag.0.saturating_abs(),
        scene.reference.stands_for.0.saturating_mul(2),
    ];
    Duration(parts.into_iter().fold(0, i64::saturating_add))
}
