//! How things stand now, for the `state` document and the summary at the end of a demo. A view:
//! nothing depends on it.

use crate::counters::Counters;
use crate::event::{AlarmKind, AlarmState, Cause, Rung, Status, Subject, Zone};
use crate::setup::{ChannelId, ReferenceId};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// How the whole node stands.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Standing {
    /// The engine's now; `None` before the first accepted input.
    pub now: Option<Timestamp>,
    /// What was refused, by subject and reason.
    pub counters: Counters,
    /// One entry per channel, by position.
    pub channels: Vec<ChannelStanding>,
    /// One entry per reference, by position.
    pub references: Vec<ReferenceStanding>,
    /// Every alarm that is not normal.
    pub alarms: Vec<AlarmStanding>,
}

/// How one channel stands.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ChannelStanding {
    /// Which channel.
    pub channel: ChannelId,
    /// Phenomenon time of the newest accepted indication.
    pub last_indication: Option<Timestamp>,
    /// Phenomenon time of the newest pair that entered the fit.
    pub last_pair: Option<Timestamp>,
    /// Pairs that entered the fit in this stretch.
    pub pairs: u64,
    /// The announced degree; `None` before there is a fit.
    pub degree: Option<u8>,
    /// c at the newest pair, in the channel's unit, whether or not the dead zone suppresses it.
    pub correction: Option<f64>,
    /// u at the newest pair, in the channel's unit.
    pub standard_uncertainty: Option<f64>,
    /// Where the uncorrected error stands.
    pub zone: Option<Zone>,
    /// Whether it is accepted under the channel's decision rule.
    pub accepted: Option<bool>,
    /// Where the corrected value stands.
    pub corrected_zone: Option<Zone>,
    /// Number of the correction in force; `None` when none is.
    pub issue_number: Option<u64>,
    /// Until when it holds.
    pub valid_until: Option<Timestamp>,
    /// Whether the screen is locked out.
    pub locked_out: bool,
    /// The uncorrected error does not reach its limit before this instant, as the outlook in force
    /// says: what service is planned by. `None` where nothing can be said.
    pub limit_not_before: Option<Timestamp>,
    /// Where it stands on the fail-safe ladder.
    pub rung: Rung,
    /// Why not on the first rung.
    pub because: Option<Cause>,
    /// All status signals that apply, the most urgent first; empty: good.
    pub statuses: Vec<Status>,
}

impl ChannelStanding {
    /// The one status signal to show.
    #[must_use]
    pub fn status(&self) -> Status {
        self.statuses.first().copied().unwrap_or(Status::Good)
    }
}

/// How one reference stands.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ReferenceStanding {
    /// Which reference.
    pub reference: ReferenceId,
    /// Newest instant at which its value was known; `None` for a constant without a gate and before
    /// the first value.
    pub last_value: Option<Timestamp>,
    /// What is wrong with it, so that its channels hold.
    pub trouble: Option<Cause>,
}

/// An alarm that is not normal.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct AlarmStanding {
    /// What it stands on.
    pub subject: Subject,
    /// Its kind.
    pub kind: AlarmKind,
    /// Its state.
    pub state: AlarmState,
}
