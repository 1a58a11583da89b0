//! Which part of a record: whole days, or instants within them.

use crate::record::{Archive, DayName};
use crate::replay::ReplayError;
use holdtrue_engine::time::Timestamp;

/// From and to, both inclusive.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Range {
    /// The first instant.
    pub from: Timestamp,
    /// The last instant.
    pub to: Timestamp,
}

impl Default for Range {
    /// Everything.
    fn default() -> Self {
        Self {
            from: Timestamp(i64::MIN),
            to: Timestamp(i64::MAX),
        }
    }
}

impl Range {
    /// Whether an instant lies in it.
    #[must_use]
    pub fn holds(&self, instant: Timestamp) -> bool {
        (self.from..=self.to).contains(&instant)
    }

    /// The files that may hold something of it. A recording's files hold several days: the one
    /// that begins before `from` counts too.
    ///
    /// # Errors
    /// When there are none.
    pub(super) fn files(&self, archive: &Archive) -> Result<Vec<DayName>, ReplayError> {
        let all = archive.days();
        let first_after = all.partition_point(|name| name.day_begin() <= self.from);
        let files: Vec<DayName> = all
            .iter()
            .skip(first_after.saturating_sub(1))
            .take_while(|name| name.day_begin() <= self.to)
            .copied()
            .collect();
        if files.is_empty() {
            let name = |name: Option<&DayName>| name.map(ToString::to_string).unwrap_or_default();
            return Err(ReplayError::Nothing {
                from: name(all.first()),
                to: name(all.last()),
            });
        }
        Ok(files)
    }
}
