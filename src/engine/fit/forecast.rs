//! Where a straight line with its band meets a limit: pure geometry, time in any unit.
//!
//! The band ê(t) ± k·u(ê(t)) is inverted, not the rate divided into the distance: u grows with t,
//! so that the interval of instants is not symmetric about the central one. Both edges of the band
//! at a limit are roots of one quadratic equation, (L − ê(t))² = k²u²(t) (Fieller's construction,
//! *Journal of the Royal Statistical Society B* 16 (1954) 175; from memory).

use crate::fit::factor::Factor;
use serde::{Deserialize, Serialize};

/// ê(t) = `level` + `slope`·t with its covariance; t in a unit and from an origin that the owner
/// knows.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Line {
    /// ê(0), in the unit of the error.
    pub level: f64,
    /// dê/dt.
    pub slope: f64,
    /// u²(ê(0)).
    pub level_variance: f64,
    /// Covariance of level and slope.
    pub covariance: f64,
    /// u²(slope).
    pub slope_variance: f64,
}

impl Line {
    /// The least-squares line of a factor whose first two columns are 1 and t, with `variance` that
    /// of a row of weight 1; `None` if its rows stand at one time.
    ///
    /// # Panics
    /// If the factor has a single column.
    #[must_use]
    pub fn through(factor: &Factor, variance: f64) -> Option<Self> {
        Self::among(factor, 2, variance)
    }

    /// The line in a model of the first `columns` columns, given all its other terms; `None` if
    /// they are not independent.
    ///
    /// # Panics
    /// If the factor has fewer columns, or the model fewer than two.
    #[must_use]
    pub(crate) fn among(factor: &Factor, columns: usize, variance: f64) -> Option<Self> {
        let coefficients = factor.solve(columns)?;
        let root = factor.covariance_factor(columns)?;
        let covariance = &root * root.transpose() * variance;
        Some(Self {
            level: coefficients[0] + 0.0,
            slope: coefficients[1] + 0.0,
            level_variance: covariance[(0, 0)],
            covariance: covariance[(0, 1)] + 0.0,
            slope_variance: covariance[(1, 1)],
        })
    }

    /// ê(t).
    #[must_use]
    pub fn at(self, t: f64) -> f64 {
        self.level + self.slope * t
    }

    /// u(ê(t)).
    #[must_use]
    pub fn uncertainty_at(self, t: f64) -> f64 {
        let variance = self.level_variance + t * (2.0 * self.covariance + t * self.slope_variance);
        variance.max(0.0).sqrt()
    }

    /// The line with a variance added that is the same at every instant, and does not move the
    /// slope (GUM H.3.6).
    #[must_use]
    pub fn with_common(self, variance: f64) -> Self {
        Self {
            level_variance: self.level_variance + variance,
            ..self
        }
    }

    /// Whether the slope differs from zero by at least `k` of its standard uncertainties.
    #[must_use]
    pub fn is_resolved(self, k: f64) -> bool {
        self.slope != 0.0 && self.slope.abs() >= k * self.slope_variance.max(0.0).sqrt()
    }

    /// The first instant from `from` on at which ê(t) + `edge`·u(t) is at or past `limit`, where
    /// past means farther from zero on the limit's side. The sign of `edge` counts towards the
    /// limit: k finds the edge of the band that comes first, −k the one that comes last, 0 the line
    /// itself. `None` if it never is.
    #[must_use]
    pub fn reaches(self, limit: f64, edge: f64, from: f64) -> Option<f64> {
        let side = 1.0_f64.copysign(limit);
        let (distance, rate) = (side * (limit - self.level), side * self.slope);
        // How far the edge is short of the limit.
        let short = |t: f64| distance - rate * t - edge * self.uncertainty_at(t);
        if short(from) <= 0.0 {
            return Some(from);
        }
        let square = edge * edge;
        let Self {
            level_variance: v00,
            covariance: v01,
            slope_variance: v11,
            ..
        } = self;
        // A quarter of the discriminant is k²·(m²V₀₀ + 2dmV₀₁ + d²V₁₁ − k²·det V), d the distance
        // and m the rate: so written, a narrow band does not cancel it away.
        let form = rate * rate * v00 + 2.0 * distance * rate * v01 + distance * distance * v11;
        let spread = square * (form - square * (v00 * v11 - v01 * v01));
        if spread.is_nan() || spread < 0.0 {
            return None;
        }
        let roots = quadratic_roots(
            rate * rate - square * v11,
            -(distance * rate + square * v01),
            distance * distance - square * v00,
            spread.sqrt(),
        );
        // Squaring has mixed in where the other edge meets the limit: each root belongs to the edge
        // that is nearer there.
        let is_own = |t: f64| {
            let (rest, width) = (distance - rate * t, edge * self.uncertainty_at(t));
            (rest - width).abs() <= (rest + width).abs()
        };
        roots
            .into_iter()
            .find(|&t| t > from && t.is_finite() && is_own(t))
    }
}

/// The real roots of a·t² + 2h·t + c, the smaller first, from `root` = √(h² − ac); what is no root
/// is not finite.
///
/// The root of larger size is found without cancellation, the other from the product c/a (Press et
/// al., *Numerical Recipes*, 3rd ed., §5.6; from memory).
fn quadratic_roots(a: f64, h: f64, c: f64, root: f64) -> [f64; 2] {
    let q = -(h + root.copysign(h));
    let (one, other) = (q / a, c / q);
    if one < other {
        [one, other]
    } else {
        [other, one]
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    /// Check value V31: ê = 0.10 + 0.02·t from 30 points at t = 0 … 29, σ = 0.05 known.
    fn v31() -> Line {
        let (n, mean, sum_of_squares, variance) = (30.0, 14.5, 2247.5, 0.05 * 0.05);
        Line {
            level: 0.10,
            slope: 0.02,
            level_variance: variance * (1.0 / n + mean * mean / sum_of_squares),
            covariance: -variance * mean / sum_of_squares,
            slope_variance: variance / sum_of_squares,
        }
    }

    /// V31, recomputed there from the formulas of §6.8: tolerances are half its last digit.
    #[test]
    fn the_band_of_a_line_is_inverted() {
        let line = v31();
        assert!((line.uncertainty_at(29.0) - 0.017_81).abs() < 5e-6);
        assert!((line.uncertainty_at(45.0) - 0.033_44).abs() < 5e-6);
        let reached = |edge| line.reaches(1.0, edge, 29.0).expect("it drifts there");
        assert_relative_eq!(reached(0.0), 45.0, max_relative = 1e-14);
        assert!((reached(1.645) - 42.46).abs() < 5e-3, "{}", reached(1.645));
        assert!(
            (reached(-1.645) - 48.00).abs() < 5e-3,
            "{}",
            reached(-1.645)
        );
        // Distance over rate would give intervals of one width on both sides.
        assert!(reached(-1.645) - 45.0 > 1.1 * (45.0 - reached(1.645)));
    }

    #[test]
    fn each_edge_is_on_the_limit_where_it_is_said_to_reach_it() {
        let line = v31();
        for (limit, edge) in [(1.0, 2.0), (1.0, -2.0), (1.3, 0.5), (0.9, -3.0)] {
            let t = line.reaches(limit, edge, 29.0).expect("it drifts there");
            assert_relative_eq!(
                line.at(t) + edge * line.uncertainty_at(t),
                limit,
                max_relative = 1e-12
            );
        }
        // The same mirrored: a falling line and the lower limit.
        let falling = Line {
            level: -0.10,
            slope: -0.02,
            ..line
        };
        for edge in [-1.645, 0.0, 1.645] {
            assert_eq!(
                falling.reaches(-1.0, edge, 29.0),
                line.reaches(1.0, edge, 29.0)
            );
        }
    }

    #[test]
    fn a_limit_behind_the_line_is_reached_only_by_the_band() {
        let line = v31();
        assert_eq!(line.reaches(-1.0, 0.0, 29.0), None);
        assert_eq!(line.reaches(-1.0, 1.645, 29.0), None);
        // A slope that is not resolved: the band opens faster than the line moves.
        let flat = Line { slope: 0.0, ..line };
        assert!(!flat.is_resolved(2.0) && line.is_resolved(2.0));
        let (up, down) = (
            flat.reaches(1.0, 2.0, 29.0).expect("the band opens"),
            flat.reaches(-1.0, 2.0, 29.0).expect("the band opens"),
        );
        assert!(up < down && flat.reaches(1.0, -2.0, 29.0).is_none());
        // What is past the limit already is so from the start.
        assert_eq!(line.reaches(0.5, 0.0, 29.0), Some(29.0));
    }

    #[test]
    fn a_common_variance_widens_the_band_and_leaves_the_slope() {
        let (line, wider) = (v31(), v31().with_common(0.01));
        assert_eq!(
            line.slope_variance.to_bits(),
            wider.slope_variance.to_bits()
        );
        let earliest = |line: Line| line.reaches(1.0, 2.0, 29.0);
        assert!(earliest(wider) < earliest(line));
        assert_relative_eq!(
            wider.uncertainty_at(3.0),
            (0.01 + line.uncertainty_at(3.0) * line.uncertainty_at(3.0)).sqrt(),
            max_relative = 1e-12
        );
    }

    /// Without noise the band is the line; a rounding of the discriminant must not lose the root.
    #[test]
    fn a_band_without_width_is_the_line() {
        for variance in [0.0, 1e-40, 1e-18] {
            let line = Line {
                level: 0.1,
                slope: 0.007,
                level_variance: variance,
                covariance: 0.3 * variance,
                slope_variance: variance,
            };
            for edge in [-2.0, 0.0, 2.0] {
                let t = line.reaches(1.0, edge, 3.0).expect("it drifts there");
                let tolerance = 1e-14 + 1e3 * variance.sqrt();
                assert_relative_eq!(t, 0.9 / 0.007, max_relative = tolerance);
            }
        }
    }

    /// Check value V32: 0.1 + 0.01·t + 0.001·t² = 1 is first met after now at t = 25.414.
    #[test]
    fn a_parabola_meets_a_limit_at_its_first_root() {
        let (a, h, c): (f64, f64, f64) = (0.001, 0.005, 0.1 - 1.0);
        let [before, after] = quadratic_roots(a, h, c, (h * h - a * c).sqrt());
        assert!((after - 25.414).abs() < 5e-4, "{after}");
        assert!(before < 0.0);
    }

    #[test]
    fn roots_survive_their_corners() {
        let roots = |a: f64, h: f64, c: f64| quadratic_roots(a, h, c, (h * h - a * c).sqrt());
        assert_eq!(
            roots(1.0, 0.0, -4.0).map(f64::to_bits),
            [-2.0, 2.0].map(f64::to_bits)
        );
        // A linear equation: one root is finite.
        let finite = |two: [f64; 2]| {
            two.into_iter()
                .filter(|t| t.is_finite())
                .collect::<Vec<_>>()
        };
        assert_eq!(finite(roots(0.0, 1.0, -4.0)), [2.0]);
        assert_eq!(finite(roots(0.0, 0.0, 0.0)), [0.0; 0]);
        assert_eq!(finite(roots(f64::MAX, f64::MAX, f64::MAX)), [0.0; 0]);
        // Naively −h + √(h² − ac) loses all digits of the small root.
        let [small, large] = roots(1.0, -5e8, 1.0);
        assert_relative_eq!(large, 1e9, max_relative = 1e-15);
        assert_relative_eq!(small, 1e-9, max_relative = 1e-15);
    }
}
