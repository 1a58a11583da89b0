//! Time per row: six RSS, AICc and BIC of each, and a solve at every row, unweighted, degrees 0 to
//! 5.

use criterion::{BenchmarkId, Criterion, criterion_group, criterion_main};
use holdtrue_benches::{Cholesky, DEGREES, Outputs, Stream, batch_qr, outputs};
use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::Timestamp;
use std::hint::black_box;
use std::time::Duration;

const WINDOWS: [usize; 3] = [256, 1024, 4096];

fn window_outputs(window: &mut Window, (time, error): (i64, f64)) -> Option<Outputs> {
    let row = Row {
        time: Timestamp(time),
        error,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; 2],
    };
    window.insert(&row);
    let total = window.total();
    let rss = total.nested_rss();
    let coefficients = total.solve(DEGREES)?;
    let n = usize::try_from(total.rows()).ok()?;
    Some(outputs(
        n,
        std::array::from_fn(|k| rss[k]),
        std::array::from_fn(|k| coefficients[k]),
    ))
}

/// The fit, in `segments` segments.
fn factors(criterion: &mut Criterion, name: &str, segments: impl Fn(usize) -> u32) {
    let mut group = criterion.benchmark_group(name);
    for rows in WINDOWS {
        let mut stream = Stream::default();
        let mut window = Window::new(Columns::time(5), Cut::rows(rows as u32, segments(rows)));
        for row in stream.by_ref().take(3 * rows) {
            window_outputs(&mut window, row);
        }
        group.bench_function(BenchmarkId::from_parameter(rows), |bencher| {
            bencher.iter(|| {
                let row = stream.next().expect("endless");
                black_box(window_outputs(&mut window, row).expect("a full window"))
            });
        });
    }
}

fn segments_64(criterion: &mut Criterion) {
    factors(criterion, "factors, 64 segments", |_| 64);
}

fn one_row_segments(criterion: &mut Criterion) {
    factors(criterion, "factors, one-row segments", |rows| rows as u32);
}

fn cholesky(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("cholesky, up and down");
    for rows in WINDOWS {
        let mut stream = Stream::default();
        let first = stream.next().expect("endless");
        let mut peer = Cholesky::new(rows, rows as i64 * 60_000_000_000, first);
        for row in stream.by_ref().take(3 * rows) {
            peer.slide(row);
        }
        group.bench_function(BenchmarkId::from_parameter(rows), |bencher| {
            bencher.iter(|| {
                let row = stream.next().expect("endless");
                black_box(peer.slide(row).expect("a full window"))
            });
        });
    }
}

fn qr(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("batch QR");
    for rows in WINDOWS {
        let (times, errors): (Vec<_>, Vec<_>) = Stream::default().take(2 * rows).unzip();
        let mut start = 0;
        group.bench_function(BenchmarkId::from_parameter(rows), |bencher| {
            bencher.iter(|| {
                start = (start + 1) % rows;
                black_box(batch_qr(
                    &times[start..start + rows],
                    &errors[start..start + rows],
                ))
            });
        });
    }
}

criterion_group! {
    name = fit;
    config = Criterion::default()
        .sample_size(60)
        .warm_up_time(Duration::from_millis(500))
        .measurement_time(Duration::from_secs(2));
    targets = cholesky, segments_64, one_row_segments, qr
}
criterion_main!(fit);
