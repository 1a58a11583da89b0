//! How seldom noise and drift are called a step, and how soon and where a real one is found.
//!
//! The constants of the chart were tried on seeds from 1000 on; these lie far from them.

use super::{Case, Figure, held, reported};
use crate::score::limits::Bound;
use crate::score::rare;
use crate::score::steps::{Drift, FalseSteps, Kind, Run, false_steps, found};
use std::ops::Range;

/// The first seed of every case: its runs differ from those of the others in what they ride on.
const SEED: u64 = 7_000_000;
/// Readings of a case without a step.
const ENOUGH: u64 = 3_000_000;
/// Runs with a real step.
const STEP_RUNS: u64 = 400;

const WHITE: Kind = Kind::Autoregressive(0.0);

/// Kinds of noise with their names and the false steps permitted per 100 000 readings.
const KINDS: [(&str, Kind, f64); 6] = [
    ("white", WHITE, 1.0),
    ("AR(1) 0.5", Kind::Autoregressive(0.5), 3.0),
    ("AR(1) 0.8", Kind::Autoregressive(0.8), 3.0),
    ("AR(1) 0.9", Kind::Autoregressive(0.9), 3.0),
    ("AR(1) 0.97", Kind::Autoregressive(0.97), 3.0),
    ("white + AR(1) 0.95", Kind::Mixture, 3.0),
];

/// Drifts with their names.
const DRIFTS: [(&str, Drift); 5] = [
    ("1σ a window", Drift::Ramp(1.0)),
    ("20σ a window", Drift::Ramp(20.0)),
    ("4σ a window²", Drift::Quadratic(4.0)),
    ("exponential 20σ", Drift::Exponential(20.0)),
    ("growth 20σ", Drift::Growth(20.0)),
];

/// Ten windows, drifting from the second one on.
const PLAIN: Run = Run {
    kind: WHITE,
    drift: Drift::None,
    onset: 1.3,
    step: None,
    window: 256,
    readings: 2560,
    seed: 0,
};

/// The cases.
pub(super) fn cases() -> Vec<Case> {
    let mut cases = Vec::new();
    for (name, kind, rate) in KINDS {
        let run = Run { kind, ..PLAIN };
        cases.push(without_step(format!("noise, {name}"), run, rate));
    }
    for (name, drift) in DRIFTS {
        for onset in [0.0, PLAIN.onset] {
            let run = Run {
                drift,
                onset,
                ..PLAIN
            };
            let name = format!("drift, {name} from window {onset}");
            cases.push(without_step(name, run, 1.0));
        }
    }
    cases.extend(beginnings());
    for size in [3.0, 6.0] {
        for (name, kind, rate) in KINDS {
            let run = Run {
                kind,
                step: Some((1500, size)),
                window: 1024,
                readings: 1600,
                ..PLAIN
            };
            let name = format!("step, {size}σ, {name}");
            cases.push(Case::new(name, STEP_RUNS, SEED, move |seeds| {
                step_figures(run, size, rate, seeds)
            }));
        }
    }
    cases
}

/// A stretch with few pairs expects little with certainty.
fn beginnings() -> Vec<Case> {
    let drifts = [("no drift", Drift::None), DRIFTS[0], DRIFTS[1]];
    let kinds = [KINDS[0], KINDS[2]];
    let each = drifts
        .into_iter()
        .flat_map(|drift| kinds.map(|kind| (drift, kind)));
    each.map(|((drift_name, drift), (kind_name, kind, _))| {
        let run = Run {
            kind,
            drift,
            onset: 0.0,
            window: 1024,
            readings: 256,
            ..PLAIN
        };
        let name = format!("beginning, {kind_name}, {drift_name}");
        without_step(name, run, 1.0)
    })
    .collect()
}

/// A case in which every step is a false one.
fn without_step(name: String, run: Run, rate: f64) -> Case {
    let runs = ENOUGH.div_ceil(u64::from(run.readings));
    Case::new(name, runs, SEED, move |seeds| {
        let found = false_steps(run, seeds.start, seeds.end - seeds.start);
        vec![
            held(
                "false steps per 100 000",
                found.rate(),
                permitted(rate, found),
            ),
            reported("readings", found.readings as f64),
        ]
    })
}

/// What is permitted where so many false steps per 100 000 are promised.
fn permitted(rate: f64, found: FalseSteps) -> Bound {
    Bound::AtMost(rare::permitted(rate, found.readings as f64))
}

/// Figures of real steps. Three sigma in white noise and six in AR(1) 0.8 are held to what is
/// promised of them; the power in other noise is reported.
fn step_figures(run: Run, size: f64, rate: f64, seeds: Range<u64>) -> Vec<Figure> {
    let found = found(run, seeds.start, seeds.end - seeds.start);
    let bounds = match run.kind {
        WHITE if size <= 3.0 => [Some(12.0), Some(30.0), Some(5.0)],
        Kind::Autoregressive(memory) if size > 3.0 && (0.7..0.85).contains(&memory) => {
            [None, Some(40.0), None]
        }
        _ => [None; 3],
    };
    let values = [
        ("readings to the word, median", found.delay(0.5)),
        ("readings to the word, 95 %", found.delay(0.95)),
        ("readings off in time, median", found.off(0.5)),
    ];
    let mut figures: Vec<Figure> = values
        .into_iter()
        .zip(bounds)
        .map(|((name, value), most)| Figure {
            name,
            value,
            bound: most.map(Bound::AtMost),
        })
        .collect();
    let squares = Figure {
        name: "mean square of the size's error in its u",
        value: found.size_square(),
        bound: bounds[2].map(|_| Bound::Within(0.3, 2.0)),
    };
    let held_early = bounds[1].map(|_| permitted(rate, found.early));
    figures.extend([
        squares,
        reported("found, %", 100.0 * found.found()),
        reported("told interval holds the time, %", 100.0 * found.held),
        Figure {
            name: "false steps before it, per 100 000",
            value: found.early.rate(),
            bound: held_early,
        },
    ]);
    figures
}
