//! Where the segments of a window close, and how many of them it keeps.

use crate::time::Duration;
use serde::{Deserialize, Serialize};

/// Where segments close and how many of them are kept.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Cut {
    /// On an absolute grid of time.
    Time {
        /// Length of a slice, > 0.
        slice: Duration,
        /// Closed slices kept before the open one, ≥ 1.
        keep: u32,
    },
    /// After a number of rows.
    Rows {
        /// Rows of a segment, ≥ 1.
        per_segment: u32,
        /// Closed segments kept, ≥ 1.
        keep: u32,
    },
}

impl Cut {
    /// A window of time in so many slices (rounded down to whole nanoseconds).
    #[must_use]
    pub fn time(window: Duration, segments: u32) -> Self {
        let keep = segments.max(1);
        Self::Time {
            slice: Duration((window.0 / i64::from(keep)).max(1)),
            keep,
        }
    }

    /// A window of rows in so many segments. Where the rows don't divide evenly, segments take the
    /// next whole number of rows, and as many are kept as hold at least the window.
    #[must_use]
    pub fn rows(window: u32, segments: u32) -> Self {
        let per_segment = window.max(1).div_ceil(segments.max(1));
        Self::Rows {
            per_segment,
            keep: window.max(1).div_ceil(per_segment),
        }
    }
}
