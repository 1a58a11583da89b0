//! Phenomenon times from their text: RFC 3339, full dates, and numbers since 1970.

use super::fault::{Fault, excerpt};
use super::tables::TimeUnit;
use holdtrue_engine::event::RefusedReason;
use holdtrue_engine::time::Timestamp;
use holdtrue_text::decimal::scaled_integer;
use holdtrue_text::instant;

/// The time that a date-time text names (see [`instant::from_text`]).
pub(crate) fn from_text(text: &str) -> Result<Timestamp, Fault> {
    instant::from_text(text).map_err(|why| bad(text, &why.to_string()))
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

fn bad(text: &str, hint: &str) -> Fault {
    Fault::new(
        RefusedReason::BadTime,
        format!("time {}: {hint}", excerpt(text)),
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_names_no_instant_is_refused_with_the_text_and_what_to_write() {
        let fault = from_text("yesterday").unwrap_err();
        assert_eq!(fault.reason, RefusedReason::BadTime);
        assert!(
            fault
                .detail
                .starts_with("time \"yesterday\": write RFC 3339")
        );
        let noon = Timestamp(1_769_860_800_000_000_000);
        assert_eq!(from_text("2026-01-31T12:00:00Z"), Ok(noon));
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
