//! The sliding window: segments in a queue of two stacks, so that sliding never subtracts.
//!
//! The *front* stack holds, for the older part of the closed segments, the aggregate of every
//! suffix of that part; its top is the whole part, and dropping the oldest segment is a pop. The
//! *back* is one running aggregate of the younger closed segments. When the front is used up, the
//! stacks *flip*: all closed segments move to the front (Tangwongsan, Hirzel & Schneider, DEBS
//! 2017; from memory). The *total*, front and back and the rows of the open segment, takes each row
//! by one insertion and is put together anew only when the front's top changes.
//!
//! **Frame.** All factors share one frame of scaled time. A flip moves it to the newest row; so
//! does a gap that is long against the time the window spans, so that no row is far from the origin
//! in terms of the spread of the rows around it (powers of far-off times are nearly parallel).
//!
//! **Content.** Cut by time: slices of a fixed grid, the newest row's slice open, and the `keep`
//! slices before it closed; so the window reaches back at least `keep` slices and less than one
//! more. Cut by rows: the open segment, and the newest `keep` closed ones; the oldest leaves when
//! the open one closes. With one row per segment that is exactly the last `keep` rows.
//!
//! **Late rows.** Cut by time, a row older than the open slice enters its own slice and the
//! aggregates are rebuilt; one older than all slices kept is refused. Cut by rows, a late row
//! enters the open segment, unless it is older than the oldest row of a window that has already
//! dropped some.
//!
//! **Centre.** Regressors of span and influence terms count from a common centre; see `centre`.
//!
//! A stored window goes on with the same bits (see `stored`): what depends on the order in which
//! rows came is stored as it is.

mod aggregates;
mod stored;

use crate::fit::basis::{Columns, Frame};
use crate::fit::centre::{Centre, FAR_OFF, SETTLED, shift_to_mean};
pub use crate::fit::cut::Cut;
use crate::fit::factor::Factor;
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::row::{Coordinates, Inserted, Row};
use crate::fit::segment::Segment;
use crate::fit::spare::Spare;
use crate::time::{Duration, Timestamp};
use serde::Deserialize;
use std::collections::VecDeque;
use stored::Stored;

/// A row whose gap to the row before exceeds this part of the time that the window spans moves the
/// frame. A quarter: a row is then at most about a window's spread from the origin until the flip.
const GAP_DIVISOR: i64 = 4;
/// A row further than this from the origin, in units of the window, moves the frame.
const FAR: f64 = 2.0;

/// The window of one stretch; see the module's text.
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(try_from = "Stored<'static>")]
pub struct Window {
    columns: Columns,
    cut: Cut,
    pub(super) frame: Frame,
    pub(super) centre: Centre,
    /// The centre is a mean of rows, no longer the first row's.
    pub(super) has_settled: bool,
    /// Newest phenomenon time ever inserted; `None` before the first row.
    pub(super) newest: Option<Timestamp>,
    /// Some rows have left.
    pub(super) has_dropped: bool,
    /// Closed segments, oldest first.
    pub(super) closed: VecDeque<Segment>,
    pub(super) open: Option<Segment>,
    /// Suffix aggregates of the oldest `front.len()` closed segments, the shortest suffix first.
    front: Vec<Factor>,
    front_level: f64,
    /// Aggregate of the closed segments that are not in the front.
    back: Factor,
    back_level: f64,
    /// Aggregate of everything.
    total: Factor,
    total_level: f64,
    spare: Spare,
}

impl Window {
    /// An empty window.
    #[must_use]
    pub fn new(columns: Columns, cut: Cut) -> Self {
        let empty = Factor::new(columns.count());
        Self {
            columns,
            cut,
            frame: Frame::new(Timestamp(0), Duration(1)),
            centre: Centre::default(),
            has_settled: false,
            newest: None,
            has_dropped: false,
            closed: VecDeque::new(),
            open: None,
            front: Vec::new(),
            front_level: 0.0,
            back: empty.clone(),
            back_level: 0.0,
            total: empty,
            total_level: 0.0,
            spare: Spare::default(),
        }
    }

    /// The columns of its rows.
    #[must_use]
    pub fn columns(&self) -> Columns {
        self.columns
    }

    /// Where segments close.
    #[must_use]
    pub fn cut(&self) -> Cut {
        self.cut
    }

    /// Origin and unit of scaled time of every factor in the window, as of now.
    #[must_use]
    pub fn frame(&self) -> Frame {
        self.frame
    }

    /// Where x and the influence quantities of every factor in the window count from, as of now.
    #[must_use]
    pub fn centre(&self) -> Centre {
        self.centre
    }

    /// What a row's entries are in every factor in the window, as of now.
    pub(crate) fn coordinates(&self) -> Coordinates {
        Coordinates {
            columns: self.columns,
            frame: self.frame,
            centre: self.centre,
        }
    }

    /// All rows in the window, errors counted from [`Window::level`].
    #[must_use]
    pub fn total(&self) -> &Factor {
        &self.total
    }

    /// Where the errors of [`Window::total`] count from.
    #[must_use]
    pub fn level(&self) -> f64 {
        self.total_level
    }

    /// Rows in the window.
    #[must_use]
    pub fn rows(&self) -> u64 {
        self.total.rows()
    }

    /// Closed segments, oldest first, all in the window's frame, each at its own level.
    #[must_use]
    pub fn closed(&self) -> impl ExactSizeIterator<Item = &Segment> + DoubleEndedIterator {
        self.closed.iter()
    }

    /// The segment that takes the next row, once it has one.
    #[must_use]
    pub fn open(&self) -> Option<&Segment> {
        self.open.as_ref()
    }

    /// Whether rows have left it.
    #[must_use]
    pub fn has_dropped(&self) -> bool {
        self.has_dropped
    }

    /// Oldest phenomenon time in the window.
    #[must_use]
    pub fn oldest(&self) -> Option<Timestamp> {
        let mut segments = self.closed.iter().chain(&self.open).map(Segment::first);
        match self.cut {
            Cut::Time { .. } => segments.next(),
            Cut::Rows { .. } => segments.min(),
        }
    }

    /// Newest phenomenon time in the window. (In a row-counted window fed with late rows only, that
    /// row may have left; the time stands.)
    #[must_use]
    pub fn newest(&self) -> Option<Timestamp> {
        self.newest
    }

    /// Whether a row of this time would be older than everything in the window, and be left out.
    #[must_use]
    pub fn is_too_old(&self, time: Timestamp) -> bool {
        if self.newest.is_none_or(|newest| time >= newest) {
            return false;
        }
        match self.cut {
            Cut::Time { slice, keep } => {
                let number = time.0.div_euclid(slice.0);
                let open = self.open.as_ref().map_or(number, |open| open.slice);
                number < open.saturating_sub(i64::from(keep))
            }
            Cut::Rows { .. } => self.has_dropped && time < self.oldest_segment_first(),
        }
    }

    /// Takes one row, which it must be able to compute with ([`crate::fit::Fit::insert`] looks).
    pub fn insert(&mut self, row: &Row) -> Inserted {
        if self.columns.is_time_only() {
            return self.enter(row);
        }
        if self.newest.is_none() {
            self.centre = row.centre();
        }
        let frame = self.frame;
        let inserted = self.enter(row);
        if !self.has_settled && self.closed.len() >= SETTLED {
            self.has_settled = true;
            self.move_centre(0.0);
        } else if self.has_settled && frame != self.frame {
            self.move_centre(FAR_OFF);
        }
        inserted
    }

    fn enter(&mut self, row: &Row) -> Inserted {
        let Some(newest) = self.newest else {
            self.frame = self.frame_at(row.time);
            return self.insert_newest(row);
        };
        if row.time >= newest {
            return self.insert_newest(row);
        }
        if self.is_too_old(row.time) {
            return Inserted {
                too_old: true,
                ..Inserted::default()
            };
        }
        match self.cut {
            Cut::Time { slice, .. } => self.insert_late(row, slice),
            Cut::Rows { per_segment, keep } => self.insert_counted(row, per_segment, keep),
        }
    }

    fn insert_newest(&mut self, row: &Row) -> Inserted {
        match self.cut {
            Cut::Time { slice, keep } => {
                let number = row.time.0.div_euclid(slice.0);
                let closed = self.advance(number, keep);
                self.follow(row.time);
                self.insert_open(row, number);
                Inserted {
                    closed,
                    ..Inserted::default()
                }
            }
            Cut::Rows { per_segment, keep } => {
                self.follow(row.time);
                self.insert_counted(row, per_segment, keep)
            }
        }
    }

    /// Cut by time: closes the open segment if its slice is over and drops what then is too old.
    fn advance(&mut self, number: i64, keep: u32) -> bool {
        if self.open.as_ref().is_none_or(|open| open.slice >= number) {
            return false;
        }
        self.close();
        let oldest_kept = number.saturating_sub(i64::from(keep));
        let leaving = self
            .closed
            .partition_point(|segment| segment.slice < oldest_kept);
        self.drop_oldest(leaving);
        true
    }

    /// Cut by rows: the row enters the open segment, which closes when it is full.
    fn insert_counted(&mut self, row: &Row, per_segment: u32, keep: u32) -> Inserted {
        let rows = self.open.as_ref().map_or(0, Segment::rows);
        let closes = rows + 1 >= u64::from(per_segment);
        let drops = closes && self.closed.len() >= keep as usize;
        let number = match (&self.open, self.closed.back()) {
            (Some(open), _) => open.slice,
            (None, Some(last)) => last.slice + 1,
            (None, None) => 0,
        };
        if drops {
            // The total is put together anew below.
            self.insert_segment(row, number);
        } else {
            self.insert_open(row, number);
        }
        if closes {
            self.close();
        }
        if drops {
            self.drop_oldest(1);
        }
        Inserted {
            closed: closes,
            ..Inserted::default()
        }
    }

    /// Cut by time: a row older than the newest enters its own slice.
    fn insert_late(&mut self, row: &Row, slice: Duration) -> Inserted {
        let number = row.time.0.div_euclid(slice.0);
        let open = self.open.as_ref().map_or(number, |open| open.slice);
        if number == open {
            self.insert_open(row, number);
            return Inserted::default();
        }
        let place = self
            .closed
            .partition_point(|segment| segment.slice < number);
        if self
            .closed
            .get(place)
            .is_none_or(|segment| segment.slice != number)
        {
            let segment = self.new_segment(row, number);
            self.closed.insert(place, segment);
        }
        let coordinates = self.coordinates();
        self.closed[place].take(row, coordinates);
        self.rebuild();
        Inserted {
            closed: true,
            ..Inserted::default()
        }
    }

    /// The row enters the open segment and the total.
    fn insert_open(&mut self, row: &Row, number: i64) {
        if self.total.rows() == 0 {
            self.total_level = row.error;
        }
        let mut scaled = [0.0; MAX_WIDTH];
        let count = self.columns.count();
        let root = self.coordinates().fill_weighted(row, &mut scaled);
        scaled[count] = (row.error - self.total_level) * root;
        if self.open.is_none() {
            self.open = Some(self.new_segment(row, number));
        }
        if let Some(open) = &mut self.open {
            let error = (row.error - open.level) * root;
            self.total
                .insert_both(&mut open.factor, &scaled[..=count], error);
            open.reach(row, self.columns);
        }
        self.newest = self.newest.max(Some(row.time));
    }

    /// The row enters the open segment only.
    fn insert_segment(&mut self, row: &Row, number: i64) {
        if self.open.is_none() {
            self.open = Some(self.new_segment(row, number));
        }
        let coordinates = self.coordinates();
        if let Some(open) = &mut self.open {
            open.take(row, coordinates);
        }
        self.newest = self.newest.max(Some(row.time));
    }

    fn new_segment(&mut self, row: &Row, slice: i64) -> Segment {
        Segment::beginning_with(row, slice, self.spare.take(self.columns.count()))
    }

    /// The open segment becomes the newest closed one.
    fn close(&mut self) {
        let Some(segment) = self.open.take() else {
            return;
        };
        if self.back.rows() == 0 {
            self.back_level = segment.level;
        }
        self.back
            .merge_level(&segment.factor, self.back_level - segment.level);
        self.closed.push_back(segment);
    }

    /// Drops the oldest `count` closed segments. There must be no open segment.
    fn drop_oldest(&mut self, count: usize) {
        if count == 0 {
            return;
        }
        self.has_dropped = true;
        let mut flips = false;
        for _ in 0..count {
            let Some(segment) = self.closed.pop_front() else {
                break;
            };
            self.spare.keep(segment.factor);
            match self.front.pop() {
                Some(top) => self.spare.keep(top),
                None => flips = true,
            }
        }
        if let (true, Some(newest)) = (flips, self.newest) {
            self.move_frame(newest);
        } else {
            self.put_total_together();
        }
    }

    /// Moves the frame if the row to come is far from the others.
    fn follow(&mut self, time: Timestamp) {
        let Some(newest) = self.newest else { return };
        if self.total.rows() == 0 {
            self.frame = self.frame_at(time);
            return;
        }
        let gap = time.since(newest).0;
        let span = newest.since(self.oldest_segment_first()).0;
        if gap > span / GAP_DIVISOR || self.frame.scaled(time) > FAR {
            self.move_frame(time);
        }
    }

    /// First row of the oldest segment: the oldest row, unless late rows came to a row-counted one.
    fn oldest_segment_first(&self) -> Timestamp {
        let oldest = self.closed.front().or(self.open.as_ref());
        oldest.map_or(Timestamp(i64::MIN), Segment::first)
    }

    /// Unit of scaled time for a window whose newest row is at `newest`.
    fn frame_at(&self, newest: Timestamp) -> Frame {
        let span = match self.cut {
            Cut::Time { slice, keep } => Duration(slice.0.saturating_mul(i64::from(keep))),
            Cut::Rows { .. } if self.total.rows() == 0 => Duration(1),
            Cut::Rows { .. } => newest.since(self.oldest_segment_first()),
        };
        Frame::new(newest, span)
    }

    /// Moves everything to a new origin and flips the stacks.
    fn move_frame(&mut self, anchor: Timestamp) {
        let frame = self.frame_at(anchor);
        for segment in self.closed.iter_mut().chain(&mut self.open) {
            self.columns
                .move_frame(&mut segment.factor, self.frame, frame);
        }
        self.frame = frame;
        self.rebuild();
    }

    /// Moves the centre of regressors whose mean is further from it than is tolerated.
    fn move_centre(&mut self, tolerated: f64) {
        let shift = shift_to_mean(&self.total, self.columns, tolerated);
        if shift != Centre::default() {
            for segment in self.closed.iter_mut().chain(&mut self.open) {
                self.columns.move_centre(&mut segment.factor, shift);
            }
            self.centre = self.centre.moved(shift);
            self.rebuild();
        }
    }
}
