//! Span terms and influence quantities: when they are announced, and when they are refused.
//!
//! A term is *claimed* once its gain, given everything else that can be told apart, has lasted (see
//! `climb`). Until then the correction is one of the zero only, valid near the levels that were
//! seen. The span is *refused*, and withdrawn if it was claimed, where the level does not vary, or
//! where noise in the regressor would move its slope by more than half of the slope's uncertainty:
//! a noisy reference that is taken from the indication and put on the axis as well makes a slope of
//! nothing.

use crate::fit::basis::{Columns, MAX_INFLUENCES};
use crate::fit::between::Groups;
use crate::fit::climb::{Climb, Verdict};
use crate::fit::gain::{Contest, JUDGING};
use crate::fit::joint::Joint;
use crate::fit::model::Model;
use crate::fit::{Change, Fit, SpanRefusal, Term};
use serde::{Deserialize, Serialize};

/// The effect of noise on the slope may be this part of the slope's standard uncertainty.
const TOLERATED: f64 = 0.5;

/// The claimed terms and what is on its way to change them.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Claims {
    /// Span coefficients: none, one, two, three.
    pub(crate) span: Climb,
    /// Without or with each influence quantity.
    pub(crate) influences: [Climb; MAX_INFLUENCES],
    /// Why the span can't be claimed, as of the last judgement; `None` where none is configured.
    pub(crate) refused: Option<SpanRefusal>,
}

impl Claims {
    /// Nothing is claimed yet: for a span there are too few segments.
    pub(crate) fn new(columns: Columns) -> Self {
        Self {
            span: Climb::default(),
            influences: Default::default(),
            refused: too_few(columns),
        }
    }

    /// Forgets the runs that changes were on their way by.
    pub(crate) fn forget_runs(&mut self) {
        self.span.forget_runs();
        self.influences.iter_mut().for_each(Climb::forget_runs);
    }

    /// The announced model, with this degree of the zero.
    pub(crate) fn model(&self, degree: u8) -> Model {
        Model {
            degree,
            span: self.span.announced.checked_sub(1),
            influences: std::array::from_fn(|j| self.influences[j].announced > 0),
        }
    }
}

/// Why a span can't be claimed while there are too few segments to judge.
fn too_few(columns: Columns) -> Option<SpanRefusal> {
    (columns.span_columns() > 0).then_some(SpanRefusal::FewSegments)
}

impl Joint {
    /// Why a span can't be told from these rows; `None` where it can.
    fn span_refusal(&self, fit: &Fit) -> Option<SpanRefusal> {
        if self.span_columns() == 0 {
            return Some(if self.can_bear_span() {
                SpanRefusal::NoSpread
            } else {
                SpanRefusal::FewSegments
            });
        }
        let noise = self.regressor_noise(fit.setup.span_side(), fit.setup.noise);
        match self.span_noise(self.worth(JUDGING), noise) {
            None => Some(SpanRefusal::NoSpread),
            Some(found) if found.share > TOLERATED * found.slope_u => {
                Some(SpanRefusal::RegressorNoise)
            }
            Some(_) => None,
        }
    }
}

/// Judges the whole announced model after a group of segments closed.
pub(crate) fn decide(fit: &mut Fit, may_raise: bool) -> Option<Change> {
    let columns = fit.window.columns();
    let forced = fit.setup.forced_degree;
    let (joint, when_full) = {
        let groups = Groups::of(&fit.window);
        let joint = Joint::of(&groups.closed, columns, fit.richest(), forced.is_some());
        (joint, groups.when_full)
    };
    let Some(joint) = joint else {
        fit.announced.claims.refused = too_few(columns);
        return None;
    };
    let sides = joint.sides();
    let criterion = fit.setup.criterion;
    let mut change = None;
    if forced.is_none() {
        let contest = joint.zero_contest(&sides);
        let verdict = fit
            .announced
            .zero
            .note(&contest, criterion, when_full, may_raise);
        change = verdict.map(|verdict| fit.change_degree(&contest, verdict));
    }
    if columns.span_columns() > 0 {
        let refused = joint.span_refusal(fit);
        fit.announced.claims.refused = refused;
        let contest = joint.span_contest(&sides);
        let span = &mut fit.announced.claims.span;
        let mut verdict = span.note(
            &contest,
            criterion,
            when_full,
            may_raise && refused.is_none(),
        );
        let is_hopeless = matches!(
            refused,
            Some(SpanRefusal::NoSpread | SpanRefusal::RegressorNoise)
        );
        if is_hopeless && span.announced > 0 {
            let gain = contest.plain_gain(criterion, 0).unwrap_or_default();
            verdict = Some(Verdict::withdrawn(gain));
        }
        if let (None, Some(verdict)) = (&change, verdict) {
            change = Some(fit.change_claim(Term::Span, &contest, verdict, refused));
        }
    }
    for influence in 0..columns.influence_columns() {
        let contest = joint.influence_contest(&sides, influence);
        let climb = &mut fit.announced.claims.influences[influence];
        let verdict = climb.note(&contest, criterion, when_full, may_raise);
        if let (None, Some(verdict)) = (&change, verdict) {
            // Lossless: at most two.
            let term = Term::Influence(influence.to_le_bytes()[0]);
            change = Some(fit.change_claim(term, &contest, verdict, None));
        }
    }
    change
}

impl Fit {
    /// The announced model.
    #[must_use]
    pub fn model(&self) -> Model {
        self.announced.claims.model(self.degree())
    }

    /// Carries a verdict on a span term or an influence quantity out. A span that is refused is
    /// withdrawn as a whole.
    fn change_claim(
        &mut self,
        term: Term,
        contest: &Contest,
        verdict: Verdict,
        refused: Option<SpanRefusal>,
    ) -> Change {
        let criterion = self.setup.criterion;
        let claims = &mut self.announced.claims;
        let climb = match term {
            Term::Zero => &mut self.announced.zero,
            Term::Span => &mut claims.span,
            Term::Influence(j) => &mut claims.influences[usize::from(j)],
        };
        let to = match refused {
            _ if verdict.raises => climb.announced + 1,
            Some(SpanRefusal::NoSpread | SpanRefusal::RegressorNoise) => 0,
            _ => climb.announced.saturating_sub(1),
        };
        Change {
            term,
            from: climb.move_to(to),
            to,
            evidence: contest.evidence(criterion, verdict),
            refused,
        }
    }
}
