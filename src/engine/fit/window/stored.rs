//! How a window is stored, and what is looked at before a stored one is believed.
//!
//! The aggregates of the two stacks are left out: both follow from the segments, merged in the
//! order in which the window merges them, to the bit. The total does not, since rows enter it one
//! by one, and is stored.

use super::Window;
use crate::fit::basis::{Columns, Frame};
use crate::fit::centre::Centre;
use crate::fit::cut::Cut;
use crate::fit::factor::Factor;
use crate::fit::segment::Segment;
use crate::fit::spare::Spare;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize, Serializer};
use std::borrow::Cow;
use std::collections::VecDeque;

/// No segment counts so many rows; those of a whole window can be added up.
const MOST_ROWS: u64 = 1 << 44;

/// A window on its way to or from the record.
#[derive(Serialize, Deserialize)]
pub(super) struct Stored<'a> {
    columns: Columns,
    cut: Cut,
    frame: Frame,
    centre: Centre,
    has_settled: bool,
    newest: Option<Timestamp>,
    has_dropped: bool,
    closed: Cow<'a, VecDeque<Segment>>,
    open: Cow<'a, Option<Segment>>,
    /// How many of the closed segments the front holds.
    in_front: usize,
    front_level: f64,
    back_level: f64,
    total: Cow<'a, Factor>,
    total_level: f64,
}

impl Serialize for Window {
    fn serialize<S: Serializer>(&self, to: S) -> Result<S::Ok, S::Error> {
        let stored = Stored {
            columns: self.columns,
            cut: self.cut,
            frame: self.frame,
            centre: self.centre,
            has_settled: self.has_settled,
            newest: self.newest,
            has_dropped: self.has_dropped,
            closed: Cow::Borrowed(&self.closed),
            open: Cow::Borrowed(&self.open),
            in_front: self.front.len(),
            front_level: self.front_level,
            back_level: self.back_level,
            total: Cow::Borrowed(&self.total),
            total_level: self.total_level,
        };
        stored.serialize(to)
    }
}

impl TryFrom<Stored<'_>> for Window {
    type Error = &'static str;

    fn try_from(stored: Stored<'_>) -> Result<Self, Self::Error> {
        stored.check()?;
        let mut window = Self {
            columns: stored.columns,
            cut: stored.cut,
            frame: stored.frame,
            centre: stored.centre,
            has_settled: stored.has_settled,
            newest: stored.newest,
            has_dropped: stored.has_dropped,
            closed: stored.closed.into_owned(),
            open: stored.open.into_owned(),
            front: Vec::with_capacity(stored.in_front),
            front_level: stored.front_level,
            back: Factor::new(stored.columns.count()),
            back_level: stored.back_level,
            total: stored.total.into_owned(),
            total_level: stored.total_level,
            spare: Spare::default(),
        };
        window.fill_front(stored.in_front);
        for segment in window.closed.range(stored.in_front..) {
            let level = window.back_level - segment.level;
            window.back.merge_level(&segment.factor, level);
        }
        Ok(window)
    }
}

impl Stored<'_> {
    /// Says what can be no window. (That it is the one its channel's setup asks for is
    /// [`crate::fit::Fit`]'s to see.)
    fn check(&self) -> Result<(), &'static str> {
        if !self.columns.are_possible() || !self.frame.is_possible() {
            return Err("a window of impossible columns");
        }
        let keep = match self.cut {
            Cut::Time { slice, keep } if slice.0 > 0 => keep,
            Cut::Rows { per_segment, keep } if per_segment > 0 => keep,
            _ => return Err("a window that is cut nowhere"),
        };
        if self.closed.len() > keep as usize || self.in_front > self.closed.len() {
            return Err("a window of more segments than it holds");
        }
        let segments = || self.closed.iter().chain(self.open.iter());
        if !segments().all(|segment| self.may_hold(segment)) {
            return Err("a window with an impossible segment");
        }
        if !segments().is_sorted_by(|a, b| a.slice < b.slice) {
            return Err("a window whose segments are out of order");
        }
        let rows: u64 = segments().map(Segment::rows).sum();
        let is_empty = self.newest.is_none();
        if self.total.columns() != self.columns.count()
            || self.total.rows() != rows
            || is_empty != (rows == 0)
        {
            return Err("a window whose total is of other rows");
        }
        Ok(())
    }

    fn may_hold(&self, segment: &Segment) -> bool {
        let in_place = match self.cut {
            Cut::Time { slice, .. } => [segment.first, segment.last]
                .into_iter()
                .all(|time| time.0.div_euclid(slice.0) == segment.slice),
            Cut::Rows { .. } => segment.first <= segment.last,
        };
        in_place
            && segment.slice < i64::MAX
            && (1..MOST_ROWS).contains(&segment.rows())
            && segment.factor.columns() == self.columns.count()
            && segment.level.is_finite()
    }
}
