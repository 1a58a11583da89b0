//! What a correction document says of a judgement.

use super::judgement::Judgement;
use super::{Scene, conformity};
use crate::event::{Correction, InfluenceTerm, Rung, Superseding};
use crate::fit::Published;
use crate::fit::basis::MAX_INFLUENCES;
use crate::time::Timestamp;

/// What a document says beside its judgement.
pub(super) struct Draft {
    pub(super) issue_number: u64,
    /// The dead zone suppresses the correction.
    pub(super) suppressed: bool,
    pub(super) valid_until: Timestamp,
    /// What is suppressed, to be inside U.
    pub(super) hidden: f64,
    pub(super) stretch: u32,
    /// Why it takes the place of what was issued before.
    pub(super) supersedes: Option<Superseding>,
}

impl Draft {
    /// The document.
    pub(super) fn of(&self, judgement: &Judgement, scene: &Scene<'_>) -> Correction {
        let published = &judgement.published;
        let suppressed = self.suppressed;
        let offered = |&coefficient: &f64| if suppressed { 0.0 } else { 0.0 - coefficient };
        let terms = &published.terms;
        let expanded = judgement.k * judgement.u + self.hidden;
        let corrected = conformity::state(0.0, judgement.u, expanded, scene);
        Correction {
            channel: scene.id,
            issue_number: self.issue_number,
            issued: scene.now,
            valid_from: scene.now,
            valid_until: self.valid_until,
            rung: Rung::Advise,
            because: None,
            origin: published.origin,
            degree: published.degree,
            weights: published.weights.clone(),
            zero: published.coefficients.iter().map(offered).collect(),
            span: published.span.iter().map(offered).collect(),
            span_centre: terms.centre.x + 0.0,
            span_side: terms.span_side,
            span_refused: terms.span_refused.filter(|_| published.span.is_empty()),
            influences: influence_terms(published, suppressed, scene),
            suppressed,
            judged_at: judgement.level + 0.0,
            correction: if suppressed {
                0.0
            } else {
                0.0 - judgement.error
            },
            standard_uncertainty: judgement.u,
            coverage_factor: judgement.k,
            expanded_uncertainty: expanded,
            degrees_of_freedom: judgement.nu,
            covariance: published.covariance.clone(),
            rule: scene.setup.decision_rule,
            zone: judgement.conformity.zone(),
            accepted: judgement.conformity.accepted(),
            corrected_zone: corrected.zone(),
            window: published.window,
            criterion: published.criterion.clone(),
            residual_sd: published.residual_sd,
            stretch: self.stretch,
            range: published.terms.learned.x.unwrap_or((0.0, 0.0)),
            supersedes: self.supersedes.clone(),
        }
    }
}

/// What a channel's influence quantities do to its correction.
fn influence_terms(
    published: &Published,
    suppressed: bool,
    scene: &Scene<'_>,
) -> Vec<InfluenceTerm> {
    let terms = &published.terms;
    let count = scene.setup.influences.len().min(MAX_INFLUENCES);
    let term = |place: usize| InfluenceTerm {
        in_force: terms.announced.influences[place] && place < published.influences.len(),
        coefficient: match published.influences.get(place) {
            Some(coefficient) if !suppressed => 0.0 - coefficient,
            _ => 0.0,
        },
        centre: terms.centre.influences[place] + 0.0,
        range: terms.learned.influences[place].unwrap_or((0.0, 0.0)),
    };
    (0..count).map(term).collect()
}
