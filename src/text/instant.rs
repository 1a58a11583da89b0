//! Instants from text, exact to the nanosecond: RFC 3339, full dates, times of day whose offset
//! from UTC is known from elsewhere.

use holdtrue_engine::time::{Duration, Timestamp};
use jiff::fmt::temporal::DateTimeParser;

/// Length of "2026-01-31".
const DATE_LENGTH: usize = 10;
/// Where the two digits of the second stand in "2026-01-31T23:59:60Z".
const SECOND: std::ops::Range<usize> = 17..19;
/// Seconds in a day without a leap second.
const SECONDS_PER_DAY: i64 = 86_400;
const NANOS_PER_SECOND: i64 = 1_000_000_000;
/// Largest offset from UTC, 23:59 (RFC 3339 section 5.6).
const HOURS_MAX: i64 = 23;
const MINUTES_MAX: i64 = 59;

/// Why a text names no instant; shown as what to write instead.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum NoInstant {
    /// It does not look like one.
    #[error("write RFC 3339 with an offset, as 2026-01-31T12:00:00Z, or a date")]
    Shape,
    /// A date that no calendar has.
    #[error("no such day")]
    Day,
    /// A time that no clock shows, or one without an offset.
    #[error("no such time, or no offset")]
    Time,
    /// A second 60 elsewhere than at the end of a day in UTC.
    #[error("a second 60 is only possible at 23:59:60 UTC")]
    LeapSecond,
    /// More nanoseconds since 1970 than 64 bits hold.
    #[error("outside the years 1678 to 2261")]
    Range,
}

/// The time that a date-time text names, exact to the nanosecond.
///
/// RFC 3339 with any offset (also `-00:00`, and a blank or small letters where the standard allows
/// them), or a full date alone, which is midnight UTC. The leap second 23:59:60 UTC counts like the
/// second after it, as the formula of IEEE Std 1003.1 section 4.16 ("Seconds Since the Epoch") does
/// (from memory).
///
/// # Errors
/// Why it names none.
pub fn from_text(text: &str) -> Result<Timestamp, NoInstant> {
    static PARSER: DateTimeParser = DateTimeParser::new();
    let text = text.trim();
    if !has_shape(text) {
        return Err(NoInstant::Shape);
    }
    if text.len() == DATE_LENGTH {
        let midnight = PARSER
            .parse_timestamp(format!("{text}T00:00:00Z"))
            .map_err(|_| NoInstant::Day)?;
        return held(midnight);
    }
    if &text[SECOND] == "60" {
        return leap_second(text);
    }
    let instant = PARSER.parse_timestamp(text).map_err(|_| NoInstant::Time)?;
    held(instant)
}

/// The same, where a time of day without an offset of its own, and a date, are told by a clock that
/// runs `ahead` of UTC.
///
/// # Errors
/// Why it names none.
pub fn from_local_text(text: &str, ahead: Duration) -> Result<Timestamp, NoInstant> {
    let text = text.trim();
    let local = text.len() == DATE_LENGTH || is_without_offset(text);
    if !local {
        return from_text(text);
    }
    let as_utc = if text.len() == DATE_LENGTH {
        from_text(text)?
    } else {
        from_text(&format!("{text}Z"))?
    };
    Ok(as_utc.minus(ahead))
}

/// By how much local clocks run ahead of UTC: `Z`, `+01:00`, `-03:30`.
///
/// # Errors
/// What to write.
pub fn offset_from_text(text: &str) -> Result<Duration, String> {
    let wrong = || format!("\"{text}\" is no offset from UTC; write Z, or as +01:00 or -03:30");
    if text == "Z" {
        return Ok(Duration::ZERO);
    }
    let (sign, clock) = match text.split_at_checked(1) {
        Some(("+", clock)) => (1, clock),
        Some(("-", clock)) => (-1, clock),
        _ => return Err(wrong()),
    };
    let part = |text: &str, most: i64| {
        let digits = text.len() == 2 && text.bytes().all(|byte| byte.is_ascii_digit());
        let number = text.parse().ok().filter(|number| *number <= most);
        number.filter(|_| digits)
    };
    let (hours, minutes) = clock.split_once(':').ok_or_else(wrong)?;
    let hours: i64 = part(hours, HOURS_MAX).ok_or_else(wrong)?;
    let minutes: i64 = part(minutes, MINUTES_MAX).ok_or_else(wrong)?;
    Ok(Duration::from_seconds(sign * (hours * 3600 + minutes * 60)))
}

/// Whether a text that has the shape of a date-time ends without `Z` or an offset.
fn is_without_offset(text: &str) -> bool {
    let after_seconds = text.get(SECOND.end..);
    after_seconds.is_some_and(|rest| !rest.contains(['Z', 'z', '+', '-']))
}

/// A leap second: the second before it, and one more.
fn leap_second(text: &str) -> Result<Timestamp, NoInstant> {
    let mut before = text.to_owned();
    before.replace_range(SECOND, "59");
    let second_before = from_text(&before)?;
    let second = second_before.0.div_euclid(NANOS_PER_SECOND);
    if second.rem_euclid(SECONDS_PER_DAY) != SECONDS_PER_DAY - 1 {
        return Err(NoInstant::LeapSecond);
    }
    Ok(second_before.plus(Duration::from_seconds(1)))
}

/// Whether the text is a full date, or looks like an RFC 3339 date-time; the parser behind it would
/// take more than that (zone names, week dates, times without seconds).
fn has_shape(text: &str) -> bool {
    let bytes = text.as_bytes();
    let fits = |mask: &[u8], from: usize| {
        mask.iter()
            .enumerate()
            .all(|(index, wanted)| match (wanted, bytes.get(from + index)) {
                (b'0', Some(byte)) => byte.is_ascii_digit(),
                (b'T', Some(byte)) => matches!(byte, b'T' | b't' | b' ' | b'_'),
                (wanted, Some(byte)) => wanted == byte,
                (_, None) => false,
            })
    };
    let date = fits(b"0000-00-00", 0);
    let time = || {
        fits(b"T00:00:00", DATE_LENGTH)
            && bytes.len() > SECOND.end
            && text.is_ascii()
            && !text.contains(['[', ','])
    };
    date && (bytes.len() == DATE_LENGTH || time())
}

/// An instant as our timestamp, if it can be held.
pub(crate) fn held(instant: jiff::Timestamp) -> Result<Timestamp, NoInstant> {
    i64::try_from(instant.as_nanosecond())
        .map(Timestamp)
        .map_err(|_| NoInstant::Range)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check values V40, V44 of the notes; RFC 3339 section 5.8; the rest by arithmetic.
    #[test]
    fn date_times_are_exact() {
        let cases: [(&str, i64); 12] = [
            ("1985-04-12T23:20:50.52Z", 482_196_050_520_000_000),
            ("1996-12-19T16:39:57-08:00", 851_042_397_000_000_000),
            ("1996-12-20T00:39:57Z", 851_042_397_000_000_000),
            ("1996-12-20t00:39:57z", 851_042_397_000_000_000),
            ("1996-12-20 00:39:57-00:00", 851_042_397_000_000_000),
            ("1978-07-04T21:24:16Z", 268_435_456_000_000_000),
            ("1990-12-31T23:59:60Z", 662_688_000_000_000_000),
            ("1990-12-31T15:59:60.25-08:00", 662_688_000_250_000_000),
            ("1980-02-05", 318_556_800_000_000_000),
            (
                "2026-01-31T12:00:00.123456789+01:00",
                1_769_857_200_123_456_789,
            ),
            (" 1970-01-01T00:00:00Z\n", 0),
            ("1969-12-31T23:59:59.5Z", -500_000_000),
        ];
        for (text, nanoseconds) in cases {
            assert_eq!(from_text(text), Ok(Timestamp(nanoseconds)), "{text}");
        }
    }

    #[test]
    fn what_names_no_instant_is_refused() {
        let cases = [
            ("", NoInstant::Shape),
            ("yesterday", NoInstant::Shape),
            ("2026-01-31T12:00:00", NoInstant::Shape),
            ("2026-01-31T12:00:00.5", NoInstant::Time),
            ("2026-01-31T12:00Z", NoInstant::Shape),
            ("2026-02-30", NoInstant::Day),
            ("2026-02-30T00:00:00Z", NoInstant::Time),
            ("2026-01-31T12:00:60Z", NoInstant::LeapSecond),
            ("2026-01-31T24:00:00Z", NoInstant::Time),
            ("2026-01-31T12:00:00Z[Europe/Vienna]", NoInstant::Shape),
            ("2026-W05-1", NoInstant::Shape),
            ("31.01.2026", NoInstant::Shape),
            ("1600-01-01T00:00:00Z", NoInstant::Range),
            ("2500-01-01", NoInstant::Range),
            ("20260131T120000Z", NoInstant::Shape),
            ("2026-01-31T12:00:00µ", NoInstant::Shape),
        ];
        for (text, why) in cases {
            assert_eq!(from_text(text), Err(why), "{text}");
        }
    }

    #[test]
    fn a_known_offset_counts_where_the_text_has_none() {
        let ahead = offset_from_text("+01:00").unwrap();
        let eleven = from_text("2026-01-31T11:00:00Z");
        for text in [
            "2026-01-31T12:00:00",
            "2026-01-31 12:00:00.0",
            "2026-01-31T11:00:00Z",
            "2026-01-31T06:00:00-05:00",
        ] {
            assert_eq!(from_local_text(text, ahead), eleven, "{text}");
        }
        let midnight = from_text("2026-01-30T23:00:00Z");
        assert_eq!(from_local_text("2026-01-31", ahead), midnight);
        for text in ["", "2026-01-31T12:00", "noon", "2026-01-31T12:00:00µ"] {
            assert!(from_local_text(text, ahead).is_err(), "{text}");
        }
    }

    #[test]
    fn offsets_are_hours_and_minutes() {
        let minutes = |minutes: i64| Ok(Duration::from_seconds(60 * minutes));
        assert_eq!(offset_from_text("Z"), minutes(0));
        assert_eq!(offset_from_text("+05:45"), minutes(345));
        assert_eq!(offset_from_text("-03:30"), minutes(-210));
        for text in ["", "01:00", "+1", "+01:00:00", "+25:00", "CET", "+01:60"] {
            assert!(offset_from_text(text).unwrap_err().contains("as +01:00"));
        }
    }
}
