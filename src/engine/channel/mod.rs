//! One channel: pairing → screening → fit → judgement → alarms, one file per station, and the state that ties them.

use crate::gate::GateHistory;
use crate::report::Report;
use crate::setup::{ChannelId, ChannelSetup, ReferenceSetup};
use crate::standing::{AlarmStanding, ChannelStanding};
use crate::time::Timestamp;
use crate::track::{Sample, Track};
use serde::{Deserialize, Serialize};

/// What a channel can see while it acts: its own setup, and what others share with it.
pub(crate) struct Scene<'a> {
    pub(crate) id: ChannelId,
    pub(crate) setup: &'a ChannelSetup,
    pub(crate) reference: &'a ReferenceSetup,
    /// Recent values of its reference.
    pub(crate) values: &'a Track,
    pub(crate) gate: &'a GateHistory,
    /// Recent indications of all channels, by position.
    pub(crate) indications: &'a [Track],
    pub(crate) now: Timestamp,
    /// Whether received times and ticks move now.
    pub(crate) live: bool,
    /// Up to when the node is known to have been listening.
    pub(crate) alive: Timestamp,
    /// When the node began to listen again after it heard nothing from anywhere.
    pub(crate) resumed: Option<Timestamp>,
}

/// The state of one channel.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Channel {
    issued: u64,
    last_reference: Option<Timestamp>,
}

impl Channel {
    /// A channel that has seen nothing; its documents are counted on from `issued`.
    pub(crate) fn new(_setup: &ChannelSetup, issued: u64) -> Self {
        Self {
            issued,
            last_reference: None,
        }
    }

    pub(crate) fn issued(&self) -> u64 {
        self.issued
    }

    pub(crate) fn last_reference(&self) -> Option<Timestamp> {
        self.last_reference
    }

    pub(crate) fn wake(&self) -> Option<Timestamp> {
        None
    }

    pub(crate) fn take_indication(&mut self, _: &Sample, _: &Scene<'_>, _: &mut Report<'_>) {}

    pub(crate) fn take_reference(&mut self, _: &Sample, _: &Scene<'_>, _: &mut Report<'_>) {}

    pub(crate) fn pass_time(&mut self, _: &Scene<'_>, _: &mut Report<'_>) {}

    pub(crate) fn dismiss(&self, _: ChannelId, _: &ChannelSetup, _: Timestamp, _: &mut Report<'_>) {
    }

    pub(crate) fn raised_alarms(&self, _: ChannelId) -> Vec<AlarmStanding> {
        Vec::new()
    }

    pub(crate) fn standing(
        &self,
        channel: ChannelId,
        last_indication: Option<Timestamp>,
    ) -> ChannelStanding {
        ChannelStanding {
            channel,
            last_indication,
            last_pair: None,
            pairs: 0,
            degree: None,
            correction: None,
            standard_uncertainty: None,
            zone: None,
            corrected_zone: None,
            issue_number: None,
            valid_until: None,
            locked_out: false,
        }
    }
}
