//! Two million rows at Unix-epoch times: the fit keeps the digits of a batch QR, whatever the
//! stream went through.
//!
//! The stream is irregular, with gaps of ten windows and steps of a million noise standard
//! deviations in it. The reference is a batch QR of the window's rows in a basis centred on them,
//! in double-double numbers.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_possible_wrap,
    clippy::cast_sign_loss,
    reason = "counts and times of invented streams are small"
)]

use crate::support::batch;
use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::Timestamp;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, Exp1, StandardNormal};
use std::collections::VecDeque;

/// Highest degree.
const DEGREE: usize = 5;
/// Rows of the window.
const WINDOW: usize = 1024;
/// Noise, in the unit of the error.
const SIGMA: f64 = 0.01;

/// Largest disagreements seen. Predictions in units of max(|prediction|, residual SD), RSS
/// relative.
#[derive(Clone, Copy, Debug, Default)]
struct Worst {
    /// Predictions at times of rows and one step ahead of the newest.
    prediction: f64,
    /// Predictions in the middle of the window's time, which may be the middle of a gap ten windows
    /// wide: there the standard uncertainty is 25 and more residual SDs, and a plain batch QR in
    /// floats and a centred basis is off by as much (2e-11 to 4e-11 at the worst places seen).
    middle: f64,
    rss: f64,
}

impl Worst {
    fn look(&mut self, window: &Window, rows: &[(i64, f64, f64)], ahead: i64) {
        assert_eq!(
            window.rows(),
            rows.len() as u64,
            "the window holds what it says"
        );
        let (batch, scaled) = batch::polynomial(rows, DEGREE);
        let found_rss = window.total().nested_rss();
        let (oldest, newest) = (rows[0].0, rows[rows.len() - 1].0);
        for degree in 0..=DEGREE {
            let rss = batch.rss(degree + 1);
            self.rss = self.rss.max((found_rss[degree] / rss - 1.0).abs());
            let sd = (rss / (rows.len() - degree - 1) as f64).sqrt();
            let error_at = |time: i64| {
                let found = window
                    .predict(degree, Timestamp(time))
                    .expect("independent");
                let expected = batch.predict(degree, scaled(time));
                (found.error - expected).abs() / expected.abs().max(sd)
            };
            for time in [ahead, newest, rows[rows.len() / 3].0, oldest] {
                self.prediction = self.prediction.max(error_at(time));
            }
            self.middle = self.middle.max(error_at(oldest + (newest - oldest) / 2));
        }
    }
}

/// Feeds the stream; looks at about a thousand places, many of them just after gaps and steps.
fn run(segments: u32, total: usize) -> Worst {
    let mut rng = ChaCha8Rng::seed_from_u64(20_260_101);
    let cut = Cut::rows(WINDOW as u32, segments);
    let per_segment = WINDOW / segments as usize;
    let mut window = Window::new(Columns::time(DEGREE as u8), cut);
    let mut rows: VecDeque<(i64, f64, f64)> = VecDeque::new();
    let mut time = 1_700_000_000_000_000_000_i64;
    let (mut level, mut since_event) = (0.0, 0);
    let mut worst = Worst::default();
    let mut looks = 0;
    for place in 0..total {
        let wait: f64 = Exp1.sample(&mut rng);
        time += (wait * 60e9) as i64 + 1;
        since_event += 1;
        if place % 40_000 == 39_999 {
            time += 10 * WINDOW as i64 * 60_000_000_000;
            since_event = 0;
        }
        if place % 40_000 == 20_000 || place % 120_000 == 80_300 {
            level += 1e6 * SIGMA;
            since_event = 0;
        }
        let noise: f64 = StandardNormal.sample(&mut rng);
        let days = (time - 1_700_000_000_000_000_000) as f64 / 86_400e9;
        let error = level + 0.02 * days + SIGMA * noise;
        window.insert(&Row {
            time: Timestamp(time),
            error,
            weight: 1.0,
            x: 0.0,
            influences: [0.0; 2],
        });
        rows.push_back((time, error, 1.0));
        if (place + 1) % per_segment == 0 {
            while rows.len() > WINDOW {
                rows.pop_front();
            }
        }
        let near_event = since_event < 1_100 && since_event % 400 == 7 + since_event / 400;
        if place >= WINDOW && (near_event || place % 2_500 == 1_111) {
            worst.look(&window, rows.make_contiguous(), time + 60_000_000_000);
            looks += 1;
        }
    }
    println!("{segments} segments, {total} rows, {looks} places: {worst:?}");
    assert!(looks >= total / 2_000, "{looks} places");
    worst
}

#[test]
fn whole_segments_slide_like_a_batch() {
    check(&run(64, 2_000_000));
}

#[test]
fn single_rows_slide_like_a_batch() {
    check(&run(1024, 2_000_000));
}

fn check(worst: &Worst) {
    assert!(worst.prediction <= 1e-12, "{worst:?}");
    assert!(worst.rss <= 1e-11, "{worst:?}");
    assert!(worst.middle <= 1e-9, "{worst:?}");
}

/// A sensor that hardly has any noise, with a gap of 20,000 s in its window: the case in which a
/// downdated Cholesky factor lost its RSS.
#[test]
fn a_quiet_sensor_with_a_gap_keeps_its_rss() {
    let mut rng = ChaCha8Rng::seed_from_u64(20_260_102);
    for (segments, seconds) in [(64, 1_i64), (64, 10), (1024, 1), (1024, 10), (1024, 60)] {
        let mut window = Window::new(
            Columns::time(DEGREE as u8),
            Cut::rows(WINDOW as u32, segments),
        );
        let per_segment = WINDOW / segments as usize;
        let mut rows: Vec<(i64, f64, f64)> = Vec::new();
        let mut time = 1_700_000_000_000_000_000_i64;
        let mut worst = 0.0_f64;
        for place in 0..3 * WINDOW {
            let wait: f64 = Exp1.sample(&mut rng);
            time += (wait * seconds as f64 * 1e9) as i64 + 1;
            if place == WINDOW + 500 {
                time += 20_000_000_000_000;
            }
            let noise: f64 = StandardNormal.sample(&mut rng);
            let error = 5.0 + 1e-7 * noise;
            window.insert(&Row {
                time: Timestamp(time),
                error,
                weight: 1.0,
                x: 0.0,
                influences: [0.0; 2],
            });
            rows.push((time, error, 1.0));
            if (place + 1) % per_segment == 0 && rows.len() > WINDOW {
                rows.drain(..rows.len() - WINDOW);
            }
            if place > WINDOW && (place % 41 == 0 || (WINDOW + 495..WINDOW + 510).contains(&place))
            {
                let (batch, _) = batch::polynomial(&rows, DEGREE);
                let found = window.total().nested_rss();
                for degree in 0..=DEGREE {
                    worst = worst.max((found[degree] / batch.rss(degree + 1) - 1.0).abs());
                }
            }
        }
        println!("{segments} segments, a row each {seconds} s: RSS within {worst:e}");
        assert!(worst <= 1e-9, "{segments} segments, {seconds} s: {worst:e}");
    }
}
