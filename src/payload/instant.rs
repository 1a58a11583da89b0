//! Phenomenon times from their text: RFC 3339, full dates, and numbers since 1970.

use super::fault::{Fault, excerpt};
use super::literal::scaled_integer;
use super::tables::TimeUnit;
use holdtrue_engine::event::RefusedReason;
use holdtrue_engine::time::{Duration, Timestamp};
use jiff::fmt::temporal::DateTimeParser;

/// Length of "2026-01-31".
const DATE_LENGTH: usize = 10;
/// Where the two digits of the second stand in "2026-01-31T23:59:60Z".
const SECOND: std::ops::Range<usize> = 17..19;
/// Seconds in a day without a leap second.
const SECONDS_PER_DAY: i64 = 86_400;
const NANOS_PER_SECOND: i64 = 1_000_000_000;

/// The time that a date-time text names, exact to the nanosecond.
///
/// RFC 3339 with any offset (also `-00:00`, and a blank or small letters where the standard allows
/// them), or a full date alone, which is midnight UTC. The leap second 23:59:60 UTC counts like the
/// second after it, as the formula of IEEE Std 1003.1 section 4.16 ("Seconds Since the Epoch") does
/// (from memory).
pub(crate) fn from_text(text: &str) -> Result<Timestamp, Fault> {
    static PARSER: DateTimeParser = DateTimeParser::new();
    let trimmed = text.trim();
    if !has_shape(trimmed) {
        return Err(bad(
            text,
            "write RFC 3339 with an offset, as 2026-01-31T12:00:00Z, or a date",
        ));
    }
    if trimmed.len() == DATE_LENGTH {
        let midnight = PARSER
            .parse_timestamp(format!("{trimmed}T00:00:00Z"))
            .map_err(|_| bad(text, "no such day"))?;
        return held(midnight, text);
    }
    if &trimmed[SECOND] == "60" {
        return leap_second(trimmed, text);
    }
    let instant = PARSER
        .parse_timestamp(trimmed)
        .map_err(|_| bad(text, "no such time, or no offset"))?;
    held(instant, text)
}

/// The time that a number of seconds, milliseconds … since 1970-01-01T00:00:00Z names, from its
/// literal: exact, rounded only below a nanosecond.
pub(super) fn from_number(literal: &str, unit: TimeUnit) -> Result<Timestamp, Fault> {
    let shift = match unit {
        TimeUnit::Seconds => 9,
        TimeUnit::Milliseconds => 6,
        TimeUnit::Microseconds => 3,
        TimeUnit::Nanoseconds => 0,
    };
    scaled_integer(literal, shift)
        .and_then(|nanoseconds| i64::try_from(nanoseconds).ok())
        .map(Timestamp)
        .ok_or_else(|| bad(literal, "outside the years 1678 to 2261; see time_unit"))
}

/// A leap second: the second before it, and one more.
fn leap_second(trimmed: &str, text: &str) -> Result<Timestamp, Fault> {
    let mut before = trimmed.to_owned();
    before.replace_range(SECOND, "59");
    let second_before = from_text(&before)?;
    let second = second_before.0.div_euclid(NANOS_PER_SECOND);
    if second.rem_euclid(SECONDS_PER_DAY) != SECONDS_PER_DAY - 1 {
        return Err(bad(text, "a second 60 is only possible at 23:59:60 UTC"));
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
fn held(instant: jiff::Timestamp, text: &str) -> Result<Timestamp, Fault> {
    i64::try_from(instant.as_nanosecond())
        .map(Timestamp)
        .map_err(|_| bad(text, "outside the years 1678 to 2261"))
}

fn bad(text: &str, hint: &str) -> Fault {
    Fault::new(
        RefusedReason::BadTime,
        format!("time {}: {hint}", excerpt(text)),
    )
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
        for text in [
            "",
            "yesterday",
            "2026-01-31T12:00:00",
            "2026-01-31T12:00Z",
            "2026-02-30",
            "2026-02-30T00:00:00Z",
            "2026-01-31T12:00:60Z",
            "2026-01-31T24:00:00Z",
            "2026-01-31T12:00:00Z[Europe/Vienna]",
            "2026-W05-1",
            "31.01.2026",
            "1600-01-01T00:00:00Z",
            "2500-01-01",
            "20260131T120000Z",
            "2026-01-31T12:00:00µ",
        ] {
            let fault = from_text(text).expect_err(text);
            assert_eq!(fault.reason, RefusedReason::BadTime, "{text}");
        }
    }

    #[test]
    fn numbers_are_taken_from_their_digits() {
        let at = |literal, unit| from_number(literal, unit).map(|time| time.0);
        assert_eq!(
            at("1735689600.123456789", TimeUnit::Seconds),
            Ok(1_735_689_600_123_456_789)
        );
        assert_eq!(
            at("1735689600123.5", TimeUnit::Milliseconds),
            Ok(1_735_689_600_123_500_000)
        );
        assert_eq!(
            at("1735689600123456", TimeUnit::Microseconds),
            Ok(1_735_689_600_123_456_000)
        );
        assert_eq!(
            at("1735689600123456789", TimeUnit::Nanoseconds),
            Ok(1_735_689_600_123_456_789)
        );
        assert_eq!(at("-1.5", TimeUnit::Seconds), Ok(-1_500_000_000));
        let mixed_up = from_number("1735689600123", TimeUnit::Seconds).unwrap_err();
        assert_eq!(mixed_up.reason, RefusedReason::BadTime);
        assert!(mixed_up.detail.contains("time_unit"), "{}", mixed_up.detail);
    }
}
