//! The window holds the rows it says it holds, and fits them like a batch of just those rows.

use crate::support::batch;
use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::{Duration, Timestamp};
use proptest::prelude::*;

fn row(time: i64, error: f64, weight: f64) -> Row {
    Row {
        time: Timestamp(time),
        error,
        weight,
        x: 0.0,
        influences: [0.0; 2],
    }
}

/// Sliding window of three rows, degree 1 (recomputed by hand; check value V14).
#[test]
fn three_rows_slide_exactly() {
    let mut window = Window::new(Columns::time(1), Cut::rows(3, 3));
    let values = [0.0, 1.0, 3.0, 6.0, 10.0, 15.0];
    let (newest, slopes) = (
        [17.0, 35.0, 59.0, 89.0].map(|x| x / 6.0),
        [1.5, 2.5, 3.5, 4.5],
    );
    for (second, value) in (0_i64..).zip(values) {
        let inserted = window.insert(&row(second * 1_000_000_000, value, 1.0));
        assert!(inserted.closed && !inserted.too_old);
        if second < 2 {
            assert!(
                window.predict(1, Timestamp(0)).is_none(),
                "no degrees of freedom yet"
            );
            continue;
        }
        let at = |s: i64| {
            window
                .predict(1, Timestamp(s * 1_000_000_000))
                .expect("3 rows")
                .error
        };
        let place = usize::try_from(second).expect("small") - 2;
        assert!((at(second) - newest[place]).abs() < 1e-14);
        assert!((at(second + 1) - at(second) - slopes[place]).abs() < 1e-14);
        assert_eq!(window.rows(), 3);
    }
}

/// The rows a window should hold, kept the simple way.
#[derive(Default)]
struct Held {
    rows: Vec<(i64, f64, f64)>,
    /// Row-counted: where segments end.
    dropped: usize,
}

impl Held {
    fn insert(&mut self, cut: Cut, new: (i64, f64, f64)) -> bool {
        match cut {
            Cut::Time { slice, keep } => {
                let number = |time: i64| time.div_euclid(slice.0);
                let open = self.rows.iter().map(|r| number(r.0)).max();
                let kept_from = open.unwrap_or(number(new.0)).max(number(new.0)) - i64::from(keep);
                if number(new.0) < kept_from {
                    return false;
                }
                self.rows.push(new);
                self.rows.retain(|r| number(r.0) >= kept_from);
            }
            Cut::Rows { per_segment, keep } => {
                self.rows.push(new);
                let closed = self.rows.len() / per_segment as usize;
                if closed > keep as usize {
                    self.rows.drain(..per_segment as usize);
                    self.dropped += 1;
                }
            }
        }
        true
    }
}

/// Every degree of the window against the batch of the rows it should hold.
fn assert_fits(window: &Window, held: &[(i64, f64, f64)], degree: usize) {
    assert_eq!(window.rows(), held.len() as u64);
    let times: std::collections::BTreeSet<i64> = held.iter().map(|r| r.0).collect();
    let (batch, scaled) = batch::polynomial(held, degree);
    let rss = window.total().nested_rss();
    let newest = held.iter().map(|r| r.0).max().expect("rows");
    // Rounding is relative to what the errors differ by, not to what a fit leaves of it; and rows a
    // nanosecond apart beside a gap of thousands lose half of the digits before any fit begins.
    let spread = batch.rss(1).sqrt();
    for k in 0..=degree.min(times.len() - 1) {
        let (found, expected) = (rss[k].sqrt(), batch.rss(k + 1).sqrt());
        let slack = 1e-8 * spread + 1e-13;
        assert!((found - expected).abs() <= slack, "{k}: {found} {expected}");
        if k > 0 {
            assert!(rss[k] <= rss[k - 1], "a longer model can't fit worse");
        }
        if held.len() > k + 1 {
            let found = window.predict(k, Timestamp(newest)).map(|p| p.error);
            let expected = batch.predict(k, scaled(newest));
            let found = found.expect("independent");
            assert!(
                (found - expected).abs() <= 1e-8 * (spread + expected.abs()),
                "{k}: {found} {expected}"
            );
        }
    }
}

fn cuts() -> impl Strategy<Value = Cut> {
    prop_oneof![
        Just(Cut::rows(12, 12)),
        Just(Cut::rows(24, 6)),
        Just(Cut::rows(25, 8)),
        Just(Cut::time(Duration(1_000), 8)),
        Just(Cut::time(Duration(1_003), 1)),
    ]
}

proptest! {
    #![proptest_config(crate::support::seeded())]

    /// In order, with gaps, steps, weights, equal times.
    #[test]
    fn a_window_is_the_batch_of_the_rows_it_should_hold(
        cut in cuts(),
        start in -1_000_000_i64..2_000_000_000_000_000_000,
        steps in prop::collection::vec(
            (prop_oneof![9 => 1_i64..100, 1 => 100_i64..3_000], -1.0_f64..1.0, 0.1_f64..10.0),
            1..120,
        ),
        jump in prop_oneof![Just(0.0), Just(1e6)],
    ) {
        let mut window = Window::new(Columns::time(3), cut);
        let mut held = Held::default();
        let mut time = start;
        for (place, (step, noise, weight)) in steps.into_iter().enumerate() {
            time += step;
            let new = (time, noise + if place > 40 { jump } else { 0.0 }, weight);
            let inserted = window.insert(&row(new.0, new.1, new.2));
            prop_assert!(held.insert(cut, new));
            prop_assert!(!inserted.too_old);
            assert_fits(&window, &held.rows, 3);
        }
    }
}
