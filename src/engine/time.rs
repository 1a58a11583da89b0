//! Timestamps and durations in integer nanoseconds, so that time arithmetic is exact and the same everywhere.
//!
//! Three times exist and never share a name: *phenomenon time* (when a quantity was sampled), *received time* (when the
//! daemon got the message) and *scaled time* (the dimensionless time inside a fit, an `f64`).

use serde::{Deserialize, Serialize};

/// An instant: nanoseconds since 1970-01-01T00:00:00Z, without leap seconds (as Unix time counts).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct Timestamp(pub i64);

/// A length of time in nanoseconds; may be negative (a lag).
#[derive(
    Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize,
)]
#[serde(transparent)]
pub struct Duration(pub i64);

/// Nanoseconds in a second.
const NANOS_PER_SECOND: i64 = 1_000_000_000;
/// Seconds in the day that documents count time in.
const SECONDS_PER_DAY: f64 = 86_400.0;

impl Timestamp {
    /// The instant `duration` later; saturates at the ends of the range (years 1677 and 2262).
    #[must_use]
    pub fn plus(self, duration: Duration) -> Self {
        Self(self.0.saturating_add(duration.0))
    }

    /// The instant `duration` earlier; saturates like [`Timestamp::plus`].
    #[must_use]
    pub fn minus(self, duration: Duration) -> Self {
        Self(self.0.saturating_sub(duration.0))
    }

    /// The time from `earlier` to `self`; negative when `self` comes first.
    #[must_use]
    pub fn since(self, earlier: Self) -> Duration {
        Duration(self.0.saturating_sub(earlier.0))
    }
}

impl Duration {
    /// No time at all.
    pub const ZERO: Self = Self(0);

    /// A whole number of seconds; saturates.
    #[must_use]
    pub const fn from_seconds(seconds: i64) -> Self {
        Self(seconds.saturating_mul(NANOS_PER_SECOND))
    }

    /// Seconds as a float: exact to the nearest representable value.
    #[must_use]
    pub fn seconds(self) -> f64 {
        self.0 as f64 / NANOS_PER_SECOND as f64
    }

    /// Days of 86 400 s as a float, the unit of time in published documents.
    #[must_use]
    pub fn days(self) -> f64 {
        self.seconds() / SECONDS_PER_DAY
    }
}
