//! `--from` and `--to`: a whole day, or an instant.

use crate::replay::Range;
use clap::Args;
use holdtrue_engine::time::Timestamp;
use jiff::civil::Date;
use jiff::tz::Offset;

/// Which part of a record.
#[derive(Clone, Copy, Debug, Args)]
pub(super) struct When {
    /// From this day (2026-12-01, UTC) or instant (2026-12-01T06:00:00Z) on.
    #[arg(long, value_name = "DAY", value_parser = begin)]
    from: Option<Timestamp>,
    /// Up to the end of this day, or this instant.
    #[arg(long, value_name = "DAY", value_parser = end)]
    to: Option<Timestamp>,
}

impl When {
    /// The range.
    pub(super) fn range(self) -> Range {
        let all = Range::default();
        Range {
            from: self.from.unwrap_or(all.from),
            to: self.to.unwrap_or(all.to),
        }
    }
}

fn begin(text: &str) -> Result<Timestamp, String> {
    parse(text, Ok)
}

/// The last instant of a day, or an instant.
fn end(text: &str) -> Result<Timestamp, String> {
    let next = |date: Date| {
        date.tomorrow()
            .map_err(|_| format!("\"{text}\" is the last day that there is"))
    };
    let is_day = text.parse::<jiff::Timestamp>().is_err();
    let parsed = parse(text, next)?;
    Ok(if is_day {
        Timestamp(parsed.0.saturating_sub(1))
    } else {
        parsed
    })
}

fn parse(
    text: &str,
    of_day: impl FnOnce(Date) -> Result<Date, String>,
) -> Result<Timestamp, String> {
    let outside = || format!("\"{text}\" is outside the years 1678 to 2261");
    let instant = match (text.parse::<jiff::Timestamp>(), text.parse::<Date>()) {
        (Ok(instant), _) => instant,
        (_, Ok(date)) => Offset::UTC
            .to_timestamp(of_day(date)?.at(0, 0, 0, 0))
            .map_err(|_| outside())?,
        _ => {
            return Err(format!(
                "\"{text}\" is neither a day like 2026-12-01 nor an instant like \
                 2026-12-01T06:00:00Z"
            ));
        }
    };
    i64::try_from(instant.as_nanosecond())
        .map(Timestamp)
        .map_err(|_| outside())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_day_is_whole_and_an_instant_is_itself() {
        let midnight = 1_796_083_200_000_000_000;
        let day = 86_400_000_000_000;
        assert_eq!(begin("2026-12-01"), Ok(Timestamp(midnight)));
        assert_eq!(end("2026-12-01"), Ok(Timestamp(midnight + day - 1)));
        let six = Ok(Timestamp(midnight + day / 4));
        assert_eq!(begin("2026-12-01T06:00:00Z"), six);
        assert_eq!(end("2026-12-01T07:00:00+01:00"), six);
        for text in ["yesterday", "2026-13-01", "9999-12-31"] {
            assert!(begin(text).unwrap_err().contains(text));
            assert!(end(text).unwrap_err().contains(text));
        }
    }
}
