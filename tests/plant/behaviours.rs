//! Every invented behaviour does what its table says: measured on its own readings, against its
//! stated truth.
//!
//! Tolerances are four standard errors of the estimate at hand, with the noise's stated correlation
//! taken into account.

use holdtrue_simulators::plant::{Plant, instant};
use holdtrue_simulators::scenario::{self, Scenario};
use holdtrue_simulators::sensor::Sample;
use holdtrue_simulators::truth::{Expectation, ExpectedAlarm, Truth};

const DAYS: f64 = 60.0;

/// A run of one scenario: its plant and all samples.
fn run(name: &str, seed: u64) -> (Plant, Vec<Sample>) {
    let plant = Plant::new(
        scenario::find(name).expect("the scenario exists"),
        seed,
        DAYS,
    );
    let samples = plant.clone().collect();
    (plant, samples)
}

/// Days and errors of a run's indications.
fn errors(samples: &[Sample]) -> Vec<(f64, f64)> {
    let start = instant(0.0);
    samples
        .iter()
        .filter(|sample| !sample.is_reference)
        .map(|sample| (sample.at.since(start).days(), sample.true_error()))
        .collect()
}

fn mean(values: impl Iterator<Item = f64>) -> f64 {
    let (count, sum) = values.fold((0.0, 0.0), |(count, sum), value| (count + 1.0, sum + value));
    sum / count
}

/// The drawn parameter of a scenario's only sensor.
fn drawn(plant: &Plant, name: &str) -> f64 {
    let found = plant.planted[0]
        .drawn
        .iter()
        .find(|drawn| drawn.name == name);
    found.expect("the parameter is drawn").value
}

/// Standard error of a mean of `count` readings of the scenario's only sensor.
fn standard_error(plant: &Plant, count: f64) -> f64 {
    let instrument = &plant.scenario.kits[0].instrument;
    let inflation = (1.0 + instrument.memory) / (1.0 - instrument.memory);
    instrument.noise * (inflation / count).sqrt()
}

#[test]
fn a_steady_sensor_has_its_noise_and_its_correlation_and_no_drift() {
    for name in ["steady", "slow-noise"] {
        let (plant, samples) = run(name, 5);
        let instrument = &plant.scenario.kits[0].instrument;
        let errors: Vec<f64> = errors(&samples)
            .into_iter()
            .map(|(_, error)| error)
            .collect();
        let count = errors.len() as f64;
        assert!(count > 4000.0);
        let square = mean(errors.iter().map(|e| e * e));
        let lagged = mean(errors.windows(2).map(|pair| pair[0] * pair[1]));
        let effective = count * (1.0 - instrument.memory) / (1.0 + instrument.memory);
        let tolerance = 4.0 / effective.sqrt();
        let deviation = square.sqrt() / instrument.noise;
        assert!(
            (deviation - 1.0).abs() < tolerance,
            "{name}: {deviation} of the stated noise"
        );
        let memory = lagged / square;
        assert!(
            (memory - instrument.memory).abs() < tolerance,
            "{name}: memory {memory}"
        );
        let half = errors.len() / 2;
        let drift = mean(errors[half..].iter().copied()) - mean(errors[..half].iter().copied());
        let limit = 4.0 * (2.0_f64).sqrt() * standard_error(&plant, count / 2.0);
        assert!(drift.abs() < limit, "{name}: drift {drift}");
    }
}

#[test]
fn drifts_follow_their_drawn_curves() {
    for name in [
        "linear",
        "fast-drift",
        "ageing-exponential",
        "ageing-quadratic",
    ] {
        for seed in 1..=5 {
            let (plant, samples) = run(name, seed);
            let errors = errors(&samples);
            let onset = drawn(&plant, "onset");
            let change = drawn(&plant, "change");
            let before = mean(
                errors
                    .iter()
                    .filter(|(day, _)| *day < onset)
                    .map(|(_, e)| *e),
            );
            let limit = 4.0 * standard_error(&plant, onset * 72.0);
            assert!(
                before.abs() < limit,
                "{name} {seed}: error {before} before the onset"
            );
            // What the change must be at the very end, and how it must be reached half way.
            let run = DAYS - onset;
            let (end, half) = match name {
                "ageing-exponential" => {
                    let time_constant = drawn(&plant, "time_constant");
                    let part = |days: f64| change * (1.0 - (-days / time_constant).exp());
                    (part(run), part(run / 2.0))
                }
                "ageing-quadratic" => (change, change / 4.0),
                _ => (change, change / 2.0),
            };
            for (day, expected) in [(onset + run / 2.0, half), (DAYS - 0.5, end)] {
                let near: Vec<f64> = errors
                    .iter()
                    .filter(|(at, _)| (at - day).abs() < 0.5)
                    .map(|(_, error)| *error)
                    .collect();
                // Within the day the curve itself moves; twice its mean rate bounds that.
                let limit =
                    4.0 * standard_error(&plant, near.len() as f64) + 2.0 * change.abs() / run;
                let found = mean(near.iter().copied());
                assert!(
                    (found - expected).abs() < limit,
                    "{name} {seed}: {found} at {day}"
                );
            }
        }
    }
}

#[test]
fn a_step_and_a_saw_tooth_jump_where_and_as_far_as_drawn() {
    for seed in 1..=5 {
        let (plant, samples) = run("step", seed);
        let (at, size) = (drawn(&plant, "at"), drawn(&plant, "size"));
        let (before, after): (Vec<_>, Vec<_>) =
            errors(&samples).into_iter().partition(|(day, _)| *day < at);
        let jump = mean(after.iter().map(|(_, e)| *e)) - mean(before.iter().map(|(_, e)| *e));
        let limit = 8.0 * standard_error(&plant, before.len().min(after.len()) as f64);
        assert!(
            (jump - size).abs() < limit,
            "{seed}: jumped by {jump}, drawn {size}"
        );

        let (plant, samples) = run("saw-tooth", seed);
        let (period, height) = (drawn(&plant, "period"), drawn(&plant, "height"));
        let errors = errors(&samples);
        let cleanings = plant.planted[0].curve.jumps(DAYS);
        assert!(cleanings.len() >= 6, "{seed}: {cleanings:?}");
        for (number, cleaning) in cleanings.iter().enumerate() {
            assert!((cleaning - period * (number as f64 + 1.0)).abs() < 1e-9);
            let day = |from: f64, to: f64| {
                let inside = errors.iter().filter(|(at, _)| *at >= from && *at < to);
                mean(inside.map(|(_, error)| *error))
            };
            let fall = day(*cleaning, cleaning + 0.5) - day(cleaning - 0.5, *cleaning);
            // Half a day's mean lies a quarter of a day from the edge, on either side.
            let expected = -height * (1.0 - 0.5 / period);
            let limit = 4.0 * 2.0_f64.sqrt() * standard_error(&plant, 36.0);
            assert!(
                (fall - expected).abs() < limit,
                "{seed}: fell by {fall}, drawn {height}"
            );
        }
    }
}

#[test]
fn a_stuck_sensor_repeats_itself_while_the_truth_moves_on() {
    let (plant, samples) = run("stuck", 3);
    let at = instant(drawn(&plant, "at"));
    let (moving, stuck): (Vec<&Sample>, Vec<&Sample>) = samples
        .iter()
        .filter(|sample| !sample.is_reference)
        .partition(|sample| sample.at < at);
    assert!(stuck.len() > 1000);
    assert!(
        stuck
            .iter()
            .all(|sample| sample.value.to_bits() == stuck[0].value.to_bits())
    );
    let longest_before = moving
        .chunk_by(|one, next| one.value.to_bits() == next.value.to_bits())
        .map(<[&Sample]>::len)
        .max();
    assert!(
        longest_before < Some(8),
        "{longest_before:?} equal readings before it stuck"
    );
    let wrong = stuck
        .iter()
        .map(|sample| sample.true_error().abs())
        .fold(0.0, f64::max);
    let instrument = &plant.scenario.kits[0].instrument;
    assert!(
        wrong > 10.0 * instrument.noise,
        "the truth moved away by {wrong} only"
    );
    assert!(
        wrong < instrument.max_permissible_error,
        "its error limit must stay quiet: {wrong}"
    );
}

#[test]
fn a_daily_cycle_has_its_amplitude_and_no_trend() {
    let (plant, samples) = run("daily-cycle", 8);
    let amplitude = drawn(&plant, "amplitude");
    let errors = errors(&samples);
    let wave = |part: fn(f64) -> f64| {
        2.0 * mean(
            errors
                .iter()
                .map(|(day, e)| e * part(std::f64::consts::TAU * day)),
        )
    };
    let found = wave(f64::sin).hypot(wave(f64::cos));
    let limit = 4.0 * 2.0_f64.sqrt() * standard_error(&plant, errors.len() as f64);
    assert!(
        (found - amplitude).abs() < limit,
        "{found}, drawn {amplitude}"
    );
    let average = mean(errors.iter().map(|(_, error)| *error));
    assert!(average.abs() < limit, "mean error {average}");
}

#[test]
fn spikes_stand_out_and_the_rest_is_clean() {
    let (plant, samples) = run("spikes", 4);
    let instrument = &plant.scenario.kits[0].instrument;
    let height = drawn(&plant, "height");
    let (spikes, clean): (Vec<_>, Vec<_>) = errors(&samples)
        .into_iter()
        .partition(|(_, error)| error.abs() > height / 2.0);
    let per_reading = spikes.len() as f64 / (spikes.len() + clean.len()) as f64;
    let every = drawn(&plant, "every");
    // One to six readings for each disturbance, 72 readings a day.
    assert!(per_reading > 0.5 / (72.0 * every) && per_reading < 4.0 / (72.0 * every));
    let worst = spikes
        .iter()
        .map(|(_, error)| (error.abs() - height).abs())
        .fold(0.0, f64::max);
    assert!(
        worst < 5.0 * instrument.noise,
        "a spike {worst} off its height"
    );
    let rest = mean(clean.iter().map(|(_, error)| error * error)).sqrt();
    assert!((rest / instrument.noise - 1.0).abs() < 0.1, "{rest}");
}

#[test]
fn silences_are_where_they_are_drawn_and_nowhere_else() {
    let (plant, samples) = run("data-gap", 6);
    let (at, length) = (drawn(&plant, "at"), drawn(&plant, "length"));
    let days: Vec<f64> = errors(&samples).into_iter().map(|(day, _)| day).collect();
    let gaps: Vec<(f64, f64)> = days
        .windows(2)
        .map(|pair| (pair[0], pair[1]))
        .filter(|(from, to)| to - from > 1.5 / 72.0)
        .collect();
    let [(from, to)] = gaps[..] else {
        panic!("one gap, not {gaps:?}")
    };
    assert!((from - at).abs() < 1.1 / 72.0 && (to - at - length).abs() < 1.1 / 72.0);
    let references = samples.iter().filter(|sample| sample.is_reference).count();
    assert_eq!(references, 24 * 60, "the reference does not care");

    let (plant, samples) = run("reference-dying", 6);
    let at = drawn(&plant, "at");
    let start = instant(0.0);
    let references: Vec<f64> = samples
        .iter()
        .filter(|sample| sample.is_reference)
        .map(|sample| sample.at.since(start).days())
        .collect();
    let count = |from: f64, to: f64| {
        references
            .iter()
            .filter(|d| **d >= from && **d < to)
            .count()
    };
    assert_eq!(count(at - 3.0, at - 1.0), 48);
    assert!(
        (3..=21).contains(&count(at - 1.0, at)),
        "thins out in its last day"
    );
    assert_eq!(count(at, DAYS), 0);
    assert_eq!(errors(&samples).len(), 72 * 60, "the sensor does not care");
}

#[test]
fn references_tell_the_truth_as_well_as_they_say() {
    let (plant, samples) = run("linear", 9);
    let instrument = &plant.scenario.kits[0].instrument;
    let errors: Vec<f64> = samples
        .iter()
        .filter(|sample| sample.is_reference)
        .map(Sample::true_error)
        .collect();
    let average = mean(errors.iter().copied());
    let deviation = mean(errors.iter().map(|e| (e - average) * (e - average))).sqrt();
    let count = errors.len() as f64;
    // Rounding to its last digit adds a little.
    assert!(
        (deviation / instrument.reference_each - 1.0).abs() < 4.0 / (2.0 * count).sqrt() + 0.01
    );
    let bias_limit =
        4.0 * instrument.reference_common + 4.0 * instrument.reference_each / count.sqrt();
    assert!(average.abs() < bias_limit, "{average}");
}

#[test]
fn parameters_stay_in_their_ranges_and_differ_by_seed() {
    let plant = |seed| Plant::new(scenario::find("harrow-mere").unwrap(), seed, DAYS);
    let mut signs = [false; 2];
    for seed in 0..50 {
        for (kit, planted) in plant(seed).scenario.kits.iter().zip(plant(seed).planted) {
            for ((name, unit, range), drawn) in kit.behaviour.ranges().iter().zip(&planted.drawn) {
                let counted = match *unit {
                    "sigma" => drawn.value.abs() / kit.instrument.noise,
                    "run" => drawn.value / DAYS,
                    _ => drawn.value,
                };
                assert!(
                    range.low - 1e-9 <= counted && counted <= range.high + 1e-9,
                    "{name}"
                );
                signs[usize::from(drawn.value < 0.0)] = true;
            }
        }
    }
    assert_eq!(signs, [true, true], "drifts go both ways");
    let values = |seed| -> Vec<f64> {
        plant(seed)
            .planted
            .iter()
            .flat_map(|p| &p.drawn)
            .map(|drawn| drawn.value)
            .collect()
    };
    assert!(
        values(1)
            .iter()
            .zip(values(2))
            .all(|(one, other)| (one - other).abs() > 0.0)
    );
}

#[test]
fn each_planted_fault_has_its_alarm_and_nothing_else_has_one() {
    let kinds = |scenario: Scenario, seed| -> Vec<(&'static str, usize)> {
        let plant = Plant::new(scenario, seed, DAYS);
        Truth::of(&plant, DAYS)
            .sensors
            .iter()
            .fold(Vec::new(), |mut all, sensor| {
                // A limit beyond the run's end, or cleaned away in time, may be foretold but need
                // not.
                let must = |alarm: &&ExpectedAlarm| alarm.required || alarm.kind != "time-to-limit";
                for alarm in sensor.alarms.iter().filter(must) {
                    match all.iter_mut().find(|(kind, _)| *kind == alarm.kind) {
                        Some((_, count)) => *count += 1,
                        None => all.push((alarm.kind, 1)),
                    }
                }
                all
            })
    };
    for seed in 0..20 {
        for scenario in scenario::all() {
            let name = scenario.name;
            let found = kinds(scenario, seed);
            match name {
                "harrow-mere" => assert_eq!(found.len(), 7, "every kind: {found:?}"),
                "linear" => {
                    assert_eq!(found, [("error-limit", 1), ("time-to-limit", 1)], "{seed}");
                }
                "fast-drift" => assert_eq!(found, [("drift-rate", 1)]),
                "step" => assert_eq!(found, [("step", 1)]),
                "stuck" => assert_eq!(found, [("stuck", 1)]),
                "saw-tooth" => assert!(matches!(found[..], [("step", 6..)])),
                "reference-dying" => assert_eq!(found, [("reference-stale", 1)]),
                "data-gap" => assert_eq!(found, [("data-gap", 1)]),
                _ => assert_eq!(found, [], "{name} {seed}"),
            }
        }
    }
}

#[test]
fn what_is_not_planted_is_not_there() {
    // No sensor that is to be left alone or halved has an error near its limit, except the one made
    // for it.
    for seed in 0..20 {
        let plant = Plant::new(scenario::find("harrow-mere").unwrap(), seed, DAYS);
        let truth = Truth::of(&plant, DAYS);
        for ((kit, planted), sensor) in plant
            .scenario
            .kits
            .iter()
            .zip(&plant.planted)
            .zip(&truth.sensors)
        {
            if kit.instrument.name == "intake/ph-1" || sensor.expectation == Expectation::AlarmOnly
            {
                continue;
            }
            let largest = (0..600_u32)
                .map(|step| planted.curve.error(f64::from(step) * 0.1).abs())
                .fold(0.0, f64::max);
            let limit = 0.8 * kit.instrument.max_permissible_error;
            assert!(largest < limit, "{}: {largest}", kit.instrument.name);
        }
    }
}
