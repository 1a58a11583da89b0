//! The runs of one scenario taken together: every figure that a limit can be set on.

use super::contest::Timed;
use super::findings::Findings;
use super::tally::Tally;
use super::trial::Trial;
use serde::Serialize;
use std::collections::BTreeMap;

/// A figure of a scenario.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Figure {
    /// RMS of the systematic error at the newest instant: after correction, as a part of before.
    Remaining,
    /// By how much that RMS has grown, as a part of the larger of 0.05σ and 0.6 of the correction's
    /// own u.
    Worsened,
    /// Part of the instants with a document in force at which its U held the error left.
    Coverage,
    /// Part of all instants at which a document was in force.
    Claimed,
    /// Sensors with a raise beyond the true degree, as a part of those whose drift has a degree.
    FalseRaises,
    /// Sensors whose drift was never recognised, as a part of the same.
    MissedRaises,
    /// Steps where none was planted, or told once more, per 100 000 indications.
    FalseSteps,
    /// Other words about a planted fault after the first, in all runs.
    Repeated,
    /// Planted faults not noticed in time, as a part of those planted.
    Missed,
    /// Readings from a fault to the word about it: median.
    DelayMedian,
    /// The same: 95 % of them are not longer.
    Delay95,
    /// Readings between a jump and the time told for it: median.
    JumpTime,
    /// Part of the jumps whose told size is within 2u.
    JumpSize,
    /// Limit alarms while the true error was well inside its limit, in all runs.
    FalseLimits,
    /// Other alarms without a planted fault, per 100 000 indications.
    FalseAlarms,
    /// Days by which a time-to-limit alarm came before the limit was passed: median.
    Lead,
    /// Passings of the limit that no time-to-limit alarm foretold, as a part of all.
    Unforetold,
    /// Part of the runs in which a document claimed a span.
    SpanClaims,
    /// Part of the corrected values beyond all that was learned that do not say so.
    Unflagged,
    /// The most that a fault moved a correction, in the correction's own u as stated; missing
    /// if in any run nothing was claimed once the fault was there.
    Moved,
}

/// The runs of one scenario.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Summary {
    /// How many.
    pub runs: usize,
    /// Readings that the engine was given.
    pub readings: u64,
    /// Indications among them, which rates count from.
    pub indications: f64,
    /// Mean error of what a consumer sees without and with the correction, in σ.
    pub bias: (Option<f64>, Option<f64>),
    /// Its RMS, noise included.
    pub seen: (Option<f64>, Option<f64>),
    /// RMS of the systematic error at the newest instant, before and after, in σ.
    pub newest: (Option<f64>, Option<f64>),
    /// RMS of u, in σ.
    pub uncertainty: Option<f64>,
    /// Correction documents issued.
    pub documents: u64,
    /// Figures that limits can be set on; those that the runs say nothing about are missing.
    pub figures: BTreeMap<Figure, f64>,
    /// False alarms by kind.
    pub false_alarms: BTreeMap<String, u32>,
    /// Seconds of one core.
    pub seconds: f64,
}

/// Takes runs together.
#[must_use]
pub fn of(runs: &[Timed]) -> Summary {
    let mut tally = Tally::default();
    for run in runs {
        tally.merge(&run.trial.tally);
    }
    let mut false_alarms = BTreeMap::new();
    for (kind, count) in runs.iter().flat_map(|run| &run.trial.findings.false_alarms) {
        *false_alarms.entry(kind.clone()).or_default() += count;
    }
    Summary {
        runs: runs.len(),
        readings: tally.readings,
        indications: tally.newest_before.count,
        bias: (tally.seen_before.mean(), tally.seen_after.mean()),
        seen: (tally.seen_before.rms(), tally.seen_after.rms()),
        newest: (tally.newest_before.rms(), tally.newest_after.rms()),
        uncertainty: tally.uncertainty.rms(),
        documents: runs.iter().map(|run| run.trial.documents).sum(),
        figures: figures(runs, &tally, f64::from(false_alarms.values().sum::<u32>())),
        false_alarms,
        seconds: runs.iter().map(|run| run.seconds).sum(),
    }
}

fn figures(runs: &[Timed], tally: &Tally, false_alarms: f64) -> BTreeMap<Figure, f64> {
    let indications = tally.newest_before.count;
    let false_alarms = rate(false_alarms, indications);
    corrected(tally)
        .into_iter()
        .chain(words(runs, indications))
        .chain(found(runs))
        .chain(claims(runs))
        .chain([(Figure::FalseAlarms, false_alarms)])
        .filter_map(|(figure, value)| Some((figure, value?)))
        .collect()
}

/// What corrections did to the error.
fn corrected(tally: &Tally) -> [(Figure, Option<f64>); 4] {
    let both = tally.newest_before.rms().zip(tally.newest_after.rms());
    let own = tally.uncertainty.rms().unwrap_or(0.0);
    let (covered, claimed) = (tally.covered as f64, tally.claimed as f64);
    [
        (
            Figure::Remaining,
            both.and_then(|(before, after)| part(after, before)),
        ),
        (
            Figure::Worsened,
            both.map(|(before, after)| (after - before) / (0.6 * own).max(0.05)),
        ),
        (Figure::Coverage, part(covered, claimed)),
        (Figure::Claimed, part(claimed, tally.newest_before.count)),
    ]
}

/// What was said for nothing, or not said.
fn words(runs: &[Timed], indications: f64) -> [(Figure, Option<f64>); 6] {
    let graded = count(runs, |found| found.graded);
    let crossings = count(runs, |found| found.crossings);
    let foretold = sorted(runs, |found| &found.leads).len() as f64;
    let false_steps = count(runs, |found| found.false_steps);
    [
        (
            Figure::FalseRaises,
            part(count(runs, |found| found.false_raises), graded),
        ),
        (
            Figure::MissedRaises,
            part(count(runs, |found| found.missed_raises), graded),
        ),
        (Figure::FalseSteps, rate(false_steps, indications)),
        (Figure::Repeated, Some(count(runs, |found| found.repeated))),
        (
            Figure::FalseLimits,
            Some(count(runs, |found| found.false_limits)),
        ),
        (Figure::Unforetold, part(crossings - foretold, crossings)),
    ]
}

/// How soon and how well faults were found.
fn found(runs: &[Timed]) -> [(Figure, Option<f64>); 6] {
    let delays = sorted(runs, |found| &found.delays);
    let times = sorted(runs, |found| &found.jump_times);
    let sizes = sorted(runs, |found| &found.jump_sizes);
    let within = sizes.partition_point(|size| *size <= 2.0) as f64;
    let planted = count(runs, |found| found.planted);
    [
        (
            Figure::Missed,
            part(count(runs, |found| found.missed), planted),
        ),
        (Figure::DelayMedian, quantile(&delays, 0.5)),
        (Figure::Delay95, quantile(&delays, 0.95)),
        (Figure::JumpTime, quantile(&times, 0.5)),
        (Figure::JumpSize, part(within, sizes.len() as f64)),
        (
            Figure::Lead,
            quantile(&sorted(runs, |found| &found.leads), 0.5),
        ),
    ]
}

/// What was claimed that can't be known.
fn claims(runs: &[Timed]) -> [(Figure, Option<f64>); 3] {
    let sum = |of: fn(&Trial) -> u64| runs.iter().map(|run| of(&run.trial)).sum::<u64>() as f64;
    let claims = sum(|trial| u64::from(trial.span_claimed));
    let beyond = sum(|trial| trial.beyond);
    let moved = runs
        .iter()
        .map(|run| run.trial.moved)
        .reduce(|most, moved| Some(most?.max(moved?)));
    [
        (Figure::SpanClaims, part(claims, runs.len() as f64)),
        (
            Figure::Unflagged,
            part(sum(|trial| trial.unflagged), beyond),
        ),
        (Figure::Moved, moved.flatten()),
    ]
}

/// `of` as a part of `all`; `None` of nothing.
fn part(of: f64, all: f64) -> Option<f64> {
    (all > 0.0).then(|| of / all)
}

/// So many of so many indications, per 100 000; `None` of nothing.
fn rate(of: f64, indications: f64) -> Option<f64> {
    part(of, indications).map(|part| part * 1e5)
}

/// A count of all runs together.
fn count(runs: &[Timed], of: fn(&Findings) -> u32) -> f64 {
    f64::from(runs.iter().map(|run| of(&run.trial.findings)).sum::<u32>())
}

/// Values of all runs, smallest first.
fn sorted(runs: &[Timed], of: fn(&Findings) -> &Vec<f64>) -> Vec<f64> {
    let findings = runs.iter().map(|run| &run.trial.findings);
    let mut values: Vec<f64> = findings.flat_map(of).copied().collect();
    values.sort_by(f64::total_cmp);
    values
}

/// The smallest of the sorted values that at least `part` of them do not exceed.
fn quantile(sorted: &[f64], part: f64) -> Option<f64> {
    let rank = libm::ceil(part * sorted.len() as f64).max(1.0);
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a rank from 1 to the number of values"
    )]
    let index = rank as usize - 1;
    sorted.get(index).copied()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quantiles_are_values_that_occurred() {
        let values: Vec<f64> = (1..=20).map(f64::from).collect();
        assert_eq!(quantile(&values, 0.5), Some(10.0));
        assert_eq!(quantile(&values, 0.95), Some(19.0));
        assert_eq!(quantile(&values[..1], 0.95), Some(1.0));
        assert_eq!(quantile(&[], 0.5), None);
    }
}
