//! Timestamps and durations in integer nanoseconds, so that time arithmetic is exact and the same
//! everywhere.
//!
//! Three times exist and never share a name: *phenomenon time* (when a quantity was sampled),
//! *received time* (when the daemon got the message) and *scaled time* (the dimensionless time
//! inside a fit, an `f64`).

use serde::{Deserialize, Serialize};
use std::fmt;

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

    /// The first whole second at or after this instant; saturates like [`Timestamp::plus`].
    #[must_use]
    pub fn up_to_second(self) -> Self {
        let past = self.0.rem_euclid(NANOS_PER_SECOND);
        match past {
            0 => self,
            _ => Self(self.0.saturating_add(NANOS_PER_SECOND - past)),
        }
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

impl fmt::Display for Timestamp {
    /// RFC 3339 in UTC, with as many digits of the second as are needed.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let seconds = self.0.div_euclid(NANOS_PER_SECOND);
        let nanos = self.0.rem_euclid(NANOS_PER_SECOND);
        let (year, month, day) = civil(seconds.div_euclid(86_400));
        let second = seconds.rem_euclid(86_400);
        let (hour, minute, second) = (second / 3600, second / 60 % 60, second % 60);
        write!(
            f,
            "{year:04}-{month:02}-{day:02}T{hour:02}:{minute:02}:{second:02}"
        )?;
        if nanos != 0 {
            let digits = format!("{nanos:09}");
            write!(f, ".{}", digits.trim_end_matches('0'))?;
        }
        f.write_str("Z")
    }
}

/// Year, month and day of the proleptic Gregorian calendar, from days since 1970-01-01. Years are
/// counted from March, so that the leap day comes last: 400 years are 146 097 days, and months from
/// March on begin at (153 m + 2) / 5 days (Richards, *Explanatory Supplement to the Astronomical
/// Almanac*, 3rd ed., §15.11, from memory).
fn civil(days: i64) -> (i64, i64, i64) {
    let days_from_march = days + 719_468;
    let era = days_from_march.div_euclid(146_097);
    let day_of_era = days_from_march.rem_euclid(146_097);
    let year_of_era =
        (day_of_era - day_of_era / 1460 + day_of_era / 36_524 - day_of_era / 146_096) / 365;
    let day_of_year = day_of_era - (365 * year_of_era + year_of_era / 4 - year_of_era / 100);
    let month_from_march = (5 * day_of_year + 2) / 153;
    let day = day_of_year - (153 * month_from_march + 2) / 5 + 1;
    let month = (month_from_march + 2) % 12 + 1;
    let year = year_of_era + era * 400 + i64::from(month <= 2);
    (year, month, day)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn whole_seconds_round_up() {
        for (time, second) in [
            (0, 0),
            (1, 1),
            (999_999_999, 1),
            (1_000_000_000, 1),
            (-1, 0),
        ] {
            let rounded = Timestamp(time).up_to_second();
            assert_eq!(rounded, Timestamp(second * NANOS_PER_SECOND));
        }
    }

    /// RFC 3339, 5.8 (first and second example, in UTC), and the corners of leap years.
    #[test]
    fn timestamps_print_as_rfc_3339() {
        let cases = [
            (482_196_050_520_000_000, "1985-04-12T23:20:50.52Z"),
            (851_042_397_000_000_000, "1996-12-20T00:39:57Z"),
            (0, "1970-01-01T00:00:00Z"),
            (-1, "1969-12-31T23:59:59.999999999Z"),
            (951_782_400_000_000_000, "2000-02-29T00:00:00Z"),
            (4_107_542_400_000_000_000, "2100-03-01T00:00:00Z"),
        ];
        for (nanoseconds, text) in cases {
            assert_eq!(Timestamp(nanoseconds).to_string(), text);
        }
    }
}
