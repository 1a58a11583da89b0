//! One quantity measured by one sensor, as configured.

use crate::setup::{ChannelInfluence, FitSetup, ReferenceId, ReferenceSetup};
use crate::time::Duration;
use serde::{Deserialize, Serialize};

/// One quantity measured by one sensor.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ChannelSetup {
    /// Name in documents and topics, levels separated by `/`.
    pub name: String,
    /// The unit of indications, reference values and corrections, as configured.
    pub unit: String,
    /// The reference it is judged against.
    pub reference: ReferenceId,
    /// What acts on its error without being what it measures, at most
    /// [`MAX_INFLUENCES`](crate::fit::basis::MAX_INFLUENCES).
    pub influences: Vec<ChannelInfluence>,
    /// The indication answers this much later than the reference: indication at t + lag belongs to
    /// the reference at t.
    pub lag: Duration,
    /// How late, behind now, a reading may still arrive and be used.
    pub lateness: Duration,
    /// Interpolation between two indications is refused across a longer gap.
    pub max_gap: Duration,
    /// The fit.
    pub fit: FitSetup,
    /// What may enter the fit.
    pub screening: ScreeningSetup,
    /// Steps of the sensor end the stretch. One is told when it differs by so many standard
    /// uncertainties from what the pairs before it let expect; `None`: steps aren't looked for.
    pub steps: Option<f64>,
    /// Largest error that the specification permits, either sign; `None`: no conformity statement.
    pub max_permissible_error: Option<f64>,
    /// How an error with its uncertainty is accepted or not.
    pub decision_rule: DecisionRule,
    /// How far ahead service is planned: an error that may reach its limit sooner raises an alarm.
    pub service_horizon: Duration,
    /// Smallest step that the indication can show; enters u as q/√12 (GUM F.2.2.1) and floors the
    /// robust scale.
    pub resolution: f64,
    /// Declared standard deviation of the indication's noise; floors the robust scale. Zero: not
    /// declared.
    pub noise: f64,
    /// Largest drift rate that needs no attention, unit per day; `None`: no such alarm.
    pub max_drift_rate: Option<f64>,
    /// Largest correction that may be advised, either sign; `None`: the maximum permissible error,
    /// where there is one. (A sensor that needs more is to be serviced, not corrected.)
    pub max_correction: Option<f64>,
    /// Fastest change of the correction that may be advised, unit per day; `None`: any.
    pub max_correction_rate: Option<f64>,
    /// How long the last correction may stand while it can't be kept up to date; `None`: a quarter
    /// of the time that the fit's window covers.
    pub hold_limit: Option<Duration>,
    /// Probability that the coverage interval is to have, e.g. 0.95.
    pub coverage: f64,
    /// When a new correction document is issued.
    pub publish: PublishSetup,
    /// Timing of the alarms.
    pub alarms: AlarmSetup,
    /// Publish every corrected value as well.
    pub corrected_values: bool,
    /// Safety, legal or custody measurement: everything is judged, but no correction is ever
    /// published.
    pub monitor_only: bool,
}

impl ChannelSetup {
    /// What is declared of the variance of a complete pair with `reference`, unit squared: each² +
    /// noise² + q²/12. A pair with the mean of an interval has many indications behind it: there,
    /// each² alone.
    #[must_use]
    pub fn declared_variance(&self, reference: &ReferenceSetup) -> f64 {
        let each = reference.uncertainty_each * reference.uncertainty_each;
        if reference.stands_for > Duration::ZERO {
            return each;
        }
        each + self.noise * self.noise + self.resolution * self.resolution / 12.0
    }
}

/// How an error with its expanded uncertainty U is accepted or not (ILAC-G8:09/2019, 4.2.2;
/// JCGM 106:2012, 8.3, from memory): accepted when |e| ≤ MPE − w, w the guard band.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum DecisionRule {
    /// w = 0: an error at the limit is accepted wrongly half of the time.
    Simple,
    /// w = r·U. With U at 95 %, fewer than 2.5 % are accepted wrongly at r = 1, 5 % at r = 0.83 and
    /// 0.16 % at r = 1.5 (the last two from memory).
    GuardBand {
        /// r, greater than zero.
        multiple: f64,
    },
}

impl DecisionRule {
    /// w for an expanded uncertainty, in the unit of the error.
    #[must_use]
    pub fn guard_band(self, expanded: f64) -> f64 {
        match self {
            Self::Simple => 0.0,
            Self::GuardBand { multiple } => multiple * expanded,
        }
    }

    /// Whether an error is accepted against a maximum permissible error.
    #[must_use]
    pub fn accepts(self, error: f64, expanded: f64, limit: f64) -> bool {
        error.abs() <= limit - self.guard_band(expanded)
    }
}

/// What may enter the fit (design: screening).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct ScreeningSetup {
    /// Off: every finite pair enters.
    pub enabled: bool,
    /// Lowest and highest indication that the sensor can show; outside fails.
    pub range: Option<(f64, f64)>,
    /// Width of the innovation gate in robust standard deviations.
    pub gate: f64,
    /// After so many rejections of one sign in a row the gate stops rejecting and locks out.
    pub lock_out_after: u32,
    /// How many repeats of one value mean that the sensor is stuck; `None`: as follows from noise
    /// and resolution, where both are declared.
    pub stuck: Option<Repeats>,
    /// How fast the measurand can change; `None`: not said.
    pub max_rate: Option<RateLimit>,
}

/// Equal values after a first one.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Repeats {
    /// From so many repeats on a value is suspect; at least 1.
    pub suspect: u32,
    /// From so many it fails and the sensor counts as stuck; at least `suspect`.
    pub fail: u32,
}

/// A largest change in a time.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct RateLimit {
    /// Largest change, in the channel's unit, > 0.
    pub change: f64,
    /// The time that it needs, > 0.
    pub within: Duration,
}

/// When a new correction document is issued.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct PublishSetup {
    /// A new document when the correction over the validity would differ by more than this part of
    /// u.
    pub step: f64,
    /// A new document at the latest after this time; also how far ahead a document is valid, unless
    /// the fit's own horizon is nearer.
    pub max_age: Duration,
    /// A correction is applied from so many standard uncertainties on and dropped below half of
    /// them; 0: always applied. (The mean squared error is least where one is applied from about 1,
    /// since an applied correction costs u², a suppressed one c².)
    pub dead_zone: f64,
}

/// Timing of the alarms.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct AlarmSetup {
    /// Evaluations in a row that a condition must hold before its alarm is raised, and be gone
    /// before it clears.
    pub delay: u32,
    /// A condition on the error clears only this many standard uncertainties inside its limit.
    pub deadband: f64,
    /// No accepted indication for this long raises the data-gap alarm; `None`: never.
    pub gap_after: Option<Duration>,
}

#[cfg(test)]
mod tests {
    use super::*;

    /// ILAC-G8:09/2019, 4.2.2: AL = TL − w; limit 1.0, U 0.2.
    #[test]
    fn a_guard_band_moves_the_acceptance_limit() {
        let rules = [
            (DecisionRule::Simple, 1.0),
            (DecisionRule::GuardBand { multiple: 0.83 }, 0.834),
            (DecisionRule::GuardBand { multiple: 1.0 }, 0.8),
            (DecisionRule::GuardBand { multiple: 1.5 }, 0.7),
        ];
        for (rule, acceptance) in rules {
            for sign in [-1.0, 1.0] {
                assert!(
                    rule.accepts(sign * (acceptance - 1e-9), 0.2, 1.0),
                    "{rule:?}"
                );
                assert!(
                    !rule.accepts(sign * (acceptance + 1e-9), 0.2, 1.0),
                    "{rule:?}"
                );
            }
        }
        // U beyond the limit: nothing can be accepted.
        assert!(!DecisionRule::GuardBand { multiple: 1.0 }.accepts(0.0, 1.1, 1.0));
    }
}
