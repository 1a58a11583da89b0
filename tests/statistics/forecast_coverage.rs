//! The true crossing of a limit lies between the earliest and the latest instant forecast, about as
//! often as the level of coverage says.

use crate::noise::{Noise, Sampling, Stream, default_setup, for_all_runs};
use crate::studies::assert_holds;
use holdtrue_engine::fit::Fit;
use holdtrue_engine::quantile;
use holdtrue_simulators::score::foresight::Foresight;
use holdtrue_simulators::score::study::Study;

/// Windows that a stretch is watched for.
const WATCHED: u32 = 2;
/// The limit is crossed so many windows from the start.
const CROSSING: f64 = 2.5;
/// Seconds of a window.
const WINDOW_SECONDS: f64 = 1024.0;

/// Check value V31's setting with k = 2.
#[test]
fn the_true_crossing_lies_between_earliest_and_latest() {
    assert_holds(Study::Foresight, 1, |_| true, None);
}

/// The same through the daemon's own fit, σ not known: correlated noise, k from Student's t. The
/// correlation is taken cautiously, so that the interval may hold the crossing more often.
#[test]
fn a_fitted_line_forecasts_honestly_in_correlated_noise() {
    for (noise, slope, seed) in [
        (Noise::White, 2.0, 32_000_000),
        (Noise::Autoregression(0.8), 6.0, 33_000_000),
        (Noise::WhiteAndSlow, 12.0, 34_000_000),
    ] {
        let mut total = Foresight::default();
        for run in for_all_runs(1000, |run| forecast_once(noise, slope, seed + run)) {
            total.before += run.before;
            total.inside += run.inside;
            total.after += run.after;
            total.unresolved += run.unresolved;
        }
        println!("{noise:?}, {slope}σ a window: {total:?}");
        let named = total.before + total.inside + total.after;
        assert!(named > 900, "{noise:?}: {total:?}");
        assert!(
            f64::from(total.inside) >= 0.93 * f64::from(named),
            "{noise:?}: {total:?}"
        );
    }
}

fn forecast_once(noise: Noise, slope: f64, seed: u64) -> Foresight {
    let rows = Stream::new(noise, seed).rows(Sampling::Regular, WATCHED, |at| slope * at);
    let mut fit = Fit::new(default_setup());
    let mut newest = None;
    for row in rows {
        fit.insert(row);
        newest = Some(row.time);
    }
    let mut foresight = Foresight::default();
    let line = fit.recent_line(0.0, 0.0).expect("two windows of segments");
    assert_eq!(Some(line.origin), newest);
    let k = quantile::student(0.95, line.degrees_of_freedom);
    if !line.line.is_resolved(k) {
        foresight.unresolved += 1;
        return foresight;
    }
    let ahead = CROSSING - crate::noise::windows_since_start(line.origin);
    let truth = ahead * WINDOW_SECONDS / 86_400.0;
    let reached = |edge: f64| line.line.reaches(slope * CROSSING, edge, 0.0);
    match (reached(k), reached(-k)) {
        (Some(earliest), _) if truth < earliest => foresight.before += 1,
        (Some(_), Some(latest)) if truth > latest => foresight.after += 1,
        (Some(_), Some(_)) => foresight.inside += 1,
        _ => foresight.unresolved += 1,
    }
    foresight
}
