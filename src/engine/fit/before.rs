//! The window as it was before an instant: what a step is measured against, and how rows that
//! should not have entered are taken out again.
//!
//! Nothing is ever subtracted. Segments wholly older than the instant stay; every segment from the
//! first other one on goes as a whole, and its older rows are for the caller to put back.

use crate::cached::Cached;
use crate::fit::Fit;
use crate::fit::between::newest_group;
use crate::fit::cut::Cut;
use crate::fit::segment::Segment;
use crate::fit::window::Window;
use crate::time::Timestamp;
use std::collections::VecDeque;

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
        let stays = |segment: &&Segment| segment.last() < instant;
        let kept = self.closed().take_while(stays).count();
        let leaving = || self.closed().skip(kept).chain(self.open());
        let goes = kept < self.closed().len() || self.open().is_some_and(|open| !stays(&open));
        let gone = match self.cut() {
            Cut::Time { .. } if !goes => Gone::Since(instant),
            Cut::Time { slice, .. } => Gone::Since(leaving().next().map_or(instant, |first| {
                Timestamp(first.slice().saturating_mul(slice.0))
            })),
            Cut::Rows { .. } if !goes => Gone::Last(0),
            Cut::Rows { .. } => Gone::Last(leaving().map(Segment::rows).sum()),
        };
        if !goes {
            return (self.clone(), gone);
        }
        let mut closed: VecDeque<Segment> = self.closed().take(kept).cloned().collect();
        let open = match self.cut() {
            // A window in time always has its newest slice open: what is too old is told by it.
            Cut::Time { .. } => closed.pop_back(),
            Cut::Rows { .. } => None,
        };
        (self.holding(closed, open), gone)
    }

    /// A window that holds these of its segments and never held the others; without any, it is as
    /// new.
    fn holding(&self, closed: VecDeque<Segment>, open: Option<Segment>) -> Self {
        let mut window = Self::new(self.columns(), self.cut());
        window.has_dropped = self.has_dropped;
        let newest = closed.iter().chain(&open).map(Segment::last).max();
        if newest.is_some() {
            window.newest = newest;
            window.frame = self.frame;
            window.centre = self.centre;
            window.has_settled = self.has_settled;
            window.closed = closed;
            window.open = open;
            window.rebuild();
        }
        window
    }
}

impl Fit {
    /// The fit on [`Window::before`], with the model announced as of now. What was on its way to
    /// change it is forgotten where judged groups went, and their successors are judged in turn.
    #[must_use]
    pub fn before(&self, instant: Timestamp) -> (Self, Gone) {
        let (window, gone) = self.window.before(instant);
        let mut announced = self.announced.clone();
        announced.go_back(newest_group(&window));
        let fit = Self {
            setup: self.setup,
            window,
            announced,
            settled: Cached::default(),
            closed_mean: Cached::default(),
        };
        (fit, gone)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::Row;
    use crate::fit::basis::{Columns, MAX_INFLUENCES};
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};
    use crate::time::Duration;

    fn row(time: i64) -> Row {
        // Fractional parts of multiples of an irrational number: noise without a generator.
        let noise = (time as f64 * 0.618_033_988_749_895).fract() - 0.5;
        Row {
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

    fn fit(window: WindowLength) -> Fit {
        Fit::new(FitSetup {
            window,
            segments: 64,
            max_degree: 2,
            forced_degree: None,
            criterion: Criterion::Bic,
            max_span_degree: None,
            influences: 0,
            noise: PairNoise::default(),
        })
    }

    /// Feeds a sensor that creeps from a row on; the rows at which the degree changed, and to what.
    fn feed(fit: &mut Fit, rows: std::ops::Range<i64>, creeps_from: i64) -> Vec<(i64, u8)> {
        let mut changes = Vec::new();
        for time in rows {
            let creep = 0.05 * (time - creeps_from).max(0) as f64;
            let steady = row(time);
            let error = steady.error - 0.1 * time as f64 + creep;
            if fit.insert(Row { error, ..steady }).closed {
                let change = fit.decide(true);
                changes.extend(change.map(|change| (time, change.to)));
            }
        }
        changes
    }

    /// How many of the rows before `until` that were fed are to be fed again.
    fn first_gone(gone: Gone, until: i64) -> i64 {
        match gone {
            Gone::Since(time) => time.0,
            Gone::Last(count) => until - i64::try_from(count).expect("small"),
        }
    }

    const WINDOWS: [WindowLength; 3] = [
        WindowLength::Pairs(256),
        WindowLength::Pairs(64),
        WindowLength::Time(Duration(256)),
    ];

    /// A creep that was taken out again has no say in when the next one is announced, and what
    /// comes in its place is judged as it comes.
    #[test]
    fn the_announced_model_waits_as_if_it_had_not_seen_the_rest() {
        for window in WINDOWS {
            // Short of its announcement, which takes a quarter of the window at least.
            let until = if window == WINDOWS[1] { 412 } else { 450 };
            let mut disturbed = fit(window);
            assert!(feed(&mut disturbed, 0..until, 400).is_empty());
            let (mut disturbed, gone) = disturbed.before(Timestamp(400));
            let from = first_gone(gone, until);
            let mut undisturbed = fit(window);
            assert!(feed(&mut undisturbed, 0..from, 420).is_empty());
            let [found, expected] =
                [&mut disturbed, &mut undisturbed].map(|fit| feed(fit, from..900, 420)[0]);
            assert_eq!((found.1, expected.1), (1, 1));
            // Rows that left the window meanwhile do not come back, so that it is a little shorter;
            // a closing more or less may then decide.
            assert!((found.0 - expected.0).abs() <= 8, "{found:?} {expected:?}");
        }
    }

    #[test]
    fn with_all_rows_taken_out_it_judges_like_a_new_one() {
        for window in WINDOWS {
            let mut emptied = fit(window);
            feed(&mut emptied, 0..400, 400);
            let (mut emptied, _) = emptied.before(Timestamp(0));
            assert_eq!(emptied.window().rows(), 0);
            let expected = feed(&mut fit(window), 400..900, 420);
            assert_eq!(feed(&mut emptied, 400..900, 420), expected, "{window:?}");
            assert_eq!(expected[0].1, 1);
        }
    }

    /// A level that only rows taken out had is no longer one that was learned.
    #[test]
    fn ranges_forget_what_was_taken_out() {
        for cut in CUTS {
            let mut window = Window::new(Columns::new(1, 1, 1), cut);
            for time in 0..60 {
                window.insert(&Row {
                    x: time as f64,
                    influences: [-time as f64, 0.0],
                    ..row(time)
                });
            }
            let (before, _) = window.before(Timestamp(30));
            assert_eq!(window.seen().x, Some((0.0, 59.0)));
            assert_eq!(before.seen().x, Some((0.0, 29.0)));
            assert_eq!(before.seen().influences, [Some((-29.0, 0.0)), None]);
            // … and so is one that has left with its segment.
            for time in 60..400 {
                window.insert(&Row {
                    x: 7.0,
                    ..row(time)
                });
            }
            assert_eq!(window.seen().x, Some((7.0, 7.0)));
            assert_eq!(window.seen().influences[0], Some((0.0, 0.0)));
        }
    }
}
