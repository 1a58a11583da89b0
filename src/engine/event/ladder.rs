//! How far a channel's correction may be trusted: the rungs of the fail-safe ladder, why a channel
//! stands on one, and the one word a maintenance system shows.

use serde::{Deserialize, Serialize};

/// A rung of the fail-safe ladder, best first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Rung {
    /// Corrections are kept up to date.
    Advise,
    /// The last correction stands for a limited time, with growing uncertainty.
    Hold,
    /// The correction was taken back.
    Withdrawn,
    /// There is nothing to correct with: only the indication as it comes.
    RawOnly,
}

/// Why a channel is not on the first rung, the gravest first.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Cause {
    /// The reference stepped against all its channels.
    ReferenceStep,
    /// The reference repeats one value while its channels move.
    ReferenceStuck,
    /// What it rests on is quarantined at present, or it is being fitted anew because of a
    /// quarantine.
    Quarantined,
    /// The reference has given no value for too long.
    ReferenceStale,
    /// The screen rejected so many pairs in a row that it stopped.
    ScreenLockedOut,
    /// The correction would be larger than permitted.
    CorrectionSize,
    /// The correction would change faster than permitted.
    CorrectionRate,
    /// No pair came for as long as the fit may be extrapolated.
    NotRenewed,
    /// The sensor changed: what the correction rested on is over.
    StretchEnded,
    /// The channel never gets a correction.
    MonitorOnly,
    /// There is no fit yet.
    NothingLearned,
}

/// The status signals of NAMUR NE 107 (categories from memory; verify the edition), most urgent
/// first. Out of specification before maintenance required is common practice.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Status {
    /// F: no valid data.
    Failure,
    /// C: a check, calibration or service is in progress.
    FunctionCheck,
    /// S: out of specification, or no longer known to be within.
    OutOfSpecification,
    /// M: still within, but somebody should come.
    MaintenanceRequired,
    /// None of them.
    Good,
}
