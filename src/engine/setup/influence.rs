//! Influence quantities as configured: what acts on a sensor's error without being what it measures
//! (VIM 2.52), such as the temperature of its surroundings.

use crate::setup::InfluenceId;
use serde::{Deserialize, Serialize};

/// One place that values of an influence quantity come from. Channels that name the same place
/// share it.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct InfluenceSetup {
    /// Topic and place in its payload; equal for equal places.
    pub name: String,
}

/// What acts on one channel.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct ChannelInfluence {
    /// Where its values come from.
    pub source: InfluenceId,
    /// Name in the channel's documents.
    pub name: String,
    /// Unit in the channel's documents.
    pub unit: Option<String>,
}
