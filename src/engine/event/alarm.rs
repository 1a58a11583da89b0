//! Alarms: what about, in which state, and what is said when one changes.

use crate::event::Subject;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What an alarm is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum AlarmKind {
    /// The uncorrected error is in conditional fail or fail.
    ErrorLimit,
    /// The drift is faster than permitted.
    DriftRate,
    /// The uncorrected error may reach its limit within the service horizon.
    TimeToLimit,
    /// No reference value for too long.
    ReferenceStale,
    /// A reference stepped against all its channels at once.
    ReferenceStep,
    /// A reference repeats one value while its channels move.
    ReferenceStuck,
    /// A reference's certificate expires soon, or has expired.
    CertificateExpiry,
    /// The correction needed is larger, or changes faster, than permitted.
    CorrectionLimit,
    /// No indication for too long.
    DataGap,
    /// The sensor stepped.
    Step,
    /// The screen rejected so many in a row that it stopped: a step or a bad reference.
    ScreenLockedOut,
    /// The sensor repeats one value, or does not follow its reference.
    Stuck,
    /// The noise has grown while the mean stayed.
    NoiseGrowth,
}

impl AlarmKind {
    /// A short fixed word for machines.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::ErrorLimit => "error-limit",
            Self::DriftRate => "drift-rate",
            Self::TimeToLimit => "time-to-limit",
            Self::ReferenceStale => "reference-stale",
            Self::ReferenceStep => "reference-step",
            Self::ReferenceStuck => "reference-stuck",
            Self::CertificateExpiry => "certificate-expiry",
            Self::CorrectionLimit => "correction-limit",
            Self::DataGap => "data-gap",
            Self::Step => "step",
            Self::ScreenLockedOut => "screen-locked-out",
            Self::Stuck => "stuck",
            Self::NoiseGrowth => "noise-growth",
        }
    }
}

/// The states of an alarm. A later version adds acknowledgement, latching, shelving and suppression
/// here.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum AlarmState {
    /// The condition does not hold.
    Normal,
    /// The condition holds and nobody has acknowledged it.
    Unacknowledged,
}

/// An alarm changed its state.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct AlarmChange {
    /// What it stands on.
    pub subject: Subject,
    /// Its kind.
    pub kind: AlarmKind,
    /// The new state.
    pub state: AlarmState,
    /// When the engine changed it.
    pub at: Timestamp,
    /// When the condition first held (or first was gone).
    pub since: Timestamp,
    /// The value that was judged; unit as `unit` says.
    pub value: f64,
    /// The limit that it was judged against.
    pub limit: f64,
    /// Unit of both.
    pub unit: String,
    /// One sentence for a technician: what, how much, what to do.
    pub text: String,
}
