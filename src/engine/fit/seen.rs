//! The levels and influence quantities in a window: beyond them nothing was learned.
//!
//! Every segment knows the range of its own rows, so that what leaves the window, or is taken out
//! of it, leaves the range as well.

use crate::fit::Fit;
use crate::fit::basis::{Columns, MAX_INFLUENCES};
use crate::fit::row::Row;
use crate::fit::segment::Segment;
use crate::fit::window::Window;
use serde::{Deserialize, Serialize};

/// Lowest and highest regressors of some rows; `None` without rows.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Seen {
    /// Of x.
    pub x: Option<(f64, f64)>,
    /// Of each influence quantity.
    pub influences: [Option<(f64, f64)>; MAX_INFLUENCES],
}

impl Seen {
    /// Takes a row that entered. The level counts even where no span is configured: the zero is
    /// valid near the levels that it was seen at.
    pub(crate) fn take(&mut self, row: &Row, columns: Columns) {
        widen(&mut self.x, row.x);
        let influences = self.influences.iter_mut().zip(row.influences);
        for (range, value) in influences.take(columns.influence_columns()) {
            widen(range, value);
        }
    }

    /// Takes all that another has seen.
    fn join(&mut self, other: &Self) {
        let own = [&mut self.x].into_iter().chain(&mut self.influences);
        let others = [&other.x].into_iter().chain(&other.influences);
        for (range, other) in own.zip(others) {
            if let Some((lowest, highest)) = *other {
                widen(range, lowest);
                widen(range, highest);
            }
        }
    }
}

impl Window {
    /// The levels and influence quantities of the rows in it.
    #[must_use]
    pub fn seen(&self) -> Seen {
        self.with_open(self.seen_closed())
    }

    /// The same of the closed segments.
    pub(crate) fn seen_closed(&self) -> Seen {
        let mut seen = Seen::default();
        for segment in self.closed() {
            seen.join(segment.seen());
        }
        seen
    }

    fn with_open(&self, mut seen: Seen) -> Seen {
        if let Some(open) = self.open() {
            seen.join(open.seen());
        }
        seen
    }
}

impl Fit {
    /// [`Window::seen`], in less time.
    pub(super) fn seen(&self) -> Seen {
        self.window.with_open(self.settled().seen)
    }
}

impl Segment {
    /// The levels and influence quantities of its rows.
    #[must_use]
    pub fn seen(&self) -> &Seen {
        &self.seen
    }
}

fn widen(range: &mut Option<(f64, f64)>, value: f64) {
    if value.is_finite() {
        let (lowest, highest) = range.unwrap_or((value, value));
        *range = Some((lowest.min(value) + 0.0, highest.max(value) + 0.0));
    }
}
