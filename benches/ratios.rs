//! The ratios that the fit is held to, measured on whatever machine it is: short rounds of all ways
//! in turn, the fastest round of each counts, so that a busy machine disturbs little. Exit code 1
//! if a target is missed. An argument picks the lines whose name contains it.

use holdtrue_benches::{Case, Cholesky, DEGREES, Outputs, Peers, Stream, batch_qr, outputs};
use holdtrue_engine::fit::Row;
use holdtrue_engine::fit::basis::Columns;
use holdtrue_engine::fit::window::{Cut, Window};
use holdtrue_engine::time::Timestamp;
use std::hint::black_box;
use std::process::ExitCode;
use std::time::Instant;

/// Window, and how many times faster than the batch QR at least.
const WINDOWS: [(usize, f64); 3] = [(256, 10.0), (1024, 40.0), (4096, 150.0)];
/// At most so many times the Cholesky's time.
const SEGMENTED: f64 = 1.4;
const ONE_ROW: f64 = 3.0;
/// All that is done with a pair costs at most so many times what the fit does, as configured by
/// default.
const CHANNEL: f64 = 3.0;
const CASES: [Case; 4] = [
    Case {
        name: "default, a pair a minute",
        spacing: 60,
        beyond_default: false,
    },
    Case {
        name: "default, a pair an hour",
        spacing: 3600,
        beyond_default: false,
    },
    Case {
        name: "span 1 and one influence, a pair a minute",
        spacing: 60,
        beyond_default: true,
    },
    Case {
        name: "span 1 and one influence, a pair an hour",
        spacing: 3600,
        beyond_default: true,
    },
];
/// Pairs of all rounds of one case.
const PAIRS: usize = 1 << 18;
/// Rows of all rounds of one window.
const ROWS: usize = 1 << 21;

fn main() -> ExitCode {
    let wanted = std::env::args().nth(1).unwrap_or_default();
    println!("ns per row   Cholesky   64 segments   one-row segments   batch QR");
    let mut met = true;
    for (rows, faster) in WINDOWS {
        if !rows.to_string().contains(&wanted) {
            continue;
        }
        let [cholesky, segmented, one_row, qr] = measure(rows);
        let ratios = [
            segmented / cholesky,
            one_row / cholesky,
            qr / segmented,
            qr / one_row,
        ];
        println!(
            "{rows:>10} {cholesky:>10.0} {segmented:>13.0} {one_row:>18.0} {qr:>10.0}   \
             {:.2} and {:.2} Cholesky, {:.0} and {:.0} times faster than QR",
            ratios[0], ratios[1], ratios[2], ratios[3],
        );
        met &= ratios[0] <= SEGMENTED && ratios[1] <= ONE_ROW && ratios[2] >= faster;
    }
    println!("us per pair   the fit alone   through the engine");
    for case in CASES.into_iter().filter(|case| case.name.contains(&wanted)) {
        let [fit, engine] = measure_channel(case);
        let ratio = engine / fit;
        println!(
            "{:<43} {:.2} and {:.2}, {ratio:.2} times",
            case.name,
            1e-3 * fit,
            1e-3 * engine
        );
        met &= case.beyond_default || ratio <= CHANNEL;
    }
    if met {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}

/// Fastest rounds, ns per pair. A round is a window long, so that all segments close in it once.
fn measure_channel(case: Case) -> [f64; 2] {
    let mut peers = Peers::new(case);
    let mut best = [f64::INFINITY; 2];
    for round in 0..(PAIRS / case.pairs()).max(6) {
        let (inputs, rows) = peers.pairs(case.pairs());
        // The first rounds fill the window.
        let counts = round >= 2;
        time(counts.then_some(&mut best[0]), rows.len(), || {
            peers.through_fit(&rows);
        });
        time(counts.then_some(&mut best[1]), rows.len(), || {
            peers.through_engine(&inputs);
        });
    }
    best
}

/// Fastest rounds, ns per row.
fn measure(rows: usize) -> [f64; 4] {
    let mut stream = Stream::default();
    let first = stream.next().expect("endless");
    let mut cholesky = Cholesky::new(rows, rows as i64 * 60_000_000_000, first);
    let windowed = |segments| Window::new(Columns::time(5), Cut::rows(rows as u32, segments));
    let (mut segmented, mut one_row) = (windowed(64), windowed(rows as u32));
    let mut best = [f64::INFINITY; 4];
    // The first rounds fill the windows; a round is two windows long, so that it has two flips in
    // it.
    for round in 0..ROWS / (2 * rows) {
        let chunk: Vec<_> = stream.by_ref().take(2 * rows).collect();
        let counts = round >= 3;
        time(counts.then_some(&mut best[0]), chunk.len(), || {
            chunk.iter().for_each(|&row| sink(cholesky.slide(row)));
        });
        time(counts.then_some(&mut best[1]), chunk.len(), || {
            chunk
                .iter()
                .for_each(|&row| sink(slide(&mut segmented, row)));
        });
        time(counts.then_some(&mut best[2]), chunk.len(), || {
            chunk.iter().for_each(|&row| sink(slide(&mut one_row, row)));
        });
        if round % 4 == 0 {
            let (times, errors): (Vec<_>, Vec<_>) = chunk[..rows].iter().copied().unzip();
            time(Some(&mut best[3]), 1, || {
                sink(Some(batch_qr(&times, &errors)))
            });
        }
    }
    best
}

/// Keeps the compiler from leaving the work out.
fn sink(found: Option<Outputs>) {
    black_box(found);
}

fn time(best: Option<&mut f64>, rows: usize, work: impl FnOnce()) {
    let start = Instant::now();
    work();
    if let Some(best) = best {
        *best = best.min(start.elapsed().as_nanos() as f64 / rows as f64);
    }
}

fn slide(window: &mut Window, (time, error): (i64, f64)) -> Option<Outputs> {
    let time = Timestamp(time);
    window.insert(&Row {
        time,
        error,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; 2],
    });
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
