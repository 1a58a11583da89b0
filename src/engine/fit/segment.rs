//! A slice of the window: the rows that enter and leave together, as one factor with its own level.

use crate::fit::basis::Columns;
use crate::fit::factor::Factor;
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::row::{Coordinates, Row};
use crate::fit::seen::Seen;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Rows that enter and leave the window together.
///
/// Its factor stands in the window's frame and counts errors from the segment's own level, the
/// error of its first row: however large a constant the errors share, it costs no digits.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Segment {
    pub(crate) factor: Factor,
    pub(crate) level: f64,
    /// Number of its slice on the grid of time; in a row-counted window, counts segments.
    pub(crate) slice: i64,
    pub(crate) first: Timestamp,
    pub(crate) last: Timestamp,
    pub(crate) seen: Seen,
}

impl Segment {
    /// The segment that this row is to be the first of, with nothing in it yet but an empty factor.
    pub(crate) fn beginning_with(row: &Row, slice: i64, factor: Factor) -> Self {
        Self {
            factor,
            level: row.error,
            slice,
            first: row.time,
            last: row.time,
            seen: Seen::default(),
        }
    }

    /// Its rows in the window's frame, errors counted from [`Segment::level`]. To merge it with
    /// others at a common level L: [`Factor::merge_level`] with L − [`Segment::level`].
    #[must_use]
    pub fn factor(&self) -> &Factor {
        &self.factor
    }

    /// Where its errors count from, in the unit of the error.
    #[must_use]
    pub fn level(&self) -> f64 {
        self.level
    }

    /// Number of rows, ≥ 1.
    #[must_use]
    pub fn rows(&self) -> u64 {
        self.factor.rows()
    }

    /// Oldest phenomenon time of a row.
    #[must_use]
    pub fn first(&self) -> Timestamp {
        self.first
    }

    /// Newest phenomenon time of a row.
    #[must_use]
    pub fn last(&self) -> Timestamp {
        self.last
    }

    /// Which slice of the absolute grid of time it is; in a row-counted window, segments are
    /// numbered as they begin.
    #[must_use]
    pub fn slice(&self) -> i64 {
        self.slice
    }

    /// Widens its times and ranges to a row.
    #[inline]
    pub(crate) fn reach(&mut self, row: &Row, columns: Columns) {
        self.first = self.first.min(row.time);
        self.last = self.last.max(row.time);
        self.seen.take(row, columns);
    }

    /// Takes a row; the segment stands in these coordinates.
    pub(crate) fn take(&mut self, row: &Row, coordinates: Coordinates) {
        let mut scaled = [0.0; MAX_WIDTH];
        let count = coordinates.columns.count();
        let root = coordinates.fill_weighted(row, &mut scaled);
        scaled[count] = (row.error - self.level) * root;
        self.factor.insert(&scaled[..=count]);
        self.reach(row, coordinates.columns);
    }
}
