//! The window as it was before an instant: what a step is measured against, and how rows that
//! should not have entered are taken out again.
//!
//! Nothing is ever subtracted. Segments wholly older than the instant stay; every segment from the
//! first other one on goes as a whole, and its older rows are for the caller to put back.

use crate::fit::Fit;
use crate::fit::cut::Cut;
use crate::fit::segment::Segment;
use crate::fit::window::Window;
use crate::time::Timestamp;

/// Rows that went with their segments although they are older than the instant: those of …
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Gone {
    /// … this time and later.
    Since(Timestamp),
    /// … the last so many that entered.
    Last(u64),
}

impl Window {
    /// The window without the segments that reach to `instant` or past it, and what went with
    /// them. With `instant` past the newest row nothing goes.
    #[must_use]
    pub fn before(&self, instant: Timestamp) -> (Self, Gone) {
        let mut window = self.clone();
        let stays = |segment: &&Segment| segment.last() < instant;
        let kept = window.closed.iter().take_while(stays).count();
        let goes = kept < window.closed.len() || window.open.as_ref().is_some_and(|s| !stays(&s));
        if !goes {
            let gone = match self.cut {
                Cut::Time { .. } => Gone::Since(instant),
                Cut::Rows { .. } => Gone::Last(0),
            };
            return (window, gone);
        }
        let leaving: Vec<Segment> = window
            .closed
            .drain(kept..)
            .chain(window.open.take())
            .collect();
        let gone = match self.cut {
            Cut::Time { slice, .. } => Gone::Since(leaving.first().map_or(instant, |first| {
                Timestamp(first.slice.saturating_mul(slice.0))
            })),
            Cut::Rows { .. } => Gone::Last(leaving.iter().map(Segment::rows).sum()),
        };
        if matches!(self.cut, Cut::Time { .. }) {
            // A window in time always has its newest slice open: what is too old is told by it.
            window.open = window.closed.pop_back();
        }
        let newest = window.closed.iter().chain(&window.open).map(Segment::last);
        window.newest = newest.max();
        window.rebuild();
        (window, gone)
    }
}

impl Fit {
    /// The fit on [`Window::before`], with the model announced and the ranges seen as of now.
    #[must_use]
    pub fn before(&self, instant: Timestamp) -> (Self, Gone) {
        let (window, gone) = self.window.before(instant);
        let fit = Self {
            setup: self.setup,
            window,
            announced: self.announced.clone(),
            seen: self.seen,
        };
        (fit, gone)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::basis::{Columns, MAX_INFLUENCES};
    use crate::fit::row::WindowRow;
    use crate::time::Duration;

    fn row(time: i64) -> WindowRow {
        // Fractional parts of multiples of an irrational number: noise without a generator.
        let noise = (time as f64 * 0.618_033_988_749_895).fract() - 0.5;
        WindowRow {
            time: Timestamp(time),
            error: 5.0 + 0.1 * time as f64 + noise,
            weight: 1.0,
            x: 0.0,
            influences: [0.0; MAX_INFLUENCES],
        }
    }

    fn window(cut: Cut, rows: impl IntoIterator<Item = i64>) -> Window {
        let mut window = Window::new(Columns::time(2), cut);
        for time in rows {
            window.insert(&row(time));
        }
        window
    }

    /// The same predictions, to rounding: factors are built in another order.
    fn assert_same(found: &Window, expected: &Window, at: i64) {
        assert_eq!(found.rows(), expected.rows());
        assert_eq!(found.newest(), expected.newest());
        for degree in 0..=2 {
            let predict = |window: &Window| window.predict(degree, Timestamp(at)).expect("rows");
            let (found, expected) = (predict(found), predict(expected));
            assert!((found.error - expected.error).abs() < 1e-10 * expected.error.abs());
            assert!((found.leverage - expected.leverage).abs() < 1e-9 * expected.leverage);
            assert!((found.residual_sd - expected.residual_sd).abs() < 1e-10);
        }
    }

    const CUTS: [Cut; 3] = [
        Cut::Time {
            slice: Duration(10),
            keep: 8,
        },
        Cut::Rows {
            per_segment: 10,
            keep: 8,
        },
        Cut::Rows {
            per_segment: 1,
            keep: 80,
        },
    ];

    #[test]
    fn with_its_rows_put_back_it_is_the_window_that_was() {
        for cut in CUTS {
            for (until, instant) in [(71, 64), (75, 31), (79, 79), (60, 20), (9, 4)] {
                let all = window(cut, 0..until);
                let (mut before, gone) = all.before(Timestamp(instant));
                let from = match gone {
                    Gone::Since(time) => time.0,
                    Gone::Last(count) => until - i64::try_from(count).expect("small"),
                };
                for time in from..instant {
                    before.insert(&row(time));
                }
                assert_same(&before, &window(cut, 0..instant), instant + 3);
            }
        }
    }

    #[test]
    fn it_goes_on_like_a_window_that_never_saw_the_rest() {
        for cut in CUTS {
            let (mut before, _) = window(cut, 0..75).before(Timestamp(70));
            let mut fresh = window(cut, 0..70);
            for time in 90..200 {
                before.insert(&row(time));
                fresh.insert(&row(time));
            }
            assert_same(&before, &fresh, 205);
        }
    }

    #[test]
    fn an_instant_past_everything_takes_nothing_and_one_before_everything_all() {
        for cut in CUTS {
            let all = window(cut, 0..75);
            let (same, gone) = all.before(Timestamp(75));
            assert_eq!(same, all);
            assert!(matches!(gone, Gone::Since(Timestamp(75)) | Gone::Last(0)));
            let (none, _) = all.before(Timestamp(-1));
            assert_eq!((none.rows(), none.newest()), (0, None));
        }
    }
}
