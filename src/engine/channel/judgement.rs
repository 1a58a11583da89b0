//! Fourth station (the third is the fit): what the fit means. The error with its uncertainty,
//! against the maximum permissible error.
//!
//! u² = u²(fit) + common² + q²/12 + lack of fit² (GUM 5.1.2 with H.3.6 for the common part, F.2.2.1
//! for the resolution q; lack of fit as the newest residuals show it, or as a drift that turned
//! within the window would make it, whichever is more); degrees of freedom by Welch–Satterthwaite
//! (GUM G.2b), k from Student's t (G.3.2). u²(fit) is never less than what the declared noise, the
//! reference's own `each` and q²/12 make of the rows; where even so nothing is left (two equal
//! values, nothing declared), u is not known and no conformity is stated.

use super::{Scene, conformity, levels};
use crate::event::Conformity;
use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::{Curve, Published, Row};
use crate::quantile;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};
use std::cmp::Ordering;
use std::collections::VecDeque;

/// Accepted pairs that the lack of fit is judged on.
const RECENT: usize = 64;
/// Fewest that say something about it.
const ENOUGH: usize = 16;
/// A mean residual within so many of its own standard deviations is noise.
const SIGNIFICANT: f64 = 2.0;
/// Effective degrees of freedom are not told finer than this; k is the normal quantile there.
const MANY: f64 = 1e9;

/// What the fit means at its newest pair.
#[derive(Clone, Debug)]
pub(crate) struct Judgement {
    /// The level at which the error is judged.
    pub(crate) level: f64,
    /// Estimated error ê there, in the channel's unit.
    pub(crate) error: f64,
    /// Standard uncertainty of ê.
    pub(crate) u: f64,
    /// Part of u² that does not come from the fit's covariance; the same at every instant.
    pub(crate) rest_variance: f64,
    /// That part without what a turn of the drift adds: what a curve of its own through the newest
    /// pairs has beside its covariance.
    pub(crate) common_variance: f64,
    /// k.
    pub(crate) k: f64,
    /// ν behind k.
    pub(crate) nu: f64,
    /// dê/dt per day.
    pub(crate) slope: f64,
    /// Standard uncertainty of the slope.
    pub(crate) slope_u: f64,
    /// Where ê ± U stands against the maximum permissible error.
    pub(crate) conformity: Conformity,
    /// The fit.
    pub(crate) published: Published,
}

impl Judgement {
    /// Judges a fit; `None` if its numbers can't be held (overflow of absurd inputs).
    pub(crate) fn of(
        published: Published,
        residuals: &Residuals,
        scene: &Scene<'_>,
    ) -> Option<Self> {
        let lack = residuals.lack_of_fit(&published);
        let common = scene.reference.uncertainty_common;
        let resolution = scene.setup.resolution;
        let common_variance = common * common + resolution * resolution / 12.0 + lack.variance;
        // Both say that the curve misses the newest pairs: the larger counts.
        let turn = (published.turn_variance - lack.variance).max(0.0);
        let rest_variance = common_variance + turn;
        // What is known of the error at one level: u, ν and k.
        let sure = |curve: &Curve| {
            let fit = curve.covariance.first().and_then(|row| row.first());
            let fit = fit.map_or(0.0, |variance| variance.max(0.0));
            let u = (fit + rest_variance).sqrt();
            let parts = [
                (fit + turn, published.degrees_of_freedom),
                (lack.variance, lack.degrees_of_freedom),
            ];
            let nu = effective_degrees_of_freedom(u, &parts);
            (u, nu, quantile::student(scene.setup.coverage, nu))
        };
        let (level, curve) = levels::judged(&published, |curve| {
            let (u, _, k) = sure(curve);
            curve.coefficients.first().map_or(0.0, |error| error.abs()) + k * u
        });
        let error = *curve.coefficients.first()? + 0.0;
        let (u, nu, k) = sure(&curve);
        let slope = curve.coefficients.get(1).copied().unwrap_or(0.0) + 0.0;
        let slope_u = slope_variance(&curve).max(0.0).sqrt();
        let judgement = Self {
            level,
            error,
            u,
            rest_variance,
            common_variance,
            k,
            nu,
            slope,
            slope_u,
            conformity: conformity::state(error, u, k * u, scene),
            published,
        };
        judgement.is_finite().then_some(judgement)
    }

    /// Expanded uncertainty of the slope: k on the fit's own degrees of freedom, since what is
    /// common to all pairs does not move it (GUM H.3.6).
    pub(crate) fn slope_expanded(&self, coverage: f64) -> f64 {
        quantile::student(coverage, self.published.degrees_of_freedom) * self.slope_u
    }

    fn is_finite(&self) -> bool {
        let numbers = [
            self.level,
            self.error,
            self.u,
            self.k,
            self.nu,
            self.slope,
            self.slope_u,
        ];
        let published = &self.published;
        numbers
            .iter()
            .chain(&published.coefficients)
            .chain(&published.span)
            .chain(&published.influences)
            .chain(&published.weights)
            .chain(published.covariance.iter().flatten())
            .chain(&published.criterion.values)
            .chain([
                &published.residual_sd,
                &published.window.effective_sample_size,
                &published.window.lag_one,
            ])
            .all(|number| number.is_finite())
    }
}

fn slope_variance(curve: &Curve) -> f64 {
    curve
        .covariance
        .get(1)
        .and_then(|row| row.get(1))
        .copied()
        .unwrap_or(0.0)
}

/// ν of a sum of variances, each with its own ν; parts not listed are known exactly
/// (Welch–Satterthwaite, GUM G.2b: `ν = u⁴ / Σ uᵢ⁴/νᵢ`).
fn effective_degrees_of_freedom(u: f64, parts: &[(f64, f64)]) -> f64 {
    let whole = u * u;
    let sum: f64 = parts
        .iter()
        .filter(|(variance, _)| *variance > 0.0)
        .map(|(variance, nu)| {
            let share = variance / whole;
            share * share / nu.max(1.0)
        })
        .sum();
    if sum > 0.0 {
        (1.0 / sum).min(MANY)
    } else {
        MANY
    }
}

/// Value of a polynomial, constant coefficient first (Horner).
pub(crate) fn polynomial(coefficients: &[f64], t: f64) -> f64 {
    coefficients
        .iter()
        .rev()
        .fold(0.0, |value, coefficient| value * t + coefficient)
}

/// The newest accepted errors, to see whether the published curve still goes through them.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Residuals {
    recent: VecDeque<Accepted>,
}

/// An accepted error.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Accepted {
    time: Timestamp,
    error: f64,
    /// The level and the influence quantities with it.
    x: f64,
    influences: [f64; MAX_INFLUENCES],
}

/// The part of u that the fit's own covariance does not know.
#[derive(Clone, Copy, Debug, PartialEq)]
struct LackOfFit {
    variance: f64,
    degrees_of_freedom: f64,
}

/// What the mean says of a pair.
fn expected(published: &Published, held: &Accepted) -> f64 {
    if published.span.is_empty() && published.influences.is_empty() {
        let days = held.time.since(published.origin).days();
        return polynomial(&published.coefficients, days);
    }
    published.evaluate(held.time, held.x, held.influences).0
}

impl Residuals {
    /// Remembers a pair that entered the fit, in order of time however it came.
    pub(crate) fn push(&mut self, row: &Row) {
        let goes_before = |held: &Accepted| {
            (held.time, held.error.total_cmp(&row.error)) <= (row.time, Ordering::Equal)
        };
        let accepted = Accepted {
            time: row.time,
            error: row.error,
            x: row.x,
            influences: row.influences,
        };
        // Nearly all come in order.
        if self.recent.back().is_none_or(goes_before) {
            self.recent.push_back(accepted);
        } else {
            let place = self.recent.partition_point(goes_before);
            self.recent.insert(place, accepted);
        }
        if self.recent.len() > RECENT {
            self.recent.pop_front();
        }
    }

    /// Of those still in the window: the square of their residuals' mean beyond what noise
    /// explains, `max(0, m² −
    /// (2·s_m)²)`, where `s_m` is the standard deviation of a mean of correlated values, `s/√n ·
    /// √((1+ρ)/(1−ρ))` (large-n variance of an AR(1) mean), ρ their lag-1 correlation with
    /// Kendall's bias added back. Own derivation; a moment estimate cut at zero, as for
    /// between-group variances.
    fn lack_of_fit(&self, published: &Published) -> LackOfFit {
        let residuals: Vec<f64> = self
            .recent
            .iter()
            .filter(|held| held.time >= published.window.from)
            .map(|held| held.error - expected(published, held))
            .collect();
        if residuals.len() < ENOUGH {
            return LackOfFit {
                variance: 0.0,
                degrees_of_freedom: 1.0,
            };
        }
        let n = residuals.len() as f64;
        let mean = residuals.iter().sum::<f64>() / n;
        let square = |x: f64| x * x;
        let about_mean: f64 = residuals.iter().map(|r| square(r - mean)).sum();
        let lagged: f64 = residuals
            .windows(2)
            .map(|two| (two[0] - mean) * (two[1] - mean))
            .sum();
        let rho = if about_mean > 0.0 {
            lagged / about_mean
        } else {
            0.0
        };
        let rho = (rho + (1.0 + 4.0 * rho) / n).clamp(0.0, 0.95);
        let of_mean = about_mean / (n - 1.0) / n * (1.0 + rho) / (1.0 - rho);
        LackOfFit {
            variance: (square(mean) - square(SIGNIFICANT) * of_mean).max(0.0),
            degrees_of_freedom: ((n - 1.0) * (1.0 - rho) / (1.0 + rho)).max(1.0),
        }
    }
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
pub(super) mod tests {
    use super::*;
    use crate::event::{CriterionValues, WindowSeen};
    use crate::fit::Centre;
    use crate::fit::{Model, Seen, Terms};
    use crate::setup::SpanSide;

    pub(in super::super) fn published(coefficients: &[f64]) -> Published {
        Published {
            origin: Timestamp(0),
            degree: 0,
            weights: vec![1.0],
            models: Vec::new(),
            coefficients: coefficients.to_vec(),
            span: Vec::new(),
            influences: Vec::new(),
            covariance: vec![vec![0.0; coefficients.len()]; coefficients.len()],
            turn_variance: 0.0,
            degrees_of_freedom: 10.0,
            residual_sd: 1.0,
            criterion: CriterionValues {
                name: "BIC".to_owned(),
                values: Vec::new(),
            },
            window: WindowSeen {
                from: Timestamp(0),
                to: Timestamp(0),
                pairs: 1,
                segments: 0,
                effective_sample_size: 0.0,
                lag_one: 0.0,
            },
            terms: Terms {
                announced: Model {
                    degree: 0,
                    span: None,
                    influences: [false; 2],
                },
                span_side: SpanSide::Reference,
                centre: Centre::default(),
                learned: Seen::default(),
                span_refused: None,
            },
        }
    }

    fn row(time: i64, error: f64) -> Row {
        Row {
            time: Timestamp(time),
            error,
            weight: 1.0,
            x: 0.0,
            influences: [0.0; MAX_INFLUENCES],
        }
    }

    /// Check value V18 (GUM G.4.1, from memory): relative u 0.25, 0.57, 0.82 % with ν 9, 4, 14 give
    /// u 1.03 %, ν 19.0, and U95 = 2.2 %.
    #[test]
    fn welch_satterthwaite() {
        let parts = [(0.25, 9.0), (0.57, 4.0), (0.82, 14.0)].map(|(u, nu)| (u * u, nu));
        let u = parts
            .iter()
            .map(|(variance, _)| variance)
            .sum::<f64>()
            .sqrt();
        let nu = effective_degrees_of_freedom(u, &parts);
        assert!((u - 1.03).abs() < 5e-3, "{u}");
        assert!((nu - 19.0).abs() < 0.05, "{nu}");
        assert!((u * quantile::student(0.95, nu.floor()) - 2.2).abs() < 0.05);
    }

    #[test]
    fn exactly_known_parts_raise_the_degrees_of_freedom() {
        let nu = effective_degrees_of_freedom(2.0_f64.sqrt(), &[(1.0, 5.0)]);
        assert!((nu - 20.0).abs() < 1e-9);
        assert_eq!(effective_degrees_of_freedom(1.0, &[(0.0, 5.0)]), MANY);
    }

    #[test]
    fn noise_around_the_curve_is_no_lack_of_fit_but_an_offset_is() {
        let mut residuals = Residuals::default();
        for (time, noise) in (0..64).zip([1.0, -1.0, -1.0, 1.0].into_iter().cycle()) {
            residuals.push(&row(time, 5.0 + noise));
        }
        assert_eq!(residuals.lack_of_fit(&published(&[5.0])).variance, 0.0);
        let off = residuals.lack_of_fit(&published(&[8.0])).variance.sqrt();
        assert!((2.8..3.0).contains(&off), "{off}");
    }

    /// A window in time that holds few pairs: what lies before it says nothing about its curve.
    #[test]
    fn pairs_that_left_the_window_claim_no_lack_of_fit() {
        let mut residuals = Residuals::default();
        for time in 0..64 {
            let error = if time < 50 { 5.0 } else { 9.0 };
            residuals.push(&row(time, error));
        }
        let mut curve = published(&[9.0]);
        assert!(residuals.lack_of_fit(&curve).variance > 0.0);
        curve.window.from = Timestamp(50);
        assert_eq!(residuals.lack_of_fit(&curve).variance, 0.0);
        curve.window.from = Timestamp(48);
        assert_eq!(residuals.lack_of_fit(&curve).variance, 0.0);
    }

    #[test]
    fn the_order_in_which_pairs_come_leaves_no_trace() {
        let rows = [(3, 1.0), (1, 2.0), (2, 3.0), (2, 1.0)];
        let mut there = Residuals::default();
        let mut back = Residuals::default();
        for (time, error) in rows {
            there.push(&row(time, error));
        }
        for (time, error) in rows.into_iter().rev() {
            back.push(&row(time, error));
        }
        assert_eq!(there, back);
    }

    #[test]
    fn few_pairs_claim_no_lack_of_fit() {
        let mut residuals = Residuals::default();
        for _ in 0..15 {
            residuals.push(&row(0, 9.0));
        }
        assert_eq!(residuals.lack_of_fit(&published(&[0.0])).variance, 0.0);
    }
}
