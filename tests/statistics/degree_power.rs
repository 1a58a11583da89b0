//! A real curve must be announced, and soon: e = a·σ·τ² in white noise, τ in windows from the start
//! of the stretch.

use crate::noise::{Noise, Sampling, Stream, default_setup, for_all_runs, windows_since_start};
use holdtrue_engine::fit::Fit;

const RUNS: u64 = 1000;
const SEED: u64 = 77_000_000;
/// Windows after which a stretch that has not announced degree 2 counts as never.
const WINDOWS: u32 = 5;

/// When, in windows from the start, each degree was first announced; infinite for never.
fn announced(size: f64, sampling: Sampling, seed: u64) -> [f64; 2] {
    let rows = Stream::new(Noise::White, seed).rows(sampling, WINDOWS, |at| size * at * at);
    let mut fit = Fit::new(default_setup());
    let mut first = [f64::INFINITY; 2];
    for row in rows {
        if fit.insert(row).closed
            && let Some(change) = fit.decide(true)
        {
            let Some(place) = usize::from(change.to).checked_sub(1) else {
                continue;
            };
            first[place] = first[place].min(windows_since_start(row.time));
            if change.to == 2 {
                break;
            }
        }
    }
    first
}

/// The time by which 95 % of runs have announced: for degree 1 and degree 2.
fn by_95_percent(size: f64, sampling: Sampling, seed: u64) -> [f64; 2] {
    let runs = for_all_runs(RUNS, |run| announced(size, sampling, seed + run));
    [0, 1].map(|place| {
        let mut times: Vec<f64> = runs.iter().map(|first| first[place]).collect();
        times.sort_by(f64::total_cmp);
        // The 95th of 100: so many runs have announced by then.
        times[times.len() * 95 / 100 - 1]
    })
}

#[test]
fn a_curve_is_announced_soon() {
    println!("95 % of {RUNS} stretches had announced, in windows from their start:");
    let mut failures = Vec::new();
    for (place, (size, permitted)) in (0..).zip([(2.0, 2.0), (3.0, 1.4), (4.0, 1.2)]) {
        let seed = SEED + place * 10_000;
        let [line, parabola] = by_95_percent(size, Sampling::Regular, seed);
        println!("  {size}σ·τ²: degree 1 {line:.3}, degree 2 {parabola:.3} ({permitted})");
        if parabola > permitted {
            failures.push(format!("{size}σ·τ²: {parabola}"));
        }
        assert!(line < parabola, "one step at a time");
    }
    assert!(failures.is_empty(), "announced too late: {failures:?}");
}

/// Gaps and uneven counts cost information, not the announcement; a large curve is found with few
/// pairs too.
#[test]
fn a_curve_is_announced_from_uneven_and_from_few_rows() {
    for (size, sampling, line_by, parabola_by) in [
        (4.0, Sampling::Irregular, 1.0, 2.0),
        (10.0, Sampling::Sparse(40), 1.2, 3.4),
        (100.0, Sampling::Sparse(16), 4.0, f64::INFINITY),
    ] {
        let [line, parabola] = by_95_percent(size, sampling, SEED + 100_000);
        println!("  {size}σ·τ², {sampling:?}: degree 1 {line:.3}, degree 2 {parabola:.3}");
        assert!(line <= line_by && parabola <= parabola_by);
    }
}
