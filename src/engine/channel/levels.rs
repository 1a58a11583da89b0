//! At which levels an error that depends on the level is judged.
//!
//! Where no span is claimed, the error is one polynomial in time, valid near the levels seen. Where
//! one is, the error differs from level to level, and the worst counts: of the middle (the span's
//! centre), the lowest and the highest level that the fit has seen, the one where |ê| + U is
//! largest, which is what zones and acceptance compare with the limit. Influence quantities are
//! taken at their centres.

use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::{Curve, Published, Seen};
use crate::setup::SpanSide;

/// Levels at which a claimed span is judged, the centre first; the centre alone without one.
fn levels(published: &Published) -> Vec<f64> {
    let centre = published.terms.centre.x;
    match published.terms.learned.x {
        Some((lowest, highest)) if !published.span.is_empty() => {
            vec![centre.clamp(lowest, highest), lowest, highest]
        }
        _ => vec![centre],
    }
}

/// The level at which the mean is judged, and the mean there. `reach`: |ê| + U of a mean.
pub(super) fn judged(published: &Published, reach: impl Fn(&Curve) -> f64) -> (f64, Curve) {
    let centres = published.terms.centre.influences;
    let at = |level| (level, published.at_level(level, centres));
    let mut levels = levels(published).into_iter().map(at);
    let first = levels.next().expect("there is at least one level");
    if levels.len() == 0 {
        return first;
    }
    let mut worst = (reach(&first.1), first);
    for next in levels {
        let its = reach(&next.1);
        // Of equals the middle counts, then the lowest: more is known there.
        if its > worst.0 {
            worst = (its, next);
        }
    }
    worst.1
}

/// Largest |ê|/u at the newest pair over all corners of what the fit has seen: a correction that
/// is small in the middle may be large at an end.
pub(super) fn largest_significance(published: &Published, corners: &[Corner], rest: f64) -> f64 {
    corners
        .iter()
        .map(|&(level, influences)| significance(&published.at_level(level, influences), rest))
        .fold(0.0, f64::max)
}

/// A level and the influence quantities with it.
pub(super) type Corner = (f64, [f64; MAX_INFLUENCES]);

/// The ends and the centres of what the fit has seen, as far as the mean depends on it.
pub(super) fn corners(published: &Published) -> Vec<Corner> {
    let centre = published.terms.centre;
    let mut corners: Vec<Corner> = levels(published)
        .into_iter()
        .map(|level| (level, centre.influences))
        .collect();
    let Seen { influences, .. } = published.terms.learned;
    for place in 0..published.influences.len() {
        let Some((lowest, highest)) = influences[place] else {
            continue;
        };
        let moved = |&(level, mut at): &Corner, value| {
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

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;
    use crate::channel::judgement::tests::published;

    /// In the middle the error is known best, and so the most significant; at the upper end it is
    /// nearest to its limit with what is not known of it, and that is what a zone is about.
    #[test]
    fn the_level_nearest_to_the_limit_is_judged() {
        let mut published = published(&[0.5]);
        published.span = vec![0.05];
        published.covariance = vec![vec![1e-4, 0.0], vec![0.0, 1e-4]];
        published.terms.centre.x = 20.0;
        published.terms.learned.x = Some((10.0, 28.0));
        let reach =
            |curve: &Curve| curve.coefficients[0].abs() + 2.0 * curve.covariance[0][0].sqrt();
        // |ê| + U: 0.52 at 20, 0.00 + 0.20 at 10, 0.90 + 0.16 at 28; |ê|/u: 50, 0, 11.
        let (level, curve) = judged(&published, reach);
        assert_eq!(level, 28.0);
        assert!((curve.coefficients[0] - 0.9).abs() < 1e-12);
        let most = largest_significance(&published, &corners(&published), 0.0);
        assert!((most - 50.0).abs() < 1e-9);
        // Of equals the middle.
        published.span = vec![0.0];
        assert_eq!(judged(&published, |_| 1.0).0, 20.0);
    }
}
