//! Lengths of time and of windows, as a technician writes them: "10 s", "1.5 h", "1024 pairs".

use holdtrue_engine::setup::WindowLength;
use holdtrue_engine::time::Duration;
use holdtrue_text::decimal::scaled_integer;

const NANOS_PER_SECOND: i128 = 1_000_000_000;
/// Units of time with their seconds in nanoseconds. A day has 86 400 s. No months, no years: they
/// have no fixed length; no lone "m", which could be either.
const UNITS: [(&str, i128); 9] = [
    ("ns", 1),
    ("us", 1_000),
    ("µs", 1_000),
    ("ms", 1_000_000),
    ("s", NANOS_PER_SECOND),
    ("min", 60 * NANOS_PER_SECOND),
    ("h", 3_600 * NANOS_PER_SECOND),
    ("d", 86_400 * NANOS_PER_SECOND),
    ("w", 7 * 86_400 * NANOS_PER_SECOND),
];
/// Longest length of time: 100 years of 365.25 days.
const LONGEST: i128 = 36_525 * 86_400 * NANOS_PER_SECOND;
/// Most pairs that a window may hold.
const PAIRS_MAX: u32 = 10_000_000;

/// Reads a length of time.
///
/// # Errors
/// What is wrong, and what to write instead.
pub(super) fn duration(text: &str) -> Result<Duration, String> {
    let (number, unit) = split(text);
    let nanoseconds = match UNITS.iter().find(|(name, _)| *name == unit) {
        Some((_, nanoseconds)) => *nanoseconds,
        None => return Err(unit_advice(text, unit)),
    };
    // Billionths of the unit, so that decimal fractions stay exact.
    let billionths = scaled_integer(number, 9)
        .filter(|_| !number.contains(['e', 'E', '+']))
        .ok_or_else(|| {
            format!("\"{text}\" is no length of time: \"{number}\" is no plain number")
        })?;
    billionths
        .checked_mul(nanoseconds)
        .map(|product| product / NANOS_PER_SECOND)
        .filter(|nanoseconds| nanoseconds.abs() <= LONGEST)
        .and_then(|nanoseconds| i64::try_from(nanoseconds).ok())
        .map(Duration)
        .ok_or_else(|| format!("\"{text}\" is longer than 100 years"))
}

/// Reads the length of a window: a length of time, or a number of pairs.
///
/// # Errors
/// What is wrong, and what to write instead.
pub(super) fn window(text: &str) -> Result<WindowLength, String> {
    let (number, unit) = split(text);
    if matches!(unit, "pairs" | "pair") {
        let pairs = number
            .parse()
            .ok()
            .filter(|pairs| (1..=PAIRS_MAX).contains(pairs));
        return pairs.map(WindowLength::Pairs).ok_or_else(|| {
            format!("\"{text}\" is not a whole number of pairs from 1 to {PAIRS_MAX}")
        });
    }
    let length = duration(text).map_err(|message| format!("{message}, or \"1024 pairs\""))?;
    if length <= Duration::ZERO {
        return Err(format!("\"{text}\": a window must be longer than zero"));
    }
    Ok(WindowLength::Time(length))
}

/// A number and its unit, with or without blanks between them.
fn split(text: &str) -> (&str, &str) {
    let text = text.trim();
    let end = text
        .find(|letter: char| !(letter.is_ascii_digit() || matches!(letter, '.' | '-' | '+')))
        .unwrap_or(text.len());
    (&text[..end], text[end..].trim_start())
}

fn unit_advice(text: &str, unit: &str) -> String {
    let units = "ns, us, ms, s, min, h, d or w";
    match unit {
        "" => format!("\"{text}\" has no unit; write {units}, as in \"10 s\" or \"30 d\""),
        "m" => format!("\"{text}\": m could be minutes or months; write min, or days with d"),
        "sec" | "secs" | "second" | "seconds" => format!("\"{text}\": write seconds as s"),
        "minute" | "minutes" | "mins" => format!("\"{text}\": write minutes as min"),
        "hour" | "hours" | "hr" => format!("\"{text}\": write hours as h"),
        "day" | "days" => format!("\"{text}\": write days as d"),
        "month" | "months" | "y" | "year" | "years" | "a" => {
            format!("\"{text}\": months and years have no fixed length; write days with d")
        }
        _ => format!("\"{text}\": unknown unit \"{unit}\"; write {units}"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lengths_of_time_are_exact() {
        for (text, nanoseconds) in [
            ("30 d", 2_592_000_000_000_000),
            ("10 s", 10_000_000_000),
            ("10s", 10_000_000_000),
            ("1.5 h", 5_400_000_000_000),
            ("0.1 s", 100_000_000),
            ("  2   min ", 120_000_000_000),
            ("-30 min", -1_800_000_000_000),
            ("0 s", 0),
            ("1 w", 604_800_000_000_000),
            ("250 ms", 250_000_000),
            ("7 µs", 7_000),
            ("1 ns", 1),
        ] {
            assert_eq!(duration(text), Ok(Duration(nanoseconds)), "{text}");
        }
    }

    #[test]
    fn nonsense_is_refused_with_the_way_out() {
        for (text, advice) in [
            ("", "no unit"),
            ("30", "no unit"),
            ("d", "plain number"),
            ("5 m", "min"),
            ("1 month", "days"),
            ("3 days", "as d"),
            ("1e3 s", "unit"),
            ("1.2.3 s", "plain number"),
            ("- s", "plain number"),
            ("+5 s", "plain number"),
            ("200000 d", "100 years"),
            ("99999999999999999999999999999 d", "plain number"),
            ("1,5 h", "unit"),
        ] {
            let message = duration(text).expect_err(text);
            assert!(message.contains(advice), "{text}: {message}");
        }
    }

    #[test]
    fn windows_are_times_or_pairs() {
        assert_eq!(window("1024 pairs"), Ok(WindowLength::Pairs(1024)));
        assert_eq!(window("1 pair"), Ok(WindowLength::Pairs(1)));
        assert_eq!(
            window("2 h"),
            Ok(WindowLength::Time(Duration::from_seconds(7200)))
        );
        for text in [
            "0 pairs",
            "1.5 pairs",
            "-3 pairs",
            "99999999999 pairs",
            "0 d",
            "-1 d",
            "x",
        ] {
            assert!(window(text).is_err(), "{text}");
        }
    }
}
