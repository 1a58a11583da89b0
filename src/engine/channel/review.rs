//! When the fit is judged anew, and what follows from it: judgement → ladder and publishing →
//! alarms.

use super::judgement::Judgement;
use super::{Channel, Scene};
use crate::event::{Conformity, Subject};
use crate::report::Report;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// A judgement solves and weighs all degrees and drafts a document, and so costs tens of times what
/// a pair's insertion does. It is due when this part of the window is new since the last (in
/// windows up to this size: every pair), when segments closed on which the degrees' weights rest,
/// while an alarm is on its way to another state (its delay counts pairs) …
const JUDGED_PART: u64 = 64;
/// … or when the plain fit at its newest pair has moved by this part of a publish step, or away
/// from where the correction in force went meanwhile. (The
/// publish step is shortened by as much. What the mean over degrees moves more than that between
/// two judgements stays unseen until the next: measured, at most a fifth of a step beyond the
/// step.)
pub(super) const MOVED_PART: f64 = 0.125;

/// A forecast raises its alarm from this weight of the degrees above 0 in the mean on: evidence of
/// 9 to 1 that there is a drift at all. The announced degree comes too late for it: a drift that
/// has begun within the window is a curve to it, with correlated residuals.
const DRIFT_WEIGHT: f64 = 0.9;

/// The last judgement in numbers.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Judged {
    pub(super) degree: u8,
    pub(super) correction: f64,
    pub(super) u: f64,
    pub(super) conformity: Conformity,
    /// The newest pair's phenomenon time, if there was one.
    newest: Option<Timestamp>,
    /// What the plain fit said there.
    plain: Option<f64>,
    /// The degree with the most weight, by which it said so.
    leading: usize,
    /// The newest group of segments that the degrees' weights rested on.
    group: Option<i64>,
}

impl Channel {
    /// Whether the pairs since the last judgement may have brought news.
    pub(super) fn is_worth_judging(&self, scene: &Scene<'_>) -> bool {
        let unjudged = self.stretch.unjudged();
        if unjudged == 0 {
            return false;
        }
        let is_part = unjudged.saturating_mul(JUDGED_PART) >= self.stretch.fit().window().rows();
        if is_part || self.alarms.are_moving() {
            return true;
        }
        let Some(judged) = self.stretch.judged() else {
            return true;
        };
        if judged.group != self.stretch.fit().newest_group() {
            return true;
        }
        match (judged.plain, self.plain(judged.leading)) {
            (Some(before), Some(now)) => {
                let moved = now - before;
                let newest = self.stretch.fit().window().newest();
                let foreseen = match (judged.newest, newest) {
                    (Some(then), Some(newest)) => self.publishing.moved(then, newest),
                    _ => 0.0,
                };
                let news = MOVED_PART * scene.setup.publish.step * judged.u;
                // A correction moves against its error.
                moved.abs() > news || (moved + foreseen).abs() > news
            }
            _ => true,
        }
    }

    /// What the plain fit of this degree says at the newest pair.
    fn plain(&self, degree: usize) -> Option<f64> {
        let window = self.stretch.fit().window();
        window.expected(degree, window.newest()?)
    }

    /// Judges the fit as it is now; publishes and alarms as needed.
    pub(super) fn judge(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        let fresh = self.stretch.begin_judgement();
        let judgement = self.judgement(scene, report);
        if let Some(judgement) = &judgement {
            self.note_judged(judgement);
        }
        self.climb(judgement.as_ref(), scene, report);
        let Some(judgement) = judgement else { return };
        let correction = self.publishing.correction();
        let corrected_zone = correction.and_then(|document| document.corrected_zone);
        let declared = scene.setup.declared_variance(scene.reference);
        let forecast = self.outlook.consider(
            &judgement,
            (self.stretch.fit(), declared),
            corrected_zone,
            scene,
            report,
        );
        // A review that only time brought about says nothing new: an alarm's delay counts pairs,
        // that of a forecast the segments that it rests on.
        if fresh {
            self.alarms.judge(&judgement, scene, report);
        }
        if let Some(forecast) = forecast {
            let steady = judgement.published.weights.first().copied().unwrap_or(1.0);
            let drifts = 1.0 - steady >= DRIFT_WEIGHT;
            self.alarms.forecast(forecast, drifts, scene, report);
        }
    }

    /// What the fit means now; `None` while there is none, or where its numbers can't be held.
    pub(super) fn judgement(
        &self,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> Option<Judgement> {
        let declared = scene.setup.declared_variance(scene.reference);
        let published = self.stretch.fit().published_at_least(declared)?;
        let judgement = Judgement::of(published, self.stretch.residuals(), scene);
        if judgement.is_none() {
            report.notice(
                scene.now,
                Subject::Channel(scene.id),
                "fit-not-finite",
                || {
                    format!(
                        "{}: the fit's numbers are too large to hold; look at the indications and \
                         the reference values",
                        scene.setup.name
                    )
                },
            );
        }
        judgement
    }

    fn note_judged(&mut self, judgement: &Judgement) {
        let leading = leading(&judgement.published.weights);
        self.stretch.note_judged(Judged {
            degree: judgement.published.degree,
            correction: 0.0 - judgement.error,
            u: judgement.u,
            conformity: judgement.conformity,
            newest: self.stretch.fit().window().newest(),
            plain: self.plain(leading),
            leading,
            group: self.stretch.fit().newest_group(),
        });
    }
}

/// The place of the largest weight; the first of equal ones.
fn leading(weights: &[f64]) -> usize {
    let mut best = 0;
    for (place, weight) in weights.iter().enumerate() {
        if *weight > weights[best] {
            best = place;
        }
    }
    best
}
