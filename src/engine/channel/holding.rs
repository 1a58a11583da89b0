//! While a correction is held: it stands as it was issued, for a limited time, and is said again as
//! its uncertainty grows.

use super::applying::judged_again;
use super::publishing::{InForce, Publishing, horizon, renewal};
use super::{Scene, conformity};
use crate::event::{Cause, Correction, Output, Rung};
use crate::report::Report;
use crate::setup::ChannelSetup;
use crate::time::{Duration, Timestamp};

/// Its u is looked at in as many parts of the time that is left.
const LOOKS: i64 = 16;

impl Publishing {
    /// How long the correction in force may be held.
    pub(crate) fn hold_limit(&self, setup: &ChannelSetup) -> Duration {
        setup.hold_limit.unwrap_or_else(|| {
            self.correction()
                .map_or(Duration::ZERO, |document| horizon(&document.window, 4, 1.0))
        })
    }

    /// Holds the correction in force until `until`: a document is issued when this begins, when its
    /// cause changes, and each time that u has grown by a publish step.
    pub(crate) fn hold(
        &mut self,
        until: Timestamp,
        because: Cause,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let Some(held) = &mut self.in_force else {
            return;
        };
        let candidate = held_correction(held, until, because, scene);
        let before = &held.correction;
        let u = candidate.standard_uncertainty;
        let grown = u - before.standard_uncertainty > scene.setup.publish.step * u;
        let outlived = scene.now >= renewal(before) && candidate.valid_until > before.valid_until;
        let said = |document: &Correction| (document.rung, document.because);
        let news = said(before) != said(&candidate) || grown || outlived;
        if news && u.is_finite() {
            self.issued += 1;
            *held.correction = Correction {
                issue_number: self.issued,
                ..candidate
            };
            report.say(Output::Correction(held.correction.clone()));
        }
        let look = Duration(until.since(scene.now).0 / LOOKS + 1);
        let next = scene.now.plus(look).min(until);
        let renewal = renewal(&held.correction);
        held.review = if renewal > scene.now {
            next.min(renewal)
        } else {
            next
        };
    }
}

/// The correction in force as it is to be said while it is held: the same polynomial, with the
/// uncertainty that it has by now. A polynomial's covariance grows with the distance from its
/// pairs. A constant's does not; a slope of zero joins it, as uncertain as that of a straight line
/// through the same window (12 u²/T², from the variance of evenly spread times).
fn held_correction(
    held: &InForce,
    until: Timestamp,
    because: Cause,
    scene: &Scene<'_>,
) -> Correction {
    let mut document = (*held.correction).clone();
    let covered = document.window.to.since(document.window.from).days();
    if document.zero.len() == 1
        && covered > 0.0
        && let Some(variance) = document.covariance.first().and_then(|row| row.first())
    {
        let slope = 12.0 * variance / (covered * covered);
        document.zero.push(0.0);
        for row in &mut document.covariance {
            row.insert(1, 0.0);
        }
        let mut row = vec![0.0; document.covariance.len() + 1];
        row[1] = slope;
        document.covariance.insert(1, row);
    }
    let (correction, variance) = judged_again(&document, scene.now);
    let u = (variance + held.rest_variance).sqrt();
    let expanded = document.coverage_factor * u + held.suppressed_size;
    if !document.suppressed {
        let conformity = conformity::state(correction, u, document.coverage_factor * u, scene);
        document.zone = conformity.zone();
        document.accepted = conformity.accepted();
    }
    Correction {
        issued: scene.now,
        valid_from: scene.now,
        // A consumer that misses the next one must not hold it longer than permitted.
        valid_until: until.min(scene.now.plus(scene.setup.publish.max_age)),
        rung: Rung::Hold,
        because: Some(because),
        correction,
        standard_uncertainty: u,
        expanded_uncertainty: expanded,
        corrected_zone: conformity::state(0.0, u, expanded, scene).zone(),
        supersedes: None,
        ..document
    }
}
