//! One quantity measured by one sensor, as configured.

use crate::setup::{FitSetup, ReferenceId};
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
    /// Largest error that the specification permits, either sign; `None`: no conformity statement.
    pub max_permissible_error: Option<f64>,
    /// Smallest step that the indication can show; enters u as q/√12 (GUM F.2.2.1) and floors the
    /// robust scale.
    pub resolution: f64,
    /// Declared standard deviation of the indication's noise; floors the robust scale. Zero: not
    /// declared.
    pub noise: f64,
    /// Largest drift rate that needs no attention, unit per day; `None`: no such alarm.
    pub max_drift_rate: Option<f64>,
    /// Probability that the coverage interval is to have, e.g. 0.95.
    pub coverage: f64,
    /// When a new correction document is issued.
    pub publish: PublishSetup,
    /// Timing of the alarms.
    pub alarms: AlarmSetup,
    /// Publish every corrected value as well.
    pub corrected_values: bool,
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
