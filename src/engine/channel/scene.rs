//! What a channel can see while it acts.

use super::pairing::{Check, Pair};
use crate::event::{Cause, Interval};
use crate::kept::Kept;
use crate::setup::{ChannelId, ChannelSetup, ReferenceSetup};
use crate::time::Timestamp;
use crate::track::Track;

/// What a channel can see while it acts: its own setup, and what others share with it.
pub(crate) struct Scene<'a> {
    pub(crate) id: ChannelId,
    pub(crate) setup: &'a ChannelSetup,
    pub(crate) reference: &'a ReferenceSetup,
    /// The known values that its reference stands for while their gates are open.
    pub(crate) checks: Vec<Check<'a>>,
    /// Recent values of its reference.
    pub(crate) values: &'a Track,
    /// Recent indications of all channels, by position.
    pub(crate) indications: &'a [Kept<Track>],
    /// Recent values of all influence quantities, by source.
    pub(crate) influences: &'a [Kept<Track>],
    pub(crate) now: Timestamp,
    /// Up to when the node is known to have been listening.
    pub(crate) alive: Timestamp,
    /// When the node began to listen again after it heard nothing from anywhere.
    pub(crate) resumed: Option<Timestamp>,
    /// What is wrong with its reference, if anything is.
    pub(crate) trouble: Option<Cause>,
    /// Whether its reference is judged by its channels before they take its values.
    pub(crate) watched: bool,
    /// Intervals in which its reference, or one of the known values that it consists of, is
    /// quarantined; pairs with a constant are kept out by these.
    pub(crate) barred: Vec<Interval>,
}

impl Scene<'_> {
    /// Whether a pair rests on a constant while that is quarantined.
    pub(super) fn bars(&self, pair: &Pair) -> bool {
        let instant = pair.time.minus(self.setup.lag);
        self.barred.iter().any(|barred| barred.holds(instant))
    }
}
