//! What a consumer makes of a correction document: the correction and its expanded uncertainty for
//! an indication, by the loops that the documents ask for.

use holdtrue_engine::event::{Correction, Rung};
use holdtrue_engine::setup::SpanSide;
use holdtrue_engine::time::{Duration, Timestamp};

/// A span that takes this part of the indication away can't be solved for the level: no correction
/// is made with it.
const SPAN_MAX: f64 = 0.9;

/// An indication to be corrected.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Indicated {
    /// When it was sampled.
    pub at: Timestamp,
    /// The indication.
    pub value: f64,
    /// The influence quantity then; without meaning where the document has none.
    pub influence: f64,
}

/// A document at work on one indication.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Applied {
    /// What is added to the indication.
    pub correction: f64,
    /// Its standard uncertainty.
    pub u: f64,
    /// Its expanded uncertainty.
    pub expanded: f64,
}

/// The correction of `document` for an indication of a channel that takes readings as late as
/// `lateness`; `None` where it does not hold.
#[must_use]
pub fn apply(document: &Correction, lateness: Duration, indicated: Indicated) -> Option<Applied> {
    let Indicated {
        at,
        value,
        influence,
    } = indicated;
    if at > document.valid_until || at < document.valid_from.minus(lateness) {
        return None;
    }
    let days = |time: Timestamp| time.since(document.origin).days();
    let span = horner(&document.span, days(at));
    let scale = match document.span_side {
        SpanSide::Reference if span.abs() > SPAN_MAX => return None,
        SpanSide::Reference => 1.0 - span,
        SpanSide::Indication => 1.0,
    };
    let felt: f64 = document
        .influences
        .iter()
        .map(|term| term.coefficient * (influence - term.centre))
        .sum();
    let offset = horner(&document.zero, days(at)) + felt;
    let correction = (offset + span * (value - document.span_centre)) / scale;
    let level = match document.span_side {
        SpanSide::Reference => value + correction,
        SpanSide::Indication => value,
    };
    // u is stated at the level that was judged, at the newest pair or, while the correction is
    // held, at its issue. What the fit does not have in it there is the same everywhere.
    let stated_at = match document.rung {
        Rung::Hold => document.issued,
        _ => document.window.to,
    };
    let centre = document.influences.first().map_or(0.0, |term| term.centre);
    let judged = row(document, days(stated_at), document.judged_at, centre);
    let here = row(document, days(at), level, influence);
    let stated = document.standard_uncertainty;
    let rest = stated * stated - variance(&document.covariance, &judged);
    let u = libm::sqrt((rest + variance(&document.covariance, &here) / (scale * scale)).max(0.0));
    // While a correction is suppressed its size is inside U beside k·u.
    let k = document.coverage_factor;
    let beside = document.expanded_uncertainty - k * stated;
    Some(Applied {
        correction,
        u,
        expanded: k * u + beside,
    })
}

/// What each coefficient of the document is multiplied with: powers of time, level times powers of
/// time, the influence quantity, in the covariance's order and as far as it goes.
fn row(document: &Correction, t: f64, level: f64, influence: f64) -> Vec<f64> {
    let powers =
        |count: usize| std::iter::successors(Some(1.0), move |power| Some(power * t)).take(count);
    let level = level - document.span_centre;
    powers(document.zero.len())
        .chain(powers(document.span.len()).map(|power| level * power))
        .chain(
            document
                .influences
                .iter()
                .map(|term| influence - term.centre),
        )
        .take(document.covariance.len())
        .collect()
}

/// A polynomial, constant first.
fn horner(coefficients: &[f64], t: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * t + c)
}

/// Variance of the sum of coefficients, each times its entry of `row`.
fn variance(covariance: &[Vec<f64>], row: &[f64]) -> f64 {
    covariance
        .iter()
        .zip(row)
        .map(|(line, left)| {
            left * line
                .iter()
                .zip(row)
                .map(|(c, right)| c * right)
                .sum::<f64>()
        })
        .sum()
}

#[cfg(test)]
#[allow(clippy::cast_possible_truncation, reason = "a few days in nanoseconds")]
mod tests {
    use super::*;
    use crate::score::chooser::Chooser;
    use crate::score::{library, stream};
    use holdtrue_engine::engine::Engine;
    use holdtrue_engine::event::{
        CriterionValues, InfluenceTerm, Input, Output, Source, WindowSeen,
    };
    use holdtrue_engine::setup::{ChannelId, DecisionRule};
    use std::collections::BTreeMap;

    #[test]
    fn polynomial_and_variance_take_their_values_by_hand() {
        assert!((horner(&[1.0, 2.0, 3.0], 2.0) - 17.0).abs() < 1e-12);
        // (1, t)·C·(1, t)ᵀ at t = 3: 4 + 2·3·(−1) + 9·2.
        let covariance = [vec![4.0, -1.0], vec![-1.0, 2.0]];
        assert!((variance(&covariance, &[1.0, 3.0]) - 16.0).abs() < 1e-12);
    }

    const DAY: Duration = Duration(86_400_000_000_000);

    /// Ten days of pairs, with the origin at their end: zero 1 + 2·t, span 0.2, an influence with
    /// coefficient 0.5 about 20; all coefficients uncertain and independent.
    fn document(span_side: SpanSide) -> Correction {
        let end = Timestamp(10 * DAY.0);
        let diagonal = [0.04, 0.01, 0.0025, 0.09];
        let covariance = (0..4)
            .map(|i| {
                (0..4)
                    .map(|j| if i == j { diagonal[i] } else { 0.0 })
                    .collect()
            })
            .collect();
        Correction {
            channel: ChannelId(0),
            issue_number: 1,
            issued: end.plus(DAY),
            valid_from: end,
            valid_until: end.plus(Duration(4 * DAY.0)),
            rung: Rung::Advise,
            because: None,
            origin: end,
            degree: 1,
            weights: vec![0.0, 1.0],
            zero: vec![1.0, 2.0],
            span: vec![0.2],
            span_centre: 10.0,
            span_side,
            span_refused: None,
            influences: vec![InfluenceTerm {
                in_force: true,
                coefficient: 0.5,
                centre: 20.0,
                range: (15.0, 25.0),
            }],
            suppressed: false,
            judged_at: 14.0,
            correction: 1.8,
            standard_uncertainty: 0.5,
            coverage_factor: 2.0,
            expanded_uncertainty: 1.3,
            degrees_of_freedom: 60.0,
            covariance,
            rule: DecisionRule::Simple,
            zone: None,
            accepted: None,
            corrected_zone: None,
            window: WindowSeen {
                from: Timestamp(0),
                to: end,
                pairs: 100,
                segments: 10,
                effective_sample_size: 10.0,
                lag_one: 0.0,
            },
            criterion: CriterionValues {
                name: "BIC".to_owned(),
                values: Vec::new(),
            },
            residual_sd: 0.1,
            stretch: 1,
            range: (8.0, 14.0),
            supersedes: None,
        }
    }

    /// Two days after the origin, 12 indicated, at 22 of the influence.
    fn indicated() -> Indicated {
        Indicated {
            at: Timestamp(12 * DAY.0),
            value: 12.0,
            influence: 22.0,
        }
    }

    fn assert_close(applied: Option<Applied>, correction: f64, variance: f64, beside: f64) {
        let applied = applied.unwrap();
        let u = libm::sqrt(variance);
        assert!(
            (applied.correction - correction).abs() < 1e-12,
            "{applied:?}"
        );
        assert!((applied.u - u).abs() < 1e-12, "{applied:?} {u}");
        let expanded = 2.0 * u + beside;
        assert!((applied.expanded - expanded).abs() < 1e-12, "{applied:?}");
    }

    /// zero 1 + 2·2 = 5, influence 0.5·2 = 1, span 0.2·(12 − 10) = 0.4: 6.4 where the span belongs
    /// to the indication, 6.4/0.8 = 8 at a level of 20 where it belongs to the reference value.
    ///
    /// The fit's variance where u was stated, at t = 0, level 14 and the influence's centre: 0.04 +
    /// 0.0025·4² = 0.08, so 0.25 − 0.08 = 0.17 is the same everywhere. Here it is 0.04 + 0.01·2² +
    /// 0.0025·2² + 0.09·2² = 0.45, or with level 20 (0.04 + 0.04 + 0.25 + 0.36)/0.8² = 0.69/0.64.
    #[test]
    fn span_and_influences_are_applied_with_the_joint_covariance() {
        let zero = Duration::ZERO;
        let on_indication = apply(&document(SpanSide::Indication), zero, indicated());
        assert_close(on_indication, 6.4, 0.17 + 0.45, 0.3);
        let on_reference = apply(&document(SpanSide::Reference), zero, indicated());
        assert_close(on_reference, 8.0, 0.17 + 0.69 / 0.64, 0.3);
    }

    /// The same document held: its u is that of its issue a day after the newest pair, where the
    /// fit's variance is 0.08 + 0.01·1².
    #[test]
    fn a_held_correction_states_its_u_at_its_issue() {
        let held = Correction {
            rung: Rung::Hold,
            ..document(SpanSide::Indication)
        };
        let applied = apply(&held, Duration::ZERO, indicated());
        assert_close(applied, 6.4, 0.25 - 0.09 + 0.45, 0.3);
    }

    /// What a consumer makes of a document is what the engine itself says in corrected values, with
    /// a span, an influence quantity, and while a correction is held.
    #[test]
    fn a_consumer_and_the_engine_agree() {
        for name in ["span-ramp", "temperature-declared", "reference-stale"] {
            let scenario = library::find(name).unwrap();
            let mut world = (scenario.build)(Chooser::new(name, 5));
            world.setup.channels[0].corrected_values = true;
            let mut engine = Engine::new();
            let mut outputs = Vec::new();
            engine.step(&Input::Setup(Box::new(world.setup.clone())), &mut outputs);
            let mut documents = BTreeMap::new();
            let (mut influence, mut compared, mut held) = (0.0, 0, 0);
            for event in stream::events(&world) {
                if let Input::Reading(reading) = &event.input
                    && let Source::Influence(_) = reading.source
                {
                    influence = reading.value;
                }
                engine.step(&event.input, &mut outputs);
                for output in outputs.drain(..) {
                    match output {
                        Output::Correction(document) => {
                            documents.insert(document.issue_number, document);
                        }
                        Output::Corrected(value) => {
                            let document = &documents[&value.issue_number];
                            let indicated = Indicated {
                                at: value.phenomenon,
                                value: value.indication,
                                influence,
                            };
                            let lateness = world.setup.channels[0].lateness;
                            let ours = apply(document, lateness, indicated).unwrap();
                            let close = |left: f64, right: f64| {
                                (left - right).abs() <= 1e-9 * value.expanded_uncertainty
                            };
                            assert!(
                                close(ours.correction, value.correction)
                                    && close(ours.expanded, value.expanded_uncertainty),
                                "{name}: {ours:?} {value:?} {document:?}"
                            );
                            compared += 1;
                            held += u32::from(document.rung == Rung::Hold);
                        }
                        _ => {}
                    }
                }
            }
            assert!(compared > 1000, "{name}: {compared}");
            assert_eq!(held > 0, name == "reference-stale", "{name}: {held}");
        }
    }

    #[test]
    fn nothing_is_applied_outside_the_validity_or_with_a_span_that_leaves_nothing() {
        let document = document(SpanSide::Reference);
        let at = |days: f64, lateness: Duration| {
            let at = Timestamp((days * DAY.0 as f64) as i64);
            apply(&document, lateness, Indicated { at, ..indicated() })
        };
        for (days, holds) in [(9.9, false), (10.0, true), (14.0, true), (14.1, false)] {
            assert_eq!(at(days, Duration::ZERO).is_some(), holds, "{days}");
        }
        // A reading that comes late is corrected by the document that came before it.
        assert!(at(9.0, DAY).is_some() && at(8.9, DAY).is_none());
        for (span, holds) in [(0.9, true), (0.91, false), (-0.91, false)] {
            let document = Correction {
                span: vec![span],
                ..document.clone()
            };
            let applied = apply(&document, Duration::ZERO, indicated());
            assert_eq!(applied.is_some(), holds, "{span}");
        }
    }
}
