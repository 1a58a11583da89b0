//! Setups for the stations' unit tests, and a stage on which one channel acts alone.

use super::Scene;
use crate::counters::Counters;
use crate::event::Output;
use crate::fleet::LeapWatch;
use crate::kept::Kept;
use crate::notice::NoticeLimiter;
use crate::report::Report;
use crate::setup::{
    ChannelId, ChannelSetup, FitSetup, PublishSetup, ReferenceId, ReferenceKind, ReferenceSetup,
    Stamped, WindowLength,
};
use crate::time::{Duration, Timestamp};
use crate::track::Track;

/// Everything that one channel can see, with nothing in it.
pub(crate) struct Stage {
    pub(crate) setup: ChannelSetup,
    reference: ReferenceSetup,
    values: Track,
    indications: Vec<Kept<Track>>,
    /// Recent values of the influence quantities.
    pub(crate) influences: Vec<Kept<Track>>,
    counters: Kept<Counters>,
    notices: Kept<NoticeLimiter>,
    leaps: LeapWatch,
}

impl Stage {
    /// A stage for this channel, against a constant.
    pub(crate) fn new(setup: ChannelSetup) -> Self {
        Self {
            setup,
            reference: ReferenceSetup {
                name: "hall/buffer".to_owned(),
                kind: ReferenceKind::Constant {
                    value: 7.0,
                    gated: false,
                },
                uncertainty_each: 0.0,
                uncertainty_common: 0.0,
                certificate: None,
                expires: None,
                expiry_notice: Duration::ZERO,
                stale_after: None,
                stands_for: Duration::ZERO,
                stamped: Stamped::End,
            },
            values: Track::default(),
            indications: vec![Kept::default()],
            influences: Vec::new(),
            counters: Kept::default(),
            notices: Kept::default(),
            leaps: LeapWatch::default(),
        }
    }

    /// Lets the channel act at an instant; what was said.
    pub(crate) fn act(
        &mut self,
        now: Timestamp,
        acts: impl FnOnce(&Scene<'_>, &mut Report<'_>),
    ) -> Vec<Output> {
        let mut outputs = Vec::new();
        let scene = Scene {
            id: ChannelId(0),
            setup: &self.setup,
            reference: &self.reference,
            checks: Vec::new(),
            values: &self.values,
            indications: &self.indications,
            influences: &self.influences,
            now,
            alive: now,
            resumed: None,
            trouble: None,
            watched: false,
            barred: Vec::new(),
        };
        let mut report = Report {
            outputs: &mut outputs,
            counters: &mut self.counters,
            notices: &mut self.notices,
            leaps: &mut self.leaps,
        };
        acts(&scene, &mut report);
        outputs
    }
}

/// A channel with nothing declared that is not needed.
pub(crate) fn channel_setup() -> ChannelSetup {
    ChannelSetup {
        lateness: Duration::ZERO,
        max_gap: Duration::from_seconds(600),
        fit: FitSetup {
            window: WindowLength::Pairs(64),
            ..FitSetup::default()
        },
        publish: PublishSetup {
            step: 0.5,
            max_age: Duration::from_seconds(3600),
            ..PublishSetup::default()
        },
        ..ChannelSetup::new("hall/ph-1", "pH", ReferenceId(0))
    }
}
