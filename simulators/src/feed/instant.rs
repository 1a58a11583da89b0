//! How a column of times is read.

use holdtrue_engine::time::Timestamp;
use std::str::FromStr;

/// Form of a column of times.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum TimeForm {
    /// RFC 3339, or a plain date (midnight UTC).
    Rfc3339,
    /// Year-month-day, midnight UTC.
    Date,
    /// Seconds since 1970, decimals allowed.
    Epoch,
    /// Milliseconds since 1970.
    EpochMilliseconds,
    /// A pattern with `%Y`, `%m`, `%d`, `%H`, `%M`, `%S` and the like; UTC unless it has an offset.
    Pattern(String),
}

impl FromStr for TimeForm {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        match text {
            "rfc3339" => Ok(Self::Rfc3339),
            "date" => Ok(Self::Date),
            "epoch" => Ok(Self::Epoch),
            "epoch-ms" => Ok(Self::EpochMilliseconds),
            pattern if pattern.contains('%') => Ok(Self::Pattern(pattern.to_owned())),
            other => Err(format!(
                "{other:?} is not a time format: rfc3339, date, epoch, epoch-ms or a \
                 pattern such as %d.%m.%Y %H:%M"
            )),
        }
    }
}

impl TimeForm {
    /// The instant that `cell` tells; `None` if it can't be read.
    #[must_use]
    pub fn read(&self, cell: &str) -> Option<Timestamp> {
        let cell = cell.trim();
        match self {
            Self::Rfc3339 => cell.parse().ok().and_then(stamp).or_else(|| date(cell)),
            Self::Date => date(cell),
            Self::Epoch => scaled(cell, 9),
            Self::EpochMilliseconds => scaled(cell, 6),
            Self::Pattern(pattern) => by_pattern(pattern, cell),
        }
    }
}

/// Midnight UTC of a date.
fn date(cell: &str) -> Option<Timestamp> {
    let day: jiff::civil::Date = cell.parse().ok()?;
    utc(day.at(0, 0, 0, 0))
}

/// By a pattern; without an offset in it UTC, without a time of day midnight.
fn by_pattern(pattern: &str, cell: &str) -> Option<Timestamp> {
    let parsed = jiff::fmt::strtime::parse(pattern, cell).ok()?;
    if parsed.offset().is_some() {
        return stamp(parsed.to_timestamp().ok()?);
    }
    let civil = parsed
        .to_datetime()
        .or_else(|_| parsed.to_date().map(|day| day.at(0, 0, 0, 0)))
        .ok()?;
    utc(civil)
}

/// A decimal number times 10^`places`, exact for as many decimals; further ones are cut.
fn scaled(cell: &str, places: usize) -> Option<Timestamp> {
    let (negative, digits) = match cell.strip_prefix('-') {
        Some(rest) => (true, rest),
        None => (false, cell),
    };
    let (whole, part) = digits.split_once('.').unwrap_or((digits, ""));
    let numeric = |text: &str| text.bytes().all(|byte| byte.is_ascii_digit());
    if whole.is_empty() || !numeric(whole) || !numeric(part) {
        return None;
    }
    let part: String = part
        .chars()
        .chain(std::iter::repeat('0'))
        .take(places)
        .collect();
    let units: i64 = format!("{whole}{part}").parse().ok()?;
    Some(Timestamp(if negative { -units } else { units }))
}

/// The instant of a date and time of day in UTC.
fn utc(civil: jiff::civil::DateTime) -> Option<Timestamp> {
    stamp(jiff::tz::TimeZone::UTC.to_timestamp(civil).ok()?)
}

/// The engine's timestamp.
fn stamp(at: jiff::Timestamp) -> Option<Timestamp> {
    i64::try_from(at.as_nanosecond()).ok().map(Timestamp)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn each_form_reads_its_own() {
        // As `date -ud 1980-02-05 +%s` says.
        let day = Timestamp(318_556_800_000_000_000);
        let cases = [
            ("date", "1980-02-05", Some(day)),
            ("date", "05.02.1980", None),
            ("rfc3339", "1980-02-05T01:00:00+01:00", Some(day)),
            ("rfc3339", "1980-02-05", Some(day)),
            ("epoch", "318556800", Some(day)),
            ("epoch", "318556800.000000001", Some(Timestamp(day.0 + 1))),
            ("epoch", "-1.5", Some(Timestamp(-1_500_000_000))),
            ("epoch", "1e9", None),
            ("epoch", "", None),
            ("epoch-ms", "318556800000", Some(day)),
            ("%d.%m.%Y", "05.02.1980", Some(day)),
            (
                "%d/%m/%Y %H:%M",
                "05/02/1980 00:01",
                Some(Timestamp(day.0 + 60_000_000_000)),
            ),
            ("%Y-%m-%d %H:%M %z", "1980-02-05 01:00 +0100", Some(day)),
        ];
        for (form, cell, expected) in cases {
            let form: TimeForm = form.parse().unwrap();
            assert_eq!(form.read(cell), expected, "{form:?} {cell}");
        }
        assert!("american".parse::<TimeForm>().is_err());
    }
}
