//! What lies ahead of a channel: conformity by a named rule, the time to its limit, a proposal when
//! to recalibrate, and whether its pairs can show the drift that matters.

use crate::event::Zone;
use crate::fit::line::Basis;
use crate::setup::{ChannelId, DecisionRule};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What lies ahead of a channel. It judges the uncorrected error.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Outlook {
    /// Which channel.
    pub channel: ChannelId,
    /// When it was issued.
    pub issued: Timestamp,
    /// Until when it holds.
    pub valid_until: Timestamp,
    /// The newest pair, to which error and conformity belong.
    pub at: Timestamp,
    /// The estimated error ê there.
    pub error: f64,
    /// U of it.
    pub expanded_uncertainty: f64,
    /// k of U.
    pub coverage_factor: f64,
    /// The maximum permissible error, if there is one.
    pub limit: Option<f64>,
    /// By what rule it is accepted or not.
    pub rule: DecisionRule,
    /// Where the error stands.
    pub conformity: Conformity,
    /// Where the corrected value stands, if a correction is in force.
    pub corrected_zone: Option<Zone>,
    /// How fast it drifts; `None` before a line can be fitted.
    pub drift: Option<Drift>,
    /// When the error reaches its limit.
    pub time_to_limit: TimeToLimit,
    /// When to recalibrate: a proposal that a person decides on.
    pub recalibration: Recalibration,
    /// Whether the pairs can show the drift that matters; `None` while that is not known.
    pub cadence: Option<Cadence>,
}

/// A statement of conformity, or why there is none.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Conformity {
    /// The statement.
    Stated {
        /// Where ê ± U stands.
        zone: Zone,
        /// Whether the error is accepted under the rule.
        accepted: bool,
        /// `p_c`, the probability that the error is within the limits.
        probability: f64,
    },
    /// No statement.
    Refused(NoStatement),
}

impl Conformity {
    /// The zone, if one is stated.
    #[must_use]
    pub fn zone(self) -> Option<Zone> {
        match self {
            Self::Stated { zone, .. } => Some(zone),
            Self::Refused(_) => None,
        }
    }

    /// Whether the error is accepted, if that is stated.
    #[must_use]
    pub fn accepted(self) -> Option<bool> {
        match self {
            Self::Stated { accepted, .. } => Some(accepted),
            Self::Refused(_) => None,
        }
    }
}

/// Why no conformity is stated. Trends are shown all the same.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum NoStatement {
    /// No maximum permissible error is configured.
    NoLimit,
    /// Nothing is known of the uncertainty.
    UnknownUncertainty,
    /// The reference's uncertainty is too large for the limit.
    WeakReference,
    /// A group shows only how its members differ; what they have in common stays unseen.
    RelativeReference,
}

/// How fast the error changes.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Drift {
    /// Unit per day.
    pub rate: f64,
    /// U of it, per day.
    pub expanded_uncertainty: f64,
    /// k of that U.
    pub coverage_factor: f64,
    /// Whether it differs from zero by at least that U.
    pub resolved: bool,
    /// Which pairs the line rests on …
    pub basis: Basis,
    /// … from here …
    pub from: Timestamp,
    /// … to here.
    pub to: Timestamp,
    /// Nothing is forecast beyond this instant: so far ahead as the line reaches back.
    pub horizon: Timestamp,
}

/// When the uncorrected error reaches its limit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum TimeToLimit {
    /// The band reaches the limit.
    Forecast {
        /// The limit that it drifts to, with its sign.
        limit: f64,
        /// The band's first edge is there.
        earliest: Timestamp,
        /// The line is there; `None`: beyond the horizon.
        central: Option<Timestamp>,
        /// The band's last edge is there; `None`: beyond the horizon.
        latest: Option<Timestamp>,
    },
    /// The drift is not resolved; not before this instant at the level of coverage.
    NotResolvable {
        /// An edge of the band is at a limit then, or the horizon.
        not_before: Timestamp,
    },
    /// The drift is resolved, but the band stays within the limit up to the horizon.
    BeyondHorizon {
        /// The horizon.
        not_before: Timestamp,
    },
    /// The error is at or beyond the limit already.
    Reached,
    /// No line can be fitted yet, or none is permitted.
    NoLine,
    /// There is no limit.
    NoLimit,
}

/// A proposal when to recalibrate. Nothing follows from it by itself.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Recalibration {
    /// By when, from the drift; `None` where nothing can be said.
    pub by: Option<Timestamp>,
    /// What the last as-found result says about the interval.
    pub staircase: Option<AsFound>,
}

/// A result as found, before any adjustment, against the limit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct AsFound {
    /// When it was found.
    pub at: Timestamp,
    /// The error found, in the channel's unit.
    pub error: f64,
    /// What it says about the interval.
    pub interval: Staircase,
}

/// How the interval between calibrations should change (ILAC-G24:2022 / OIML D 10:2022, method 1,
/// staircase).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Staircase {
    /// Lengthen it.
    Extend,
    /// Leave it.
    Keep,
    /// Shorten it.
    Reduce,
}

/// As found within this part of the limit, the interval may grow (ILAC-G24:2022 / OIML D 10:2022,
/// 6.2: "e.g. 80 %").
const WELL_WITHIN: f64 = 0.8;

impl Staircase {
    /// What an error as found says against the maximum permissible error `limit` > 0: within 80 %
    /// of it the interval may grow, beyond it must shrink.
    #[must_use]
    pub fn of(as_found: f64, limit: f64) -> Self {
        let part = as_found.abs() / limit;
        if part <= WELL_WITHIN {
            Self::Extend
        } else if part <= 1.0 {
            Self::Keep
        } else {
            Self::Reduce
        }
    }
}

/// Whether the pairs can show the drift that matters (Weatherhead et al. 1998).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Cadence {
    /// The drift that matters, unit per day: the largest permitted, or what would use up the
    /// maximum permissible error within a window.
    pub drift: f64,
    /// Standard deviation of a segment's mean.
    pub noise: f64,
    /// Days between segments.
    pub spacing_days: f64,
    /// Days needed to see that drift: with probability 90 %, at the 95 % level.
    pub needed_days: f64,
    /// Days that the window holds.
    pub window_days: f64,
}

impl Cadence {
    /// Whether the window is long enough.
    #[must_use]
    pub fn is_sufficient(&self) -> bool {
        self.needed_days <= self.window_days
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check value V36: as found at 70, 90, 110 % of the limit.
    #[test]
    fn the_staircase_extends_keeps_and_reduces() {
        for sign in [-0.2, 0.2] {
            assert_eq!(Staircase::of(0.7 * sign, 0.2), Staircase::Extend);
            assert_eq!(Staircase::of(0.9 * sign, 0.2), Staircase::Keep);
            assert_eq!(Staircase::of(1.1 * sign, 0.2), Staircase::Reduce);
        }
    }
}
