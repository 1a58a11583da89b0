//! Is U honest? In noise of every kind, sampled in every way, with the degree fixed and with the
//! degree free, from the onset of a drift on.
//!
//! Shares have sampling errors of their own, of half a per cent or less (binomial); the bounds are
//! the promised ones all the same, with nothing added.

use super::{Case, Figure, held, reported};
use crate::score::coverage::{Course, Drift, Noise, Pattern, Share, fixed, free};
use crate::score::limits::Bound;

/// First seed; every case has seeds of its own.
const SEED: u64 = 710_000_000;
/// Seeds between cases.
const SEEDS: u64 = 100_000;
/// Stretches per case with many rows; each is looked at three times.
const DENSE_RUNS: u64 = 900;
/// Stretches per case with few pairs.
const SPARSE_RUNS: u64 = 2500;
/// Stretches per drift, looked at 56 times each.
const FREE_RUNS: u64 = 400;

/// Kinds of noise with their names.
const KINDS: [(&str, Noise); 6] = [
    ("white", Noise::White),
    ("AR(1) 0.5", Noise::Autoregression(0.5)),
    ("AR(1) 0.8", Noise::Autoregression(0.8)),
    ("AR(1) 0.9", Noise::Autoregression(0.9)),
    ("AR(1) 0.97", Noise::Autoregression(0.97)),
    ("white + AR(1) 0.95", Noise::WhiteAndSlow),
];

/// Patterns of many rows.
const DENSE: [(&str, Pattern); 3] = [
    ("even", Pattern::Even),
    ("lognormal", Pattern::Lognormal),
    ("gappy", Pattern::Gappy),
];

/// Patterns of few pairs.
const SPARSE: [(&str, Pattern); 3] = [
    ("40 pairs", Pattern::Pairs(40)),
    ("16 pairs", Pattern::Pairs(16)),
    ("8 pairs", Pattern::Pairs(8)),
];

/// Drifts with their names; whether it is slow: less than 0.3σ in its first half window.
const DRIFTS: [(&str, Drift, bool); 8] = [
    ("none", Drift::Line(0.0), true),
    ("0.25σ a window", Drift::Line(0.25), true),
    ("0.5σ a window", Drift::Line(0.5), true),
    ("1σ a window", Drift::Line(1.0), false),
    ("0.5σ a window²", Drift::Parabola(0.5), true),
    ("1σ a window²", Drift::Parabola(1.0), true),
    ("2σ a window²", Drift::Parabola(2.0), false),
    ("4σ a window²", Drift::Parabola(4.0), false),
];

/// What the degrees' shares are called.
const DEGREES: [&str; 3] = [
    "covered at degree 0, %",
    "covered at degree 1, %",
    "covered at degree 2, %",
];

/// The cases: fixed degrees with many rows and with few, then free degrees.
pub(super) fn cases() -> Vec<Case> {
    let mut cases = fixed_cases(&DENSE, DENSE_RUNS, SEED, |_| {
        Some(Bound::Within(93.0, 99.0))
    });
    cases.extend(fixed_cases(&SPARSE, SPARSE_RUNS, SEED + 50 * SEEDS, few));
    for (kind, (name, noise)) in (1..).zip(KINDS) {
        for (place, (drift_name, drift, is_slow)) in (0..).zip(DRIFTS) {
            let seed = SEED + 100 * SEEDS * kind + SEEDS * place;
            let name = format!("free, {name}, {drift_name}");
            let is_white = noise == Noise::White;
            cases.push(Case::new(name, FREE_RUNS, seed, move |seeds| {
                let runs = seeds.end - seeds.start;
                let course = free(noise, Pattern::Even, drift, runs, seeds.start);
                // In correlated noise every drift is slower in units of what can be told: only the
                // means over time are judged.
                free_figures(&course, is_white.then_some(is_slow))
            }));
        }
    }
    cases
}

/// The bound with few pairs, whose noise is correlated from pair to pair. Forty pairs with a
/// correlation of 0.9 are worth two independent ones, eight fewer than one: what such a window
/// can't show, it can't cover.
fn few(noise: Noise) -> Option<Bound> {
    match noise {
        Noise::White => Some(Bound::Within(93.0, 99.0)),
        Noise::Autoregression(correlation) if correlation < 0.7 => Some(Bound::Within(93.0, 99.0)),
        Noise::Autoregression(correlation) if correlation < 0.85 => Some(Bound::Within(85.0, 99.0)),
        _ => None,
    }
}

fn fixed_cases(
    patterns: &[(&str, Pattern)],
    runs: u64,
    seed: u64,
    bound: fn(Noise) -> Option<Bound>,
) -> Vec<Case> {
    let kinds = KINDS.into_iter();
    let each = kinds.flat_map(|kind| patterns.iter().map(move |pattern| (kind, *pattern)));
    (0..)
        .zip(each)
        .map(|(place, ((kind, noise), (name, pattern)))| {
            let name = format!("fixed, {kind}, {name}");
            Case::new(name, runs, seed + SEEDS * place, move |seeds| {
                let shares = fixed(noise, pattern, seeds.end - seeds.start, seeds.start);
                DEGREES
                    .into_iter()
                    .zip(shares)
                    .map(|(name, share)| Figure {
                        name,
                        value: per_cent(share),
                        bound: bound(noise),
                    })
                    .collect()
            })
        })
        .collect()
}

/// The figures of a drift; `slow`: whether it is, where the worst instant is judged.
fn free_figures(course: &Course, slow: Option<bool>) -> Vec<Figure> {
    let (mean, single) = course.rms();
    let worst = course.worst().copied().unwrap_or_default();
    // What a fast onset leaves is reported; a trial with single curves held 42 %.
    let least = slow.map(|is_slow| Bound::AtLeast(if is_slow { 80.0 } else { 60.0 }));
    vec![
        held(
            "covered over time, %",
            per_cent(course.over_time()),
            Bound::AtLeast(93.0),
        ),
        Figure {
            name: "covered at the worst instant, %",
            value: per_cent(worst.share),
            bound: least,
        },
        reported("worst instant, windows after the onset", worst.at),
        reported("RMS error, σ", mean),
        held(
            "… above that of the announced degree, σ",
            mean - single,
            Bound::AtMost(0.03),
        ),
        reported("RMS u, σ", course.rms_u()),
    ]
}

fn per_cent(share: Share) -> f64 {
    100.0 * share.fraction()
}
