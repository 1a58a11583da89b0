//! A source of reference values, as configured.

use crate::setup::{ChannelId, ReferenceId};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// A source of reference values.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ReferenceSetup {
    /// Name in documents and topics, levels separated by `/`. An inline reference bears its
    /// channel's name.
    pub name: String,
    /// Where its values come from.
    pub kind: ReferenceKind,
    /// Standard uncertainty of each value that is independent between values; it enters the
    /// weights. Unit of the channel.
    pub uncertainty_each: f64,
    /// Standard uncertainty shared by all values; it does not average down. Unit of the channel.
    pub uncertainty_common: f64,
    /// Identifies the calibration certificate, if there is one.
    pub certificate: Option<String>,
    /// When the certificate expires.
    pub expires: Option<Timestamp>,
    /// So long before that, somebody is told.
    pub expiry_notice: Duration,
    /// The reference is stale when its newest value is older than this; `None`: never.
    pub stale_after: Option<Duration>,
    /// How long a stretch of time each value stands for (an hourly mean); zero for a sample at an
    /// instant.
    pub stands_for: Duration,
    /// Which instant of that stretch the value's phenomenon time names.
    pub stamped: Stamped,
}

/// A maximum permissible error should be at least so many times the reference's expanded
/// uncertainty (test uncertainty ratio 4:1, common practice).
pub const UNCERTAINTY_RATIO_MIN: f64 = 4.0;
/// Coverage factor of that expanded uncertainty.
const RATIO_COVERAGE_FACTOR: f64 = 2.0;

impl ReferenceSetup {
    /// U of one value as declared, k = 2; 0 if nothing is declared.
    #[must_use]
    pub fn expanded_uncertainty(&self) -> f64 {
        let (each, common) = (self.uncertainty_each, self.uncertainty_common);
        RATIO_COVERAGE_FACTOR * (each * each + common * common).sqrt()
    }

    /// Whether it is good enough to state conformity with a maximum permissible error. One that is
    /// not can still show a trend.
    #[must_use]
    pub fn is_good_enough_for(&self, limit: f64) -> bool {
        self.expanded_uncertainty() * UNCERTAINTY_RATIO_MIN <= limit
    }
}

/// Which instant of its interval a value's phenomenon time names.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Stamped {
    /// The beginning.
    Start,
    /// The middle.
    Middle,
    /// The end.
    End,
}

/// Where reference values come from.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum ReferenceKind {
    /// Values arrive as readings with [`crate::event::Source::Reference`]: from a topic of their
    /// own, or from the same payload as the indication (then both readings bear one phenomenon
    /// time).
    Measured,
    /// A known value, such as a buffer solution or a zero gas. When `gated`, it holds only while
    /// the gate is open, as told by [`crate::event::Input::Gate`]; before the first gate event it
    /// is shut.
    Constant {
        /// The value.
        value: f64,
        /// Whether a `valid_when` condition was configured.
        gated: bool,
    },
    /// Several known values, such as zero gas and span gas: each is a gated
    /// [`ReferenceKind::Constant`] of its own, and the one whose gate alone is open holds.
    Checks {
        /// The known values.
        points: Vec<ReferenceId>,
    },
    /// The median of at least three of these channels' indications at the instant; never holds the
    /// channel itself.
    Group {
        /// The members other than the channel that uses this reference.
        members: Vec<ChannelId>,
    },
}
