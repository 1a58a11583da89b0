//! Names of record files: the day, and a running number within the day, since each clean stop
//! finishes a file. In the order of names, files follow each other.

use holdtrue_engine::time::Timestamp;
use jiff::civil::Date;
use jiff::tz::Offset;
use std::fmt;
use std::path::Path;
use std::str::FromStr;

/// Ends the name of every record file.
const SUFFIX: &str = ".sqlite";
/// Ends the name of the checksum beside a finished file.
const CHECKSUM_SUFFIX: &str = ".sha256";
/// Most files that one day can have.
const PARTS_MAX: u16 = 9999;

/// The name of a record file, as `2026-12-01.0001.sqlite`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct DayName {
    date: Date,
    part: u16,
}

impl DayName {
    /// The first file of the day (UTC) of `instant`.
    #[must_use]
    pub fn first(instant: Timestamp) -> Self {
        Self {
            date: date(instant),
            part: 1,
        }
    }

    /// The file that follows this one, begun at `instant`. A clock that went back does not make
    /// the order go back, and a day with more files than it can have goes on under the next date.
    #[must_use]
    pub fn next(self, instant: Timestamp) -> Self {
        let date = date(instant);
        if date > self.date {
            return Self { date, part: 1 };
        }
        if self.part < PARTS_MAX {
            return Self {
                date: self.date,
                part: self.part + 1,
            };
        }
        Self {
            date: self.date.tomorrow().unwrap_or(self.date),
            part: 1,
        }
    }

    /// The day.
    #[must_use]
    pub fn date(self) -> Date {
        self.date
    }

    /// The instant at which the day begins.
    #[must_use]
    pub fn day_begin(self) -> Timestamp {
        midnight(Some(self.date)).unwrap_or(Timestamp(i64::MIN))
    }

    /// The instant at which the day ends.
    #[must_use]
    pub fn day_end(self) -> Timestamp {
        midnight(self.date.tomorrow().ok()).unwrap_or(Timestamp(i64::MAX))
    }

    /// Name of the checksum file.
    #[must_use]
    pub fn checksum(self) -> String {
        format!("{self}{CHECKSUM_SUFFIX}")
    }

    /// The name of the file at `path`, if it is one of a record file.
    #[must_use]
    pub fn of(path: &Path) -> Option<Self> {
        path.file_name()?.to_str()?.parse().ok()
    }
}

impl fmt::Display for DayName {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}.{:04}{SUFFIX}", self.date, self.part)
    }
}

impl FromStr for DayName {
    type Err = ();

    fn from_str(text: &str) -> Result<Self, ()> {
        let stem = text.strip_suffix(SUFFIX).ok_or(())?;
        let (date, part) = stem.split_once('.').ok_or(())?;
        let name = Self {
            date: date.parse().map_err(|_| ())?,
            part: part.parse().map_err(|_| ())?,
        };
        // Other spellings of the same (`+1`, a week date) are not ours.
        if name.part == 0 || name.to_string() != text {
            return Err(());
        }
        Ok(name)
    }
}

/// The instant at which a day begins, UTC.
fn midnight(date: Option<Date>) -> Option<Timestamp> {
    let time = Offset::UTC.to_timestamp(date?.at(0, 0, 0, 0)).ok()?;
    i64::try_from(time.as_nanosecond()).ok().map(Timestamp)
}

/// The day of an instant, UTC.
fn date(instant: Timestamp) -> Date {
    jiff::Timestamp::from_nanosecond(i128::from(instant.0))
        .map_or(Date::ZERO, |time| Offset::UTC.to_datetime(time).date())
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 2026-12-01T00:00:00Z.
    const DAY: i64 = 1_796_083_200_000_000_000;
    const NANOS_PER_DAY: i64 = 86_400_000_000_000;

    #[test]
    fn names_are_read_back_and_stand_in_the_order_of_the_files() {
        let first = DayName::first(Timestamp(DAY));
        assert_eq!(first.to_string(), "2026-12-01.0001.sqlite");
        let same_day = first.next(Timestamp(DAY + NANOS_PER_DAY - 1));
        assert_eq!(same_day.to_string(), "2026-12-01.0002.sqlite");
        let next_day = same_day.next(Timestamp(DAY + NANOS_PER_DAY));
        assert_eq!(next_day.to_string(), "2026-12-02.0001.sqlite");
        let clock_back = next_day.next(Timestamp(0));
        assert_eq!(clock_back.to_string(), "2026-12-02.0002.sqlite");
        let all = [first, same_day, next_day, clock_back];
        assert!(all.is_sorted());
        for name in all {
            assert_eq!(name.to_string().parse(), Ok(name));
        }
        assert_eq!(first.day_end(), Timestamp(DAY + NANOS_PER_DAY));
    }

    #[test]
    fn other_files_are_not_taken_for_ours() {
        for text in [
            "holdtrue.sqlite",
            "2026-12-01.sqlite",
            "2026-12-01.1.sqlite",
            "2026-12-01.0000.sqlite",
            "2026-13-01.0001.sqlite",
            "2026-12-01.0001.sqlite-wal",
            "2026-12-01.0001.sqlite.sha256",
            "2026-12-01.+001.sqlite",
        ] {
            assert_eq!(text.parse::<DayName>(), Err(()), "{text}");
        }
    }

    #[test]
    fn a_day_with_all_the_files_it_can_have_goes_on_under_the_next_date() {
        let last = DayName {
            date: date(Timestamp(DAY)),
            part: PARTS_MAX,
        };
        assert_eq!(
            last.next(Timestamp(DAY)).to_string(),
            "2026-12-02.0001.sqlite"
        );
    }
}
