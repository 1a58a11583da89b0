//! At which levels an error that depends on the level is judged.
//!
//! Where no span is claimed, the error is one polynomial in time, valid near the levels seen. Where
//! one is, the error differs from level to level, and the worst counts: of the lowest, the middle
//! (the span's centre) and the highest level that the fit has seen, the one where |ê| is largest in
//! units of its own u. Influence quantities are taken at their centres.

use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::{Curve, Published, Seen};
use crate::setup::SpanSide;

/// Levels at which a claimed span is judged, lowest first; the centre alone without one.
fn levels(published: &Published) -> Vec<f64> {
    let centre = published.terms.centre.x;
    match published.terms.learned.x {
        Some((lowest, highest)) if !published.span.is_empty() => {
            vec![lowest, centre.clamp(lowest, highest), highest]
        }
        _ => vec![centre],
    }
}

/// The level at which the mean is judged, and the mean there. `rest`: the part of u² that is the
/// same at every level.
pub(super) fn judged(published: &Published, rest: f64) -> (f64, Curve) {
    let centres = published.terms.centre.influences;
    let mut worst: Option<(f64, f64, Curve)> = None;
    for level in levels(published) {
        let curve = published.at_level(level, centres);
        let ratio = significance(&curve, rest);
        // Of equals the middle counts, then the lowest: more is known there.
        if worst.as_ref().is_none_or(|(most, _, _)| ratio > *most) {
            worst = Some((ratio, level, curve));
        }
    }
    let (_, level, curve) = worst.expect("there is at least one level");
    (level, curve)
}

/// Largest |ê|/u at the newest pair over all corners of what the fit has seen: a correction that
/// is small in the middle may be large at an end.
pub(super) fn largest_significance(published: &Published, rest: f64) -> f64 {
    corners(published)
        .into_iter()
        .map(|(level, influences)| significance(&published.at_level(level, influences), rest))
        .fold(0.0, f64::max)
}

/// The ends and the centres of what the fit has seen, as far as the mean depends on it.
pub(super) fn corners(published: &Published) -> Vec<(f64, [f64; MAX_INFLUENCES])> {
    let centre = published.terms.centre;
    let mut corners: Vec<(f64, [f64; MAX_INFLUENCES])> = levels(published)
        .into_iter()
        .map(|level| (level, centre.influences))
        .collect();
    let Seen { influences, .. } = published.terms.learned;
    for place in 0..published.influences.len() {
        let Some((lowest, highest)) = influences[place] else {
            continue;
        };
        let moved = |&(level, mut at): &(f64, [f64; MAX_INFLUENCES]), value| {
            at[place] = value;
            (level, at)
        };
        let further: Vec<_> = corners
            .iter()
            .flat_map(|corner| [moved(corner, lowest), moved(corner, highest)])
            .collect();
        corners.extend(further);
    }
    corners
}

/// |ê| in units of u at the newest pair; infinite where u is zero and ê is not.
fn significance(curve: &Curve, rest: f64) -> f64 {
    let error = curve.coefficients.first().map_or(0.0, |error| error.abs());
    let fit = curve.covariance.first().and_then(|row| row.first());
    let u = (fit.map_or(0.0, |variance| variance.max(0.0)) + rest).sqrt();
    if error > 0.0 { error / u } else { 0.0 }
}

/// The regressor of the span for an indication and its corrected value.
pub(super) fn regressor(side: SpanSide, indication: f64, corrected: f64) -> f64 {
    match side {
        SpanSide::Reference => corrected,
        SpanSide::Indication => indication,
    }
}
