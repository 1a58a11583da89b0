//! As-found readings against what the model expected: a validation that costs nothing.

use crate::channel::Scene;
use crate::channel::judgement::Judgement;
use crate::event::{CheckPoint, ComparedPoint, Comparison};
use crate::fit::basis::MAX_INFLUENCES;
use crate::quantile;
use crate::setup::{ChannelSetup, ReferenceSetup, SpanSide};
use crate::time::Timestamp;

/// Coverage of the uncertainties in Eₙ, whatever the channel's own (ISO 13528: U at k = 2, about
/// 95 %; from memory).
const COVERAGE: f64 = 0.95;
/// k of the uncertainties that people state.
pub(super) const STATED_FACTOR: f64 = 2.0;

/// Compares as-found readings with what the model expected of each. `None` without readings; where
/// neither side has any uncertainty or the numbers can't be held, so that nothing could be said;
/// and where influence quantities are in the model, since what acted during the check nobody told.
pub(super) fn compare(
    judgement: &Judgement,
    instant: Timestamp,
    as_found: &[CheckPoint],
    scene: &Scene<'_>,
) -> Option<Comparison> {
    if !judgement.published.influences.is_empty() {
        return None;
    }
    let mut points = Vec::with_capacity(as_found.len());
    for point in as_found {
        points.push(compare_one(judgement, instant, point, scene)?);
    }
    let worst = *points
        .iter()
        .max_by(|a, b| a.en.abs().total_cmp(&b.en.abs()))?;
    Some(Comparison {
        predicted_error: worst.predicted_error,
        predicted_uncertainty: worst.predicted_uncertainty,
        points,
        en: worst.en,
        satisfactory: worst.en.abs() <= 1.0,
    })
}

fn compare_one(
    judgement: &Judgement,
    instant: Timestamp,
    point: &CheckPoint,
    scene: &Scene<'_>,
) -> Option<ComparedPoint> {
    let published = &judgement.published;
    let level = match published.terms.span_side {
        SpanSide::Reference => point.reference,
        SpanSide::Indication => point.indication,
    };
    let (predicted_error, fit) = published.evaluate(instant, level, [0.0; MAX_INFLUENCES]);
    let variance = fit + judgement.rest_variance;
    let predicted_uncertainty = quantile::student(COVERAGE, judgement.nu) * variance.sqrt();
    let uncertainty = uncertainty_of(point, scene.setup, scene.reference);
    let error = point.error();
    Some(ComparedPoint {
        indication: point.indication,
        reference: point.reference,
        error,
        uncertainty,
        predicted_error,
        predicted_uncertainty,
        en: en(predicted_error, error, predicted_uncertainty, uncertainty)?,
    })
}

/// Eₙ = (x − X)/√(U² + Uᵣ²) (ISO/IEC 17043, ISO 13528, from memory); `None` where both are zero
/// or the quotient can't be held.
fn en(value: f64, reference: f64, expanded: f64, expanded_reference: f64) -> Option<f64> {
    let scale = (expanded * expanded + expanded_reference * expanded_reference).sqrt();
    let en = (value - reference) / scale + 0.0;
    (scale > 0.0 && en.is_finite()).then_some(en)
}

/// Expanded uncertainty of an as-found error: of the reference value as told, else as the channel's
/// reference has it declared, and of one reading of the sensor (declared noise, resolution q/√12).
fn uncertainty_of(point: &CheckPoint, setup: &ChannelSetup, reference: &ReferenceSetup) -> f64 {
    let of_value = standard_uncertainty(point, reference);
    let common = match point.expanded_uncertainty {
        Some(_) => 0.0,
        None => reference.uncertainty_common,
    };
    let variance = of_value * of_value + common * common + reading_variance(setup);
    STATED_FACTOR * variance.sqrt()
}

/// Standard uncertainty of a check's reference value: as told, else `each` of the channel's
/// reference.
pub(super) fn standard_uncertainty(point: &CheckPoint, reference: &ReferenceSetup) -> f64 {
    point
        .expanded_uncertainty
        .map_or(reference.uncertainty_each, |expanded| {
            expanded / STATED_FACTOR
        })
}

/// What is declared of the variance of one reading of the sensor.
pub(super) fn reading_variance(setup: &ChannelSetup) -> f64 {
    setup.noise * setup.noise + setup.resolution * setup.resolution / 12.0
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check value V37: x 1.002, X 1.000, U 0.002, Uᵣ 0.001.
    #[test]
    fn normalised_error() {
        let en = en(1.002, 1.000, 0.002, 0.001).expect("both have uncertainties");
        assert!((en - 0.894).abs() < 5e-4, "{en}");
        assert!(en.abs() <= 1.0, "satisfactory");
    }

    #[test]
    fn without_any_uncertainty_nothing_is_stated() {
        assert_eq!(en(1.0, 2.0, 0.0, 0.0), None);
        assert_eq!(en(1e300, -1e300, 1e-300, 0.0), None);
        assert_eq!(en(1.0, 2.0, 0.0, 1.0), Some(-1.0));
    }
}
