//! As-found readings against what the model expected: a validation that costs nothing.

use crate::channel::Scene;
use crate::channel::judgement::{Judgement, polynomial, variance_at};
use crate::event::{CheckPoint, ComparedPoint, Comparison};
use crate::quantile;
use crate::setup::{ChannelSetup, ReferenceSetup};
use crate::time::Timestamp;

/// Coverage of the uncertainties in Eₙ, whatever the channel's own (ISO 13528: U at k = 2, about
/// 95 %; from memory).
const COVERAGE: f64 = 0.95;
/// k of the uncertainties that people state.
pub(super) const STATED_FACTOR: f64 = 2.0;

/// What the model expected at an instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Expected {
    /// Error, in the channel's unit.
    pub(super) error: f64,
    /// Its expanded uncertainty.
    pub(super) uncertainty: f64,
}

impl Expected {
    /// From the fit as it was before the instant. `None` if its numbers can't be held.
    pub(super) fn at(instant: Timestamp, judgement: &Judgement) -> Option<Self> {
        let published = &judgement.published;
        let days = instant.since(published.origin).days();
        let error = polynomial(&published.coefficients, days) + 0.0;
        let variance = variance_at(&published.covariance, days) + judgement.rest_variance;
        let uncertainty = quantile::student(COVERAGE, judgement.nu) * variance.sqrt();
        (error.is_finite() && uncertainty.is_finite()).then_some(Self { error, uncertainty })
    }
}

/// Compares as-found readings with what was expected; `None` without readings, or where neither
/// side has any uncertainty, so that nothing could be said.
pub(super) fn compare(
    expected: Expected,
    as_found: &[CheckPoint],
    scene: &Scene<'_>,
) -> Option<Comparison> {
    let mut points = Vec::with_capacity(as_found.len());
    for point in as_found {
        let uncertainty = uncertainty_of(point, scene.setup, scene.reference);
        points.push(ComparedPoint {
            indication: point.indication,
            reference: point.reference,
            error: point.error(),
            uncertainty,
            en: en(
                expected.error,
                point.error(),
                expected.uncertainty,
                uncertainty,
            )?,
        });
    }
    let worst = points
        .iter()
        .map(|point| point.en)
        .max_by(|a, b| a.abs().total_cmp(&b.abs()))?;
    Some(Comparison {
        predicted_error: expected.error,
        predicted_uncertainty: expected.uncertainty,
        points,
        en: worst,
        satisfactory: worst.abs() <= 1.0,
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
    let common = reference.uncertainty_common;
    let of_value = standard_uncertainty(point, reference);
    let common = match point.expanded_uncertainty {
        Some(_) => 0.0,
        None => common,
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
