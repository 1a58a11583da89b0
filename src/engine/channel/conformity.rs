//! Conformity of an error with its maximum permissible error: the zone, acceptance under a named
//! rule, the probability of conformance; or why nothing is stated.

use super::Scene;
use crate::event::{Conformity, NoStatement, Zone};
use crate::quantile::normal_below;
use crate::setup::{ReferenceKind, ReferenceSetup};

/// States conformity of `error` with standard uncertainty `u` and expanded uncertainty `expanded`.
pub(crate) fn state(error: f64, u: f64, expanded: f64, scene: &Scene<'_>) -> Conformity {
    let Some(limit) = scene.setup.max_permissible_error else {
        return Conformity::Refused(NoStatement::NoLimit);
    };
    if let Some(reason) = reference_forbids(scene.reference, limit) {
        return Conformity::Refused(reason);
    }
    if u <= 0.0 {
        return Conformity::Refused(NoStatement::UnknownUncertainty);
    }
    Conformity::Stated {
        zone: zone(error, expanded, limit),
        accepted: scene.setup.decision_rule.accepts(error, expanded, limit),
        probability: probability(error, u, limit),
    }
}

/// Why nothing can be stated against this reference, however well the fit goes. A group is good
/// enough once somebody has declared what its members may have in common.
fn reference_forbids(reference: &ReferenceSetup, limit: f64) -> Option<NoStatement> {
    let is_group = matches!(reference.kind, ReferenceKind::Group { .. });
    if is_group && reference.uncertainty_common <= 0.0 {
        Some(NoStatement::RelativeReference)
    } else if reference.is_good_enough_for(limit) {
        None
    } else {
        Some(NoStatement::WeakReference)
    }
}

/// Where an error with its expanded uncertainty stands against the maximum permissible error
/// (ILAC-G8:09/2019, 4.2.3).
pub(crate) fn zone(error: f64, expanded: f64, limit: f64) -> Zone {
    let error = error.abs();
    if error + expanded <= limit {
        Zone::Pass
    } else if error <= limit {
        Zone::ConditionalPass
    } else if error - expanded <= limit {
        Zone::ConditionalFail
    } else {
        Zone::Fail
    }
}

/// `p_c = Φ((T − y)/u) − Φ((−T − y)/u)`, the probability that the error is within ±T, for u > 0
/// (JCGM 106:2012, clause 7). Of |y|, which is the same: then a small difference is one of small
/// numbers.
pub(crate) fn probability(error: f64, u: f64, limit: f64) -> f64 {
    let error = error.abs();
    normal_below((limit - error) / u) - normal_below((-limit - error) / u)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check value V38: maximum permissible error 1.0, U 0.2.
    #[test]
    fn four_zones() {
        let cases = [
            (0.7, Zone::Pass),
            (0.9, Zone::ConditionalPass),
            (1.1, Zone::ConditionalFail),
            (1.3, Zone::Fail),
        ];
        for (error, expected) in cases {
            assert_eq!(zone(error, 0.2, 1.0), expected);
            assert_eq!(zone(-error, 0.2, 1.0), expected);
        }
    }

    /// Check value V19: JCGM 106, clause 7 (from memory): one limit −5.40 V, y = −5.47 V, u = 0.05
    /// V gives Φ(1.4) = 0.919; limits ±1 with y = 0.8, u = 0.1 give 0.97725.
    #[test]
    fn probability_of_conformance() {
        // One limit: the other stands so far off that it does not count, both moved to ±T.
        let (upper, lower) = (-5.40, -1000.0);
        let (middle, half) = (0.5 * (upper + lower), 0.5 * (upper - lower));
        assert!((probability(-5.47 - middle, 0.05, half) - 0.919).abs() < 5e-4);
        assert!((probability(0.8, 0.1, 1.0) - 0.977_25).abs() < 5e-6);
        assert!((probability(-0.8, 0.1, 1.0) - 0.977_25).abs() < 5e-6);
    }

    #[test]
    fn probabilities_stay_within_their_range() {
        for (error, u) in [(0.0, 1e-300), (1e300, 1.0), (0.0, 1e300), (1.0, 1e-12)] {
            let p = probability(error, u, 1.0);
            assert!((0.0..=1.0).contains(&p), "{error} {u}: {p}");
        }
        assert!((probability(1.0, 1e-12, 1.0) - 0.5).abs() < 1e-12);
        // Far outside: Φ(−10) = 7.62e-24, not 0 (Abramowitz & Stegun, table 26.2).
        assert!((probability(-11.0, 1.0, 1.0) / 7.619_9e-24 - 1.0).abs() < 1e-4);
    }
}
