//! A validation of the model by what a service found.

use crate::event::{Act, Comparison};
use crate::setup::ChannelId;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// What a sensor was found to show, against what the model had expected of it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Validation {
    /// Which channel.
    pub channel: ChannelId,
    /// When it was said.
    pub at: Timestamp,
    /// The order that brought it.
    pub order: String,
    /// Who told it.
    pub by: String,
    /// What was done.
    pub act: Act,
    /// When the readings were taken.
    pub performed: Timestamp,
    /// The stretch whose model was compared.
    pub stretch: u32,
    /// The comparison.
    pub comparison: Comparison,
    /// Certificate that came with the readings.
    pub certificate: Option<String>,
}
