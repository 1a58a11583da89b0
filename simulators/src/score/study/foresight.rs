//! Does the true crossing of a limit lie between the earliest and the latest instant forecast?

use super::{Case, held};
use crate::score::foresight::{EVEN_DRIFT, study};
use crate::score::limits::Bound;

/// The first seed.
const SEED: u64 = 31_000_000;
/// They tell a coverage to ±0.5 % (two standard errors).
const RUNS: u64 = 6000;

/// The cases: check value V31's setting (30 points, σ = 0.05 known) with k = 2. A normal estimate
/// is within 2u in 95.4 % of runs, and beyond it in one tail of 2.3 %. Service is planned on the
/// earliest, so that a crossing before that is judged by itself. The drift is 19 of its u: it must
/// be resolved in each run.
pub(super) fn cases() -> Vec<Case> {
    let name = "V31, k = 2".to_owned();
    vec![Case::new(name, RUNS, SEED, |seeds| {
        let foresight = study(EVEN_DRIFT, 2.0, seeds.clone());
        let per_cent = |count: u32| 100.0 * f64::from(count) / (seeds.end - seeds.start) as f64;
        vec![
            held(
                "between earliest and latest, %",
                100.0 * foresight.coverage(),
                Bound::Within(93.0, 98.0),
            ),
            held(
                "before the earliest, %",
                per_cent(foresight.before),
                Bound::AtMost(3.5),
            ),
            held(
                "not resolved, %",
                per_cent(foresight.unresolved),
                Bound::AtMost(0.0),
            ),
        ]
    })]
}
