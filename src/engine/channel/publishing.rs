//! Fifth station: when a new correction is issued and how long it holds. Whether it is issued at
//! all, held or taken back is the ladder's to decide.
//!
//! *Dead zone*: a correction is applied from |ĉ| ≥ `dead_zone`·u (2u) and dropped below half of
//! that; while it is suppressed the document's polynomial is zero and the largest |ĉ(t)| over its
//! validity is inside U.
//!
//! *Publish step*: a new document when over its validity it would differ from the one in force by
//! more than `step`·u, when u or U (or what is suppressed inside U) has changed by more than that
//! part, when stretch, degree or zones differ, or when three quarters of the validity have passed
//! and a new one would hold longer.
//!
//! *Validity*: `max_age`, but not past the fit's own horizon behind the newest pair: a quarter of
//! the time that the window covers where a degree above 1 has weight, else half of it. (The
//! variance of a straight line at the window's end grows by 13/4 half a window ahead, so that u has
//! not quite doubled; a parabola's by 49/9 a quarter ahead: from `(1/n) Σ (2j+1) P_j(1+2f)²`,
//! Legendre polynomials `P_j`, f in windows.) Weight on degrees above the announced one shortens
//! that in proportion, down to a quarter: a curve that may yet prove to be noise is not held for
//! long when pairs stop. Young windows hold at least twice the mean time between pairs, so that a
//! document outlives the wait for the next pair.

use super::applying::{Acting, apply, at_level};
use super::drafting::Draft;
use super::judgement::{Judgement, polynomial};
use super::levels::Corner;
use super::review::MOVED_PART;
use super::{Scene, levels};
use crate::event::{Corrected, Correction, Output, Superseding, WindowSeen};
use crate::fit::Published;
use crate::report::Report;
use crate::time::{Duration, Timestamp};
use crate::track::Sample;
use serde::{Deserialize, Serialize};

/// A correction is dropped below this part of what it is applied from.
const DROPPED_BELOW: f64 = 0.5;
/// Least part of the horizon that weight on unannounced degrees leaves.
const LEAST_SHARE: f64 = 0.25;
/// A degree above 1 has weight from here on.
const HAS_WEIGHT: f64 = 0.01;
/// Part of an error whose change is rounding, not news: keeps a noiseless stream (u = 0) from
/// issuing a document per pair.
pub(super) const NEGLIGIBLE: f64 = 1e-9;
/// Instants at which two polynomials are compared over the validity; polynomials of degree ≤ 5
/// can't hide a difference of note between nine of them.
const COMPARED: u32 = 8;

/// The state of the station.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Publishing {
    /// Documents issued so far.
    pub(super) issued: u64,
    /// Whether the dead zone lets the correction through.
    applied: bool,
    /// What the next document is to say of those before it.
    superseding: Option<Superseding>,
    pub(super) in_force: Option<InForce>,
}

/// The correction in force.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct InForce {
    pub(super) correction: Box<Correction>,
    /// Part of u² that is the same at every instant.
    pub(super) rest_variance: f64,
    /// What U has on top of k·u: |ĉ| while suppressed.
    pub(super) suppressed_size: f64,
    /// When to see next whether it should be renewed or withdrawn.
    pub(super) review: Timestamp,
}

impl Publishing {
    /// Nothing in force; documents are counted on from `issued`.
    pub(crate) fn new(issued: u64) -> Self {
        Self {
            issued,
            applied: false,
            superseding: None,
            in_force: None,
        }
    }

    /// Documents issued so far.
    pub(crate) fn issued(&self) -> u64 {
        self.issued
    }

    /// The correction in force.
    pub(crate) fn correction(&self) -> Option<&Correction> {
        self.in_force.as_ref().map(|held| &*held.correction)
    }

    /// By how much the correction in force changes from one time to another; 0 where there is none.
    pub(crate) fn moved(&self, from: Timestamp, to: Timestamp) -> f64 {
        self.correction().map_or(0.0, |document| {
            let at =
                |time: Timestamp| polynomial(&document.zero, time.since(document.origin).days());
            at(to) - at(from)
        })
    }

    /// When to look again.
    pub(crate) fn wake(&self) -> Option<Timestamp> {
        self.in_force.as_ref().map(|held| held.review)
    }

    /// Has the correction in force looked at when the channel acts next.
    pub(crate) fn review(&mut self) {
        if let Some(held) = &mut self.in_force {
            held.review = Timestamp(i64::MIN);
        }
    }

    /// The next document takes the place of those before it, as this order demands, and is issued
    /// whether it differs or not.
    pub(crate) fn supersede(&mut self, order: &str) {
        if self.issued > 0 {
            self.superseding = Some(Superseding {
                issue_number: self.issued,
                order: order.to_owned(),
            });
        }
    }

    /// Whether the next document is to take the place of those before it.
    pub(crate) fn is_to_supersede(&self) -> bool {
        self.superseding.is_some()
    }

    /// A new stretch begins: the dead zone has not let its correction through yet.
    pub(crate) fn leave_stretch(&mut self) {
        self.applied = false;
    }

    /// Whether what is in force, if anything, rests on this stretch.
    pub(crate) fn is_of(&self, stretch: u32) -> bool {
        self.correction()
            .is_none_or(|document| document.stretch == stretch)
    }

    /// Drops what is in force. Whether there was anything.
    pub(crate) fn forget(&mut self) -> bool {
        self.applied = false;
        self.in_force.take().is_some()
    }

    /// Now was wrong and steps back: drops what was issued later. Whether there was any.
    pub(crate) fn step_back(&mut self, to: Timestamp) -> bool {
        let Some(held) = &mut self.in_force else {
            return false;
        };
        held.review = held.review.min(to);
        let false_time = held.correction.issued > to;
        if false_time {
            self.in_force = None;
            self.applied = false;
        }
        false_time
    }

    /// Looks at a judgement and issues a document if one is due.
    pub(crate) fn consider(
        &mut self,
        judgement: &Judgement,
        stretch: u32,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let published = &judgement.published;
        let corners = levels::corners(published);
        let size = levels::largest_significance(published, &corners, judgement.rest_variance);
        let edge = if self.applied { DROPPED_BELOW } else { 1.0 };
        self.applied = size >= edge * scene.setup.publish.dead_zone;
        let valid_until = valid_until(published, scene);
        let hidden = if self.applied {
            0.0
        } else {
            largest(published, &corners, scene.now, valid_until)
        };
        let candidate = Draft {
            issue_number: self.issued + 1,
            suppressed: !self.applied,
            valid_until,
            hidden,
            stretch,
            supersedes: self.superseding.clone(),
        }
        .of(judgement, scene);
        if candidate.valid_until <= scene.now {
            return;
        }
        let supersedes = self.superseding.is_some();
        if !supersedes && !self.differs(&candidate, hidden, &corners, scene) {
            return;
        }
        self.superseding = None;
        self.issued += 1;
        self.in_force = Some(InForce {
            rest_variance: judgement.rest_variance,
            suppressed_size: hidden,
            review: renewal(&candidate),
            correction: Box::new(candidate.clone()),
        });
        report.say(Output::Correction(Box::new(candidate)));
    }

    /// Whether it is time to see if the correction in force should be renewed.
    pub(crate) fn is_due(&self, now: Timestamp) -> bool {
        self.wake().is_some_and(|review| review <= now)
    }

    /// Whether the correction in force no longer holds; else it is looked at again when it ends.
    pub(crate) fn has_expired(&mut self, now: Timestamp) -> bool {
        let Some(held) = &mut self.in_force else {
            return false;
        };
        let end = held.correction.valid_until;
        if held.review <= now {
            held.review = end;
        }
        now >= end
    }

    /// Applies the correction in force to an indication.
    pub(crate) fn correct(&self, sample: &Sample, scene: &Scene<'_>) -> Option<Corrected> {
        let held = self.in_force.as_ref()?;
        let document = &held.correction;
        let earliest = document.valid_from.minus(scene.setup.lateness);
        if sample.time < earliest || sample.time > document.valid_until {
            return None;
        }
        let acting = Acting::of(document, sample.time, scene);
        let applied = apply(document, sample.time, sample.value, acting.values)?;
        let correction = applied.correction;
        let variance = applied.variance + held.rest_variance;
        let expanded = document.coverage_factor * variance.sqrt() + held.suppressed_size;
        let expanded = expanded + acting.assumed_effect;
        let corrected = sample.value + correction;
        (corrected.is_finite() && expanded.is_finite()).then_some(Corrected {
            channel: scene.id,
            phenomenon: sample.time,
            indication: sample.value,
            correction,
            corrected,
            expanded_uncertainty: expanded,
            beyond_range: applied.beyond || acting.beyond,
            influences_assumed: acting.assumed,
            issue_number: document.issue_number,
        })
    }

    /// Whether the candidate, with so much suppressed inside its U, says something that the
    /// document in force does not.
    fn differs(
        &self,
        candidate: &Correction,
        hidden: f64,
        corners: &[Corner],
        scene: &Scene<'_>,
    ) -> bool {
        let Some(in_force) = &self.in_force else {
            return true;
        };
        let held = &in_force.correction;
        let said = |document: &Correction| {
            (
                document.stretch,
                document.rung,
                document.degree,
                document.suppressed,
                document.zone,
                document.accepted,
                document.rule,
                document.corrected_zone,
                document.span.len(),
                claimed(document),
            )
        };
        let outlived = scene.now.since(held.issued).0 / 3
            >= held.valid_until.since(held.issued).0 / 4
            && candidate.valid_until > held.valid_until;
        if outlived || said(held) != said(candidate) {
            return true;
        }
        let u = candidate.standard_uncertainty;
        let size = held.correction.abs().max(candidate.correction.abs());
        let seen = 1.0 - MOVED_PART;
        let step = (seen * scene.setup.publish.step * u).max(NEGLIGIBLE * size);
        let expanded = candidate.expanded_uncertainty - held.expanded_uncertainty;
        (u - held.standard_uncertainty).abs() > step
            || expanded.abs() > candidate.coverage_factor * step
            || (hidden - in_force.suppressed_size).abs() > step
            || greatest_difference(held, candidate, corners) > step
    }
}

/// When three quarters of a document's validity have passed.
pub(super) fn renewal(document: &Correction) -> Timestamp {
    let validity = document.valid_until.since(document.issued).0;
    document.issued.plus(Duration(validity / 4 * 3))
}

/// Which influence quantities are in a correction.
fn claimed(document: &Correction) -> Vec<bool> {
    document
        .influences
        .iter()
        .map(|term| term.in_force)
        .collect()
}

/// Greatest difference of two corrections, from the issue of the second to the end of the first, at
/// the ends and the centres of what the second has seen.
fn greatest_difference(held: &Correction, candidate: &Correction, corners: &[Corner]) -> f64 {
    instants(candidate.issued, held.valid_until)
        .flat_map(|time| {
            corners.iter().map(move |&(level, influences)| {
                let at = |document| at_level(document, time, level, influences);
                (at(held) - at(candidate)).abs()
            })
        })
        .fold(0.0, f64::max)
}

/// Largest |ê| from `from` to `to`, and at the newest pair, at the ends and the centres of what the
/// fit has seen.
fn largest(published: &Published, corners: &[Corner], from: Timestamp, to: Timestamp) -> f64 {
    corners
        .iter()
        .map(|&(level, influences)| published.at_level(level, influences))
        .flat_map(|curve| {
            instants(from, to)
                .chain([published.origin])
                .map(move |time| {
                    let days = time.since(published.origin).days();
                    polynomial(&curve.coefficients, days).abs()
                })
        })
        .fold(0.0, f64::max)
}

/// Instants evenly spread from `from` to `to`, both included; `from` alone where `to` is earlier.
fn instants(from: Timestamp, to: Timestamp) -> impl Iterator<Item = Timestamp> {
    let length = to.max(from).since(from).0;
    (0..=COMPARED)
        .map(move |part| from.plus(Duration(length / i64::from(COMPARED) * i64::from(part))))
}

/// Until when a document issued now may hold.
pub(super) fn valid_until(published: &Published, scene: &Scene<'_>) -> Timestamp {
    let curved: f64 = published.weights.iter().skip(2).sum();
    let part = if curved >= HAS_WEIGHT || published.degree >= 2 {
        4
    } else {
        2
    };
    let horizon = horizon(&published.window, part, announced_share(published));
    let by_age = scene.now.plus(scene.setup.publish.max_age);
    by_age.min(published.origin.plus(horizon))
}

/// The weight of the announced degree and those below it, but at least [`LEAST_SHARE`].
fn announced_share(published: &Published) -> f64 {
    let announced = usize::from(published.degree) + 1;
    let share: f64 = published.weights.iter().take(announced).sum();
    share.clamp(LEAST_SHARE, 1.0)
}

/// `share` of 1/`part` of the time covered, but at least twice the mean time between pairs.
pub(super) fn horizon(window: &WindowSeen, part: i64, share: f64) -> Duration {
    let covered = window.to.since(window.from).0;
    let steps = i64::try_from(window.pairs.saturating_sub(1).max(1)).unwrap_or(i64::MAX);
    let between = covered / steps;
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a part of a length of time, in nanoseconds"
    )]
    let ahead = (share * (covered / part) as f64) as i64;
    Duration(ahead.max(between.saturating_mul(2)))
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    fn window(hours: i64, pairs: u64) -> WindowSeen {
        WindowSeen {
            from: Timestamp(0),
            to: Timestamp(0).plus(Duration::from_seconds(hours * 3600)),
            pairs,
            segments: 0,
            effective_sample_size: 0.0,
            lag_one: 0.0,
        }
    }

    #[test]
    fn the_horizon_is_a_part_of_the_window_but_outlives_the_next_pair() {
        let hours = |window: &WindowSeen, part| horizon(window, part, 1.0).seconds() / 3600.0;
        assert_eq!(hours(&window(80, 81), 4), 20.0);
        assert_eq!(hours(&window(80, 81), 2), 40.0);
        assert_eq!(hours(&window(1, 2), 4), 2.0);
        assert_eq!(hours(&window(0, 1), 4), 0.0);
    }

    /// A parabola that has most of the weight without being announced is held a quarter as long.
    #[test]
    fn what_is_not_announced_is_not_held_for_long() {
        let share = |degree, weights: [f64; 3]| {
            let mut published = super::super::judgement::tests::published(&[0.0]);
            published.degree = degree;
            published.weights = weights.to_vec();
            announced_share(&published)
        };
        assert_eq!(share(0, [0.125, 0.0, 0.875]), 0.25);
        assert_eq!(share(0, [0.5, 0.25, 0.25]), 0.5);
        assert_eq!(share(1, [0.5, 0.25, 0.25]), 0.75);
        assert_eq!(share(2, [0.0, 0.25, 0.75]), 1.0);
        let hours = horizon(&window(80, 81), 4, 0.25).seconds() / 3600.0;
        assert_eq!(hours, 5.0);
    }

    /// The growth of variance that the validity's limits are derived from: `Σ (2j+1) P_j(1+2f)²`
    /// over `(p+1)²`.
    #[test]
    fn the_limits_of_validity_follow_from_the_price_of_degree() {
        let growth = |degree: usize, ahead: f64| {
            let x = 1.0 + 2.0 * ahead;
            let legendre = [1.0, x, 0.5 * (3.0 * x * x - 1.0)];
            let sum: f64 = (0..=degree)
                .map(|j| (2 * j + 1) as f64 * legendre[j] * legendre[j])
                .sum();
            sum / ((degree + 1) * (degree + 1)) as f64
        };
        assert!((growth(1, 0.5) - 13.0 / 4.0).abs() < 1e-12);
        assert!((growth(2, 0.25) - 49.0 / 9.0).abs() < 0.01);
        assert!(growth(1, 0.5).sqrt() < 2.0);
    }
}
