//! A station beside publishing: what lies ahead of the channel, said when something in it changed
//! notably.
//!
//! The line that forecasts rest on is fitted anew when segments closed; between that, conformity
//! follows every judgement. A new outlook is issued when a word in it changed (zone, acceptance,
//! what can be forecast, the staircase, the cadence's answer), when the probability of conformance
//! moved by 0.05, the drift rate by `step` of its uncertainty, or an instant by a tenth of the time
//! to it; and before its validity ends. A channel without limits has no outlook.

use super::judgement::Judgement;
use super::publishing::valid_until;
use super::{Scene, forecast};
use crate::cached::Cached;
use crate::event::{
    AsFound, Cadence, Conformity, Drift, Outlook, Output, Recalibration, TimeToLimit, Zone,
};
use crate::fit::Fit;
use crate::fit::line::RecentLine;
use crate::report::Report;
use crate::setup::{ChannelId, ChannelSetup};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// A probability of conformance has changed when it moved by so much.
const PROBABILITY_STEP: f64 = 0.05;
/// An instant ahead has changed when it moved by 1/this of the time to it …
const TIME_PARTS: i64 = 10;
/// … and by 1/this of the time that the line covers (a segment of 64 is no news).
const LENGTH_PARTS: i64 = 50;

/// The state of the station.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct OutlookStation {
    in_force: Option<Box<Outlook>>,
    /// When to look whether it should be renewed or withdrawn.
    review: Option<Timestamp>,
    line: Option<RecentLine>,
    /// What the line says of the drift.
    #[serde(skip)]
    drift: Cached<Option<Drift>>,
    /// The newest group of segments that the line rests on.
    group: Option<i64>,
    /// The last result as found.
    as_found: Option<AsFound>,
}

impl OutlookStation {
    /// The outlook in force.
    pub(crate) fn outlook(&self) -> Option<&Outlook> {
        self.in_force.as_deref()
    }

    /// An outlook that begins anew, of the same sensor.
    pub(crate) fn anew(&self) -> Self {
        Self {
            as_found: self.as_found,
            ..Self::default()
        }
    }

    /// A service found this. The newest found counts, in whatever order people tell.
    pub(crate) fn note_as_found(&mut self, as_found: AsFound) {
        if self.as_found.is_none_or(|held| held.at <= as_found.at) {
            self.as_found = Some(as_found);
        }
    }

    /// Another sensor is in place: nothing is known of it.
    pub(crate) fn forget_as_found(&mut self) {
        self.as_found = None;
    }

    /// When to look again.
    pub(crate) fn wake(&self) -> Option<Timestamp> {
        self.review
    }

    /// Whether it is time to see if the outlook should be renewed or withdrawn.
    pub(crate) fn is_due(&self, now: Timestamp) -> bool {
        self.wake().is_some_and(|review| review <= now)
    }

    /// Looks at a judgement and issues an outlook if one is due. If segments closed since the last
    /// forecast, returns the new one: evaluations of its alarm are counted in segments.
    pub(crate) fn consider(
        &mut self,
        judgement: &Judgement,
        (fit, declared_variance): (&Fit, f64),
        corrected_zone: Option<Zone>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> Option<TimeToLimit> {
        if !has_outlook(scene.setup) {
            return None;
        }
        let group = fit.newest_group();
        let segments_closed = group != self.group;
        if segments_closed {
            self.group = group;
            self.line = fit
                .recent_line(declared_variance, judgement.level)
                .filter(RecentLine::is_finite);
            self.drift.forget();
        }
        let candidate = self.candidate(judgement, corrected_zone, scene);
        let fresh = segments_closed.then_some(candidate.time_to_limit);
        if candidate.valid_until > scene.now && self.differs(&candidate, scene) {
            let validity = candidate.valid_until.since(candidate.issued).0;
            self.review = Some(candidate.issued.plus(Duration(validity / 4 * 3)));
            self.in_force = Some(Box::new(candidate.clone()));
            report.say(Output::Outlook(Box::new(candidate)));
        }
        fresh
    }

    /// After a review that brought no new outlook: withdraws what has expired, else looks again
    /// when it does.
    pub(crate) fn expire(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        let Some(end) = self.in_force.as_ref().map(|held| held.valid_until) else {
            return;
        };
        if scene.now >= end {
            self.withdraw(scene.id, scene.now, report);
        } else if self.is_due(scene.now) {
            self.review = Some(end);
        }
    }

    /// Clears the outlook, if there is one.
    pub(crate) fn withdraw(&mut self, channel: ChannelId, at: Timestamp, report: &mut Report<'_>) {
        self.review = None;
        if self.in_force.take().is_some() {
            report.say(Output::OutlookWithdrawn { channel, at });
        }
    }

    /// A new stretch begins: what lay ahead of the old one does not lie ahead of this.
    pub(crate) fn leave_stretch(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.line = None;
        self.drift.forget();
        self.group = None;
        self.withdraw(scene.id, scene.now, report);
    }

    /// The configuration was edited: looks again when the channel acts next, or withdraws what
    /// nobody asks for any more.
    pub(crate) fn edit(
        &mut self,
        channel: ChannelId,
        after: &ChannelSetup,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        self.drift.forget();
        if has_outlook(after) {
            self.review = self.in_force.as_ref().map(|_| Timestamp(i64::MIN));
        } else {
            self.withdraw(channel, now, report);
        }
    }

    /// Now was wrong and steps back: drops what was issued later.
    pub(crate) fn step_back(&mut self, channel: ChannelId, to: Timestamp, report: &mut Report<'_>) {
        self.review = self.review.map(|review| review.min(to));
        if self.outlook().is_some_and(|held| held.issued > to) {
            self.withdraw(channel, to, report);
        }
    }

    fn candidate(
        &self,
        judgement: &Judgement,
        corrected_zone: Option<Zone>,
        scene: &Scene<'_>,
    ) -> Outlook {
        let setup = scene.setup;
        let line = self.line.as_ref();
        let drift = *self
            .drift
            .get_or_find(|| line.map(|line| forecast::drift(line, setup.coverage)));
        let factor = drift.map(|drift| drift.coverage_factor);
        let time_to_limit = forecast::time_to_limit(line.zip(factor), judgement, setup, scene.now);
        Outlook {
            channel: scene.id,
            issued: scene.now,
            valid_until: valid_until(&judgement.published, scene),
            at: judgement.published.origin,
            error: judgement.error,
            expanded_uncertainty: judgement.k * judgement.u,
            coverage_factor: judgement.k,
            limit: setup.max_permissible_error,
            rule: setup.decision_rule,
            conformity: judgement.conformity,
            corrected_zone,
            drift,
            time_to_limit,
            recalibration: Recalibration {
                by: forecast::recalibrate_by(time_to_limit, scene.now),
                staircase: self.as_found,
            },
            cadence: line.and_then(|line| forecast::cadence(line, setup)),
        }
    }

    /// Whether the candidate says something notable that the outlook in force does not.
    fn differs(&self, candidate: &Outlook, scene: &Scene<'_>) -> bool {
        let Some(held) = self.outlook() else {
            return true;
        };
        let outlived = self.is_due(scene.now) && candidate.valid_until > held.valid_until;
        if outlived || words(held) != words(candidate) {
            return true;
        }
        let moved = (probability(held) - probability(candidate)).abs();
        let step = scene.setup.publish.step;
        moved > PROBABILITY_STEP
            || rate_moved(held, candidate, step)
            || instants_moved(held, candidate)
    }
}

/// Whether anything is to be said of what lies ahead.
fn has_outlook(setup: &ChannelSetup) -> bool {
    setup.max_permissible_error.is_some() || setup.max_drift_rate.is_some()
}

/// What an outlook says in words: any change is notable.
fn words(outlook: &Outlook) -> impl PartialEq + use<> {
    let refused = match outlook.conformity {
        Conformity::Stated { .. } => None,
        Conformity::Refused(reason) => Some(reason),
    };
    let kind = match outlook.time_to_limit {
        TimeToLimit::Forecast {
            limit,
            central,
            latest,
            ..
        } => (0, limit > 0.0, central.is_some(), latest.is_some()),
        TimeToLimit::NotResolvable { .. } => (1, false, false, false),
        TimeToLimit::BeyondHorizon { .. } => (2, false, false, false),
        TimeToLimit::Reached => (3, false, false, false),
        TimeToLimit::NoLine => (4, false, false, false),
        TimeToLimit::NoLimit => (5, false, false, false),
    };
    (
        (outlook.conformity.zone(), outlook.conformity.accepted()),
        (refused, outlook.rule, outlook.limit),
        outlook.corrected_zone,
        kind,
        outlook.drift.map(|drift| drift.basis),
        outlook.recalibration.staircase,
        outlook.cadence.as_ref().map(Cadence::is_sufficient),
    )
}

fn probability(outlook: &Outlook) -> f64 {
    match outlook.conformity {
        Conformity::Stated { probability, .. } => probability,
        Conformity::Refused(_) => 0.0,
    }
}

/// Whether the drift rate or its uncertainty moved by `step` of the latter.
fn rate_moved(held: &Outlook, candidate: &Outlook, step: f64) -> bool {
    let (Some(before), Some(after)) = (held.drift, candidate.drift) else {
        return held.drift.is_some() != candidate.drift.is_some();
    };
    let notable = step * after.expanded_uncertainty;
    (before.rate - after.rate).abs() > notable
        || (before.expanded_uncertainty - after.expanded_uncertainty).abs() > notable
}

/// Whether an instant ahead moved notably.
fn instants_moved(held: &Outlook, candidate: &Outlook) -> bool {
    let length = candidate
        .drift
        .map_or(Duration::ZERO, |drift| drift.to.since(drift.from));
    let pairs = instants(held).into_iter().zip(instants(candidate));
    pairs.into_iter().any(|instants| match instants {
        (Some(before), Some(after)) => {
            let ahead = after.since(candidate.issued).0 / TIME_PARTS;
            let notable = ahead.max(length.0 / LENGTH_PARTS);
            after.since(before).0.saturating_abs() > notable
        }
        (before, after) => before.is_some() != after.is_some(),
    })
}

/// The instants that a forecast names. The horizon moves with every pair and is none of them.
fn instants(outlook: &Outlook) -> [Option<Timestamp>; 3] {
    match outlook.time_to_limit {
        TimeToLimit::Forecast {
            earliest,
            central,
            latest,
            ..
        } => [Some(earliest), central, latest],
        TimeToLimit::NotResolvable { not_before } => [Some(not_before), None, None],
        _ => [None; 3],
    }
}
