//! The configuration as the engine sees it: parsed, checked and indexed by the shell, so that
//! nothing here can hold a bad value and nobody checks again.
//!
//! Values are in the channel's own unit unless a name says otherwise. Sources and channels are
//! known by their position; names travel only for documents.

mod channel;
mod check;
mod defaults;
mod fit;
mod influence;
mod reference;

pub use channel::{
    AlarmSetup, ChannelSetup, DecisionRule, PublishSetup, RateLimit, Repeats, ScreeningSetup,
};
pub use fit::{Criterion, FitSetup, PairNoise, SpanSide, WindowLength};
pub use influence::{ChannelInfluence, InfluenceSetup};
pub use reference::{ReferenceKind, ReferenceSetup, Stamped, UNCERTAINTY_RATIO_MIN};

use serde::{Deserialize, Serialize};

/// Position of a channel in [`Setup::channels`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct ChannelId(pub u32);

/// Position of a reference in [`Setup::references`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct ReferenceId(pub u32);

impl ChannelId {
    /// The channel at an index.
    ///
    /// # Panics
    /// Beyond what a u32 numbers, which no configuration reaches.
    #[must_use]
    pub fn at(index: usize) -> Self {
        Self(u32::try_from(index).expect("as many channels as a u32 numbers"))
    }
}

impl ReferenceId {
    /// The reference at an index.
    ///
    /// # Panics
    /// Beyond what a u32 numbers, which no configuration reaches.
    #[must_use]
    pub fn at(index: usize) -> Self {
        Self(u32::try_from(index).expect("as many references as a u32 numbers"))
    }
}

/// Position of an influence quantity's source in [`Setup::influences`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct InfluenceId(pub u32);

/// One whole configuration of a node.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Setup {
    /// The node's name, as in its topics.
    pub node: String,
    /// Which clock says what "now" is.
    pub clock: Clock,
    /// SHA-256 of the configuration file's bytes, lower-case hexadecimal; travels in every
    /// correction.
    pub fingerprint: String,
    /// All references: named ones, and one for every channel that declares its own inline.
    pub references: Vec<ReferenceSetup>,
    /// All sources of influence quantities.
    pub influences: Vec<InfluenceSetup>,
    /// All channels.
    pub channels: Vec<ChannelSetup>,
}

impl Default for Setup {
    /// No channels: what an engine has before it is told its configuration.
    fn default() -> Self {
        Self {
            node: String::new(),
            clock: Clock::Live,
            fingerprint: String::new(),
            references: Vec::new(),
            influences: Vec::new(),
            channels: Vec::new(),
        }
    }
}

/// What "now" is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Clock {
    /// Live: received times and ticks move now; a phenomenon time more than 5 min ahead of it is
    /// refused.
    Live,
    /// Recordings: now is the newest accepted phenomenon time; ticks are not needed.
    Readings,
}
