//! Identities of factors and windows, on rows that the property tests invent.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_possible_wrap,
    clippy::cast_sign_loss,
    reason = "counts and times of invented streams are small"
)]

use crate::support::batch;
use crate::support::double::Double;
use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::factor::Factor;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::{Duration, Timestamp};
use proptest::prelude::*;

/// Time degree 5, span degree 2, two influences.
const WIDEST: usize = 11;

fn widest() -> Columns {
    Columns::new(5, 3, 2)
}

/// Invented rows [√w·φ | √w·e] of the widest model.
fn rows(count: impl Into<prop::collection::SizeRange>) -> impl Strategy<Value = Vec<Vec<f64>>> {
    let numbers = (
        -1.0_f64..1.0,
        -3.0_f64..3.0,
        [-1.0_f64..1.0, -1.0..1.0],
        -9.0_f64..9.0,
    );
    prop::collection::vec((numbers, 0.1_f64..10.0), count).prop_map(|rows| {
        (rows.into_iter())
            .map(|((u, x, influences, error), weight)| {
                let mut row = vec![0.0; WIDEST + 1];
                widest().fill(u, x, influences, &mut row);
                row[WIDEST] = error;
                row.iter().map(|entry| entry * weight.sqrt()).collect()
            })
            .collect()
    })
}

fn factor_of(rows: &[Vec<f64>]) -> Factor {
    let mut factor = Factor::new(rows.first().map_or(WIDEST, |row| row.len() - 1));
    for row in rows {
        factor.insert(row);
    }
    factor
}

/// `RᵀR` against the sums of products of the rows, entry by entry, relative to the columns'
/// lengths: what any correct triangle of these rows has, whatever the order of its making.
fn assert_summarises(factor: &Factor, rows: &[Vec<f64>]) {
    let width = factor.columns() + 1;
    let product = |a: usize, b: usize| -> f64 {
        let sum = rows
            .iter()
            .map(|row| Double::from(row[a]) * Double::from(row[b]));
        sum.fold(Double::ZERO, |sum, term| sum + term).float()
    };
    for a in 0..width {
        for b in a..width {
            let found: f64 = (0..=a)
                .map(|i| factor.entry(i, a) * factor.entry(i, b))
                .sum();
            let scale = (product(a, a) * product(b, b)).sqrt();
            let expected = product(a, b);
            assert!(
                (found - expected).abs() <= 1e-13 * scale,
                "({a}, {b}): {found}, {expected}"
            );
        }
        assert!(factor.entry(a, a) >= 0.0, "diagonals are not negative");
    }
}

fn batch_of(rows: &[Vec<f64>], columns: &[usize]) -> batch::Batch {
    let column = |j: usize| rows.iter().map(|row| Double::from(row[j])).collect();
    batch::factor(
        columns
            .iter()
            .chain([&WIDEST])
            .map(|&j| column(j))
            .collect(),
    )
}

fn assert_same_rss(factor: &Factor, batch: &batch::Batch) {
    let found = factor.nested_rss();
    for columns in 1..=factor.columns() {
        let (found, expected) = (found[columns - 1], batch.rss(columns));
        let scale = expected + 1e-4 * batch.rss(1);
        assert!(
            (found - expected).abs() <= 1e-10 * scale,
            "{columns}: {found}, {expected}"
        );
    }
}

proptest! {
    #![proptest_config(crate::support::seeded())]

    #[test]
    fn merging_in_any_grouping_is_one_batch(
        rows in rows(30..80_usize),
        cuts in prop::collection::vec(0.0_f64..1.0, 0..6),
        level in -1e3_f64..1e3,
    ) {
        let place = |cut: &f64| (cut * rows.len() as f64) as usize;
        let mut places: Vec<usize> = cuts.iter().map(place).collect();
        places.extend([0, rows.len()]);
        places.sort_unstable();
        let parts: Vec<_> = places.windows(2).map(|p| factor_of(&rows[p[0]..p[1]])).collect();
        let mut leftward = Factor::new(WIDEST);
        for part in &parts {
            leftward.merge(part);
        }
        let mut rightward = Factor::new(WIDEST);
        for part in parts.iter().rev() {
            let mut next = part.clone();
            next.merge(&rightward);
            rightward = next;
        }
        let batch = batch_of(&rows, &(0..WIDEST).collect::<Vec<_>>());
        for merged in [&leftward, &rightward] {
            prop_assert_eq!(merged.rows(), rows.len() as u64);
            assert_summarises(merged, &rows);
            assert_same_rss(merged, &batch);
        }
        // A level moved while merging is a level moved before.
        let mut moved = leftward.clone();
        moved.move_level(level);
        let mut merged = Factor::new(WIDEST);
        for part in &parts {
            merged.merge_level(part, level);
        }
        let scale = moved.nested_rss()[0] + level * level;
        for j in 0..WIDEST {
            prop_assert!((moved.nested_rss()[j] - merged.nested_rss()[j]).abs() <= 1e-12 * scale);
        }
    }

    #[test]
    fn moving_there_and_back_changes_nothing(
        rows in rows(20..40_usize),
        shift in -2.0_f64..2.0,
        scale in 0.25_f64..4.0,
        level in -1e6_f64..1e6,
    ) {
        let original = factor_of(&rows);
        let mut moved = original.clone();
        moved.move_origin(0, 6, shift, scale);
        moved.move_origin(6, 3, shift, scale);
        moved.move_level(level);
        // The whole blocks span the same space wherever the origin is; so do all time degrees.
        let (before, after) = (original.nested_rss(), moved.nested_rss());
        for columns in [1, 2, 3, 4, 5, 6, 9, 10, 11] {
            let (a, b) = (before[columns - 1], after[columns - 1]);
            prop_assert!((a - b).abs() <= 1e-11 * before[0], "{} columns: {}, {}", columns, a, b);
        }
        moved.move_level(-level);
        moved.move_origin(0, 6, -shift * scale, 1.0 / scale);
        moved.move_origin(6, 3, -shift * scale, 1.0 / scale);
        for j in 0..=WIDEST {
            let length = (0..=j).map(|i| original.entry(i, j).powi(2)).sum::<f64>().sqrt();
            let slack = if j == WIDEST { level.abs() * original.entry(0, 0) } else { 0.0 };
            for i in 0..=j {
                let difference = (moved.entry(i, j) - original.entry(i, j)).abs();
                prop_assert!(difference <= 1e-10 * length + 1e-15 * slack, "({}, {})", i, j);
            }
        }
    }

    #[test]
    fn chosen_columns_are_the_batch_of_those_columns(
        rows in rows(20..50_usize),
        chosen in prop::sample::subsequence((0..WIDEST).collect::<Vec<_>>(), 1..WIDEST),
    ) {
        let narrow = factor_of(&rows).choose(&chosen);
        assert_same_rss(&narrow, &batch_of(&rows, &chosen));
        let picked: Vec<Vec<f64>> = (rows.iter())
            .map(|row| chosen.iter().chain([&WIDEST]).map(|&j| row[j]).collect())
            .collect();
        assert_summarises(&narrow, &picked);
    }

    #[test]
    fn a_weight_of_two_is_the_row_twice(rows in rows(15..40_usize), twice in 0_usize..15) {
        let mut repeated = rows.clone();
        repeated.push(rows[twice].clone());
        let mut weighted = rows.clone();
        weighted[twice].iter_mut().for_each(|entry| *entry *= 2_f64.sqrt());
        assert_summarises(&factor_of(&weighted), &repeated);
        let mut all = factor_of(&rows);
        all.multiply(3_f64.sqrt());
        let thrice: Vec<_> = rows.iter().flat_map(|row| [(); 3].map(|()| row.clone())).collect();
        assert_summarises(&all, &thrice);
    }
}

fn row(time: i64, error: f64) -> Row {
    Row {
        time: Timestamp(time),
        error,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; 2],
    }
}

proptest! {
    #![proptest_config(crate::support::seeded())]

    /// Rows of a time-cut window in any order, within what it keeps, give the fit of the rows in
    /// order.
    #[test]
    fn late_rows_end_where_rows_in_order_end(
        rows in prop::collection::vec((0_i64..8_000, -1.0_f64..1.0), 10..60).prop_shuffle(),
        start in 0_i64..1_700_000_000_000_000_000,
    ) {
        let cut = Cut::time(Duration(8_000), 8);
        let (mut shuffled, mut ordered) =
            (Window::new(Columns::time(2), cut), Window::new(Columns::time(2), cut));
        // Start on the grid, so that nothing leaves.
        let start = start / 1_000 * 1_000;
        for &(time, error) in &rows {
            prop_assert!(!shuffled.insert(&row(start + time, error)).too_old);
        }
        let mut sorted = rows.clone();
        sorted.sort_by_key(|row| row.0);
        for &(time, error) in &sorted {
            ordered.insert(&row(start + time, error));
        }
        prop_assert_eq!(shuffled.rows(), ordered.rows());
        prop_assert_eq!(shuffled.oldest(), ordered.oldest());
        prop_assert_eq!(shuffled.newest(), ordered.newest());
        prop_assert_eq!(
            shuffled.closed().map(|s| (s.slice(), s.rows())).collect::<Vec<_>>(),
            ordered.closed().map(|s| (s.slice(), s.rows())).collect::<Vec<_>>()
        );
        let (a, b) = (shuffled.total().nested_rss(), ordered.total().nested_rss());
        for degree in 0..=2 {
            prop_assert!((a[degree] - b[degree]).abs() <= 1e-11 * b[0], "{}", degree);
        }
    }

    /// A row older than every slice kept is left out and changes nothing.
    #[test]
    fn rows_that_are_too_old_change_nothing(age in 0_i64..1_000_000, error in -1e9_f64..1e9) {
        for cut in [Cut::time(Duration(1_000), 10), Cut::rows(10, 10), Cut::rows(20, 5)] {
            let mut window = Window::new(Columns::time(1), cut);
            for place in 0..60 {
                window.insert(&row(1_000_000 + 100 * place, f64::from(place as i32 % 7)));
            }
            let before = window.clone();
            // The oldest slice kept begins at least this long before the newest row.
            let oldest = window.oldest().expect("rows").0;
            let inserted = window.insert(&row(oldest - 101 - age, error));
            prop_assert!(inserted.too_old && !inserted.closed, "{:?}", cut);
            prop_assert_eq!(&window, &before);
        }
    }

    /// A stored and restored window goes on with the same bits.
    #[test]
    fn a_restored_window_goes_on_with_the_same_bits(
        steps in prop::collection::vec((-300_i64..600, -1.0_f64..1.0), 10..80),
        stored_after in 0_usize..80,
        by_rows in any::<bool>(),
    ) {
        let cut = if by_rows { Cut::rows(12, 4) } else { Cut::time(Duration(2_000), 8) };
        let mut window = Window::new(Columns::time(3), cut);
        let mut restored = window.clone();
        let mut time = 1_700_000_000_000_000_000;
        for (place, (step, error)) in steps.into_iter().enumerate() {
            time += step;
            prop_assert_eq!(window.insert(&row(time, error)), restored.insert(&row(time, error)));
            if place == stored_after {
                let text = serde_json::to_string(&window).expect("plain data");
                restored = serde_json::from_str(&text).expect("what was stored");
            }
            prop_assert_eq!(&window, &restored);
        }
        let bits = |w: &Window| serde_json::to_string(w).expect("plain data");
        prop_assert_eq!(bits(&window), bits(&restored));
    }

    /// Whatever the stream: a longer model never fits worse, and every number is finite.
    #[test]
    fn rss_never_grows_with_the_degree(
        steps in prop::collection::vec(
            (
                prop_oneof![0_i64..3, 0_i64..1_000_000, 0_i64..i64::MAX / 200],
                prop_oneof![-1.0_f64..1.0, -1e100_f64..1e100, Just(0.0), -1e-200_f64..1e-200],
                prop_oneof![Just(1.0), 1e-30_f64..1e30],
            ),
            1..100,
        ),
        by_rows in any::<bool>(),
    ) {
        let cut = if by_rows { Cut::rows(24, 8) } else { Cut::time(Duration(1_000_000), 8) };
        let mut window = Window::new(widest(), cut);
        let mut time = 0;
        for (step, error, weight) in steps {
            time += step;
            let (x, influences) = (error.signum(), [time as f64, -1.0]);
            window.insert(&Row { time: Timestamp(time), error, weight, x, influences });
            let rss = window.total().nested_rss();
            for columns in 1..WIDEST {
                prop_assert!(rss[columns] >= 0.0 && rss[columns] <= rss[columns - 1]);
            }
            prop_assert!(rss[0].is_finite());
            for degree in 0..=5 {
                if let Some(found) = window.predict(degree, Timestamp(time)) {
                    prop_assert!(found.error.is_finite() && found.leverage.is_finite());
                    prop_assert!(found.residual_sd.is_finite() && found.residual_sd >= 0.0);
                }
            }
        }
    }

    /// The widest model slides like a batch, too.
    #[test]
    fn span_and_influences_slide_like_a_batch(
        steps in prop::collection::vec(
            (1_i64..100, -2.0_f64..2.0, [-1.0_f64..1.0, -1.0..1.0], -1.0_f64..1.0),
            90..140,
        ),
    ) {
        let mut window = Window::new(widest(), Cut::rows(60, 12));
        let mut time = 1_700_000_000_000_000_000_i64;
        let mut held = Vec::new();
        for (step, x, influences, noise) in steps {
            time += step * 1_000_000_000;
            let error = 3.0 + 0.1 * x + 0.3 * influences[1] + 0.01 * noise;
            window.insert(&Row { time: Timestamp(time), error, weight: 1.0, x, influences });
            held.push((time, x, influences, error));
        }
        let rows = window.rows() as usize;
        prop_assert!((60..65).contains(&rows));
        held.drain(..held.len() - rows);
        let (first, last) = (held[0].0, held[rows - 1].0);
        let batch_rows: Vec<Vec<f64>> = (held.iter())
            .map(|&(time, x, influences, error)| {
                let u = 2.0 * (time - first) as f64 / (last - first) as f64 - 1.0;
                let mut row = vec![0.0; WIDEST + 1];
                widest().fill(u, x, influences, &mut row);
                row[WIDEST] = error;
                row
            })
            .collect();
        let batch = batch_of(&batch_rows, &(0..WIDEST).collect::<Vec<_>>());
        let found = window.total().nested_rss();
        for columns in [1, 2, 3, 4, 5, 6, 9, 10, 11] {
            let (found, expected) = (found[columns - 1], batch.rss(columns));
            let relative = (found / expected - 1.0).abs();
            prop_assert!(relative <= 1e-9, "{}: {} {}", columns, found, expected);
        }
    }
}
