//! The forms in which a recording's column of times may be written.

use crate::decimal::scaled_integer;
use crate::instant::{self, NoInstant};
use holdtrue_engine::time::{Duration, Timestamp};
use std::fmt;
use std::str::FromStr;

/// Form of a column of times.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub enum TimeForm {
    /// RFC 3339, or a full date.
    #[default]
    Rfc3339,
    /// Year-month-day.
    Date,
    /// Seconds since 1970-01-01T00:00:00Z, decimals allowed.
    Epoch,
    /// Milliseconds since 1970-01-01T00:00:00Z.
    EpochMilliseconds,
    /// A pattern with `%Y`, `%m`, `%d`, `%H`, `%M`, `%S` and the like; without a time of day
    /// midnight.
    Pattern(String),
}

/// Why a cell tells no instant; shown as the way out.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum NotThatForm {
    /// It has a time of day, but nothing tells how far that clock is from UTC.
    NoOffset,
    /// No RFC 3339, no date.
    Text(NoInstant),
    /// It has a time of day.
    Date,
    /// No number of seconds or milliseconds.
    Number,
    /// It does not fit the pattern.
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
    /// The instant that `cell` tells.
    ///
    /// `ahead`: by how much the clock behind times without an offset of their own runs ahead of
    /// UTC. Where it is not known such times are refused; dates count in UTC.
    ///
    /// # Errors
    /// Why it tells none.
    pub fn read(&self, cell: &str, ahead: Option<Duration>) -> Result<Timestamp, NotThatForm> {
        let cell = cell.trim();
        match self {
            Self::Date if cell.contains(':') => Err(NotThatForm::Date),
            Self::Rfc3339 | Self::Date => rfc3339(cell, ahead),
            Self::Epoch => since_1970(cell, 9),
            Self::EpochMilliseconds => since_1970(cell, 6),
            Self::Pattern(pattern) => by_pattern(pattern, cell, ahead),
        }
    }
}

fn rfc3339(cell: &str, ahead: Option<Duration>) -> Result<Timestamp, NotThatForm> {
    let read = match ahead {
        Some(ahead) => instant::from_local_text(cell, ahead),
        None => instant::from_text(cell),
    };
    read.map_err(|why| {
        // With an offset it would have been one: that is what is missing.
        if ahead.is_none() && instant::from_local_text(cell, Duration::ZERO).is_ok() {
            NotThatForm::NoOffset
        } else {
            NotThatForm::Text(why)
        }
    })
}

/// A decimal number of units of which 10^`places` nanoseconds make one.
fn since_1970(cell: &str, places: i32) -> Result<Timestamp, NotThatForm> {
    scaled_integer(cell, places)
        .and_then(|nanoseconds| i64::try_from(nanoseconds).ok())
        .map(Timestamp)
        .ok_or(NotThatForm::Number)
}

fn by_pattern(
    pattern: &str,
    cell: &str,
    ahead: Option<Duration>,
) -> Result<Timestamp, NotThatForm> {
    let misfit = || NotThatForm::Pattern(pattern.to_owned());
    let held = |instant| instant::held(instant).map_err(NotThatForm::Text);
    let parsed = jiff::fmt::strtime::parse(pattern, cell).map_err(|_| misfit())?;
    if parsed.offset().is_some() {
        return held(parsed.to_timestamp().map_err(|_| misfit())?);
    }
    let (civil, is_date) = if let Ok(civil) = parsed.to_datetime() {
        (civil, false)
    } else {
        let day = parsed.to_date().map_err(|_| misfit())?;
        (day.at(0, 0, 0, 0), true)
    };
    if ahead.is_none() && !is_date {
        return Err(NotThatForm::NoOffset);
    }
    let as_utc = jiff::tz::TimeZone::UTC.to_timestamp(civil);
    let as_utc = held(as_utc.map_err(|_| misfit())?)?;
    Ok(as_utc.minus(ahead.unwrap_or(Duration::ZERO)))
}

impl fmt::Display for NotThatForm {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NoOffset => out.write_str(
                "has no offset from UTC; say which clock it is with --utc-offset, as Z or +01:00",
            ),
            Self::Text(NoInstant::Shape) => out.write_str(
                "is neither RFC 3339 nor a date; if the recording writes times otherwise, say how \
                 with --time-format",
            ),
            Self::Text(why) => why.fmt(out),
            Self::Date => out.write_str("is more than a date; its time format may be rfc3339"),
            Self::Number => out.write_str("is no number of seconds or milliseconds since 1970"),
            Self::Pattern(pattern) => write!(out, "does not fit the time format {pattern}"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// As `date -ud 1980-02-05 +%s` says.
    const DAY: Timestamp = Timestamp(318_556_800_000_000_000);

    fn form(text: &str) -> TimeForm {
        text.parse().unwrap()
    }

    #[test]
    fn each_form_reads_its_own() {
        let utc = Some(Duration::ZERO);
        let cases = [
            ("date", "1980-02-05", DAY),
            ("rfc3339", "1980-02-05T01:00:00+01:00", DAY),
            ("rfc3339", "1980-02-05", DAY),
            ("epoch", "318556800", DAY),
            ("epoch", "3.185568e8", DAY),
            ("epoch", "318556800.000000001", Timestamp(DAY.0 + 1)),
            ("epoch", "-1.5", Timestamp(-1_500_000_000)),
            ("epoch-ms", "318556800000", DAY),
            ("%d.%m.%Y", "05.02.1980", DAY),
            (
                "%d/%m/%Y %H:%M",
                "05/02/1980 00:01",
                Timestamp(DAY.0 + 60_000_000_000),
            ),
            ("%Y-%m-%d %H:%M %z", "1980-02-05 01:00 +0100", DAY),
        ];
        for (text, cell, expected) in cases {
            assert_eq!(form(text).read(cell, utc), Ok(expected), "{text} {cell}");
        }
        assert!("american".parse::<TimeForm>().is_err());
    }

    #[test]
    fn what_is_not_of_the_form_is_told_with_the_way_out() {
        let cases = [
            ("date", "05.02.1980", "time-format"),
            ("date", "1980-02-05T00:00:00Z", "rfc3339"),
            ("rfc3339", "1980-02-05T00:00:00", "utc-offset"),
            ("rfc3339", "1980-02-30", "no such day"),
            ("rfc3339", "", "time-format"),
            ("epoch", "1980-02-05", "since 1970"),
            ("epoch", "", "since 1970"),
            ("epoch", "1e30", "since 1970"),
            ("%d.%m.%Y", "1980-02-05", "%d.%m.%Y"),
            ("%d.%m.%Y %H:%M", "05.02.1980 01:00", "utc-offset"),
        ];
        for (text, cell, way_out) in cases {
            let told = form(text).read(cell, None).unwrap_err().to_string();
            assert!(told.contains(way_out), "{text} {cell}: {told}");
        }
    }

    #[test]
    fn an_offset_counts_for_texts_and_not_for_numbers() {
        let ahead = Some(Duration::from_seconds(3600));
        let hour_before = Ok(Timestamp(DAY.0 - 3_600_000_000_000));
        assert_eq!(form("date").read("1980-02-05", ahead), hour_before);
        assert_eq!(form("%d.%m.%Y").read("05.02.1980", ahead), hour_before);
        assert_eq!(
            form("%d.%m.%Y %H:%M").read("05.02.1980 00:00", ahead),
            hour_before
        );
        assert_eq!(form("epoch").read("318556800", ahead), Ok(DAY));
        assert_eq!(form("rfc3339").read("1980-02-05T00:00:00Z", ahead), Ok(DAY));
    }
}
