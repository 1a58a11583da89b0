//! A step of the sensor closes the stretch: what is told, what is taken back in, which alarms there
//! are, and what must not happen.

use crate::support::{
    Noise, at, channel, constant, engine, feed, indication, node, reading, reference,
    reference_value,
};
use holdtrue_engine::event::{AlarmKind, AlarmState, Output, Source, Step};
use holdtrue_engine::setup::{
    ChannelInfluence, ChannelSetup, Clock, InfluenceId, InfluenceSetup, PairNoise, ReferenceKind,
    WindowLength,
};

/// Seconds between readings.
const EVERY: f64 = 60.0;

/// Feeds one error per minute and returns all that is said, with the index of the reading.
fn run(channel: ChannelSetup, errors: impl IntoIterator<Item = f64>) -> Vec<(usize, Output)> {
    let setup = node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![channel],
    );
    let mut engine = engine(setup);
    let mut said = Vec::new();
    for (index, error) in errors.into_iter().enumerate() {
        let mut outputs = Vec::new();
        engine.step(&indication(0, EVERY * index as f64, error), &mut outputs);
        said.extend(outputs.into_iter().map(|output| (index, output)));
    }
    said
}

/// White noise of standard deviation 1 that steps by `size` at reading 600.
fn stepping(size: f64, readings: usize) -> Vec<f64> {
    let mut noise = Noise::new(12, 0.0);
    (0..readings)
        .map(|index| noise.draw() + if index >= 600 { size } else { 0.0 })
        .collect()
}

fn small() -> ChannelSetup {
    let mut small = channel("a", 0);
    small.fit.window = WindowLength::Pairs(256);
    small
}

fn steps(said: &[(usize, Output)]) -> Vec<(usize, &Step)> {
    said.iter()
        .filter_map(|(index, output)| match output {
            Output::Step(step) => Some((*index, &**step)),
            _ => None,
        })
        .collect()
}

/// Changes of alarms: index, kind, and whether it was raised.
fn alarms(said: &[(usize, Output)]) -> Vec<(usize, AlarmKind, bool)> {
    said.iter()
        .filter_map(|(index, output)| match output {
            Output::Alarm(change) => {
                Some((*index, change.kind, change.state != AlarmState::Normal))
            }
            _ => None,
        })
        .collect()
}

/// Larger than the gate: the pairs since then had all been kept out, and the one that would have
/// locked the screen out tells the step instead.
#[test]
fn a_step_beyond_the_gate_is_one_event_with_one_alarm() {
    let said = run(small(), stepping(20.0, 1200));
    let steps = steps(&said);
    let [(found_at, step)] = steps[..] else {
        panic!("one step, not {steps:?}");
    };
    assert_eq!(found_at, 604);
    assert_eq!(step.first_after, at(EVERY * 600.0));
    assert_eq!(step.last_before, Some(at(EVERY * 599.0)));
    assert!((step.size - 20.0).abs() < 4.0 * step.size_u, "{step:?}");
    assert!((step.after - step.before - step.size).abs() < 1e-12);
    assert_eq!((step.pairs, step.taken_back), (5, 4));
    assert_eq!(step.ended_stretch, 1);
    // Raised at once, cleared when a window of the new stretch has passed; nothing else.
    let alarms = alarms(&said);
    assert_eq!(alarms.len(), 2, "{alarms:?}");
    assert_eq!(alarms[0], (604, AlarmKind::Step, true));
    let (cleared, kind, raised) = alarms[1];
    assert_eq!((kind, raised), (AlarmKind::Step, false));
    assert!((850..870).contains(&cleared), "{cleared}");
}

/// The correction follows at once and says which stretch it rests on; no correction rests on pairs
/// of both sides.
#[test]
fn the_correction_rests_on_the_pairs_since_the_step() {
    let said = run(small(), stepping(20.0, 700));
    let (found_at, _) = steps(&said)[0];
    let documents: Vec<_> = said
        .iter()
        .filter_map(|(index, output)| match output {
            Output::Correction(document) => Some((*index, document)),
            _ => None,
        })
        .collect();
    for (index, document) in &documents {
        let expected = if *index < found_at { 1 } else { 2 };
        assert_eq!(document.stretch, expected, "{index}");
        if *index >= found_at {
            assert!(document.window.from >= at(EVERY * 600.0));
            let off = (document.correction + 20.0).abs();
            assert!(off < 4.0 * document.standard_uncertainty, "{index}: {off}");
        }
    }
    assert!(documents.iter().any(|(index, _)| *index == found_at));
}

/// Smaller than the gate: pairs of both sides were in one fit.
#[test]
fn a_step_within_the_gate_is_found_as_well() {
    let said = run(small(), stepping(-3.5, 800));
    let steps = steps(&said);
    let [(found_at, step)] = steps[..] else {
        panic!("one step, not {steps:?}");
    };
    assert!((604..640).contains(&found_at), "{found_at}");
    assert!((step.size + 3.5).abs() < 4.0 * step.size_u, "{step:?}");
    assert!(step.earliest <= at(EVERY * 600.0) && step.latest >= at(EVERY * 600.0));
    assert!(
        alarms(&said)
            .iter()
            .all(|(_, kind, _)| *kind == AlarmKind::Step)
    );
}

/// There and back: each is an event of its own, and the alarm is raised anew.
#[test]
fn every_step_is_told() {
    let mut noise = Noise::new(13, 0.0);
    let errors: Vec<f64> = (0..1200)
        .map(|index| {
            noise.draw()
                + if (600..800).contains(&index) {
                    10.0
                } else {
                    0.0
                }
        })
        .collect();
    let said = run(small(), errors);
    let signs: Vec<bool> = steps(&said)
        .iter()
        .map(|(_, step)| step.size > 0.0)
        .collect();
    assert_eq!(signs, [true, false]);
    let raised = alarms(&said)
        .iter()
        .filter(|(_, kind, raised)| *kind == AlarmKind::Step && *raised)
        .count();
    assert_eq!(raised, 2);
}

#[test]
fn outliers_are_no_step() {
    let mut noise = Noise::new(14, 0.0);
    let errors: Vec<f64> = (0..3000)
        .map(|index| {
            noise.draw()
                + if index % 97 < 3 && index > 300 {
                    30.0
                } else {
                    0.0
                }
        })
        .collect();
    let said = run(small(), errors);
    assert!(steps(&said).is_empty(), "{:?}", steps(&said));
}

#[test]
fn nobody_looks_for_steps_where_they_are_switched_off() {
    let mut off = small();
    off.steps = None;
    let said = run(off, stepping(20.0, 800));
    assert!(steps(&said).is_empty());
    assert!(alarms(&said).contains(&(604, AlarmKind::ScreenLockedOut, true)));
}

/// A sensor that has lost 5 % of its span and has a temperature, at levels about 1000 and 20 °C,
/// with white noise of standard deviation 1. What level and temperature do is no larger than that,
/// so that the noise is soon known although they are claimed only later. It steps by `size` at the
/// 600th pair.
fn with_span_and_temperature(size: f64, pairs: u32) -> Vec<(usize, Output)> {
    let mut channel = small();
    channel.fit.max_span_degree = Some(0);
    channel.fit.influences = 1;
    channel.fit.noise = PairNoise {
        reference: 0.001,
        indication: 1.0,
    };
    channel.influences = vec![ChannelInfluence {
        source: InfluenceId(0),
        name: "temperature".to_owned(),
        unit: Some("Cel".to_owned()),
    }];
    let references = vec![reference("lab", ReferenceKind::Measured)];
    let mut setup = node(Clock::Readings, references, vec![channel]);
    setup.influences = vec![InfluenceSetup {
        name: "hall /t".to_owned(),
    }];
    let mut engine = engine(setup);
    let (mut noise, mut levels) = (Noise::new(15, 0.0), Noise::new(16, 0.0));
    let mut said = Vec::new();
    for pair in 0..pairs {
        let turn = std::f64::consts::TAU * f64::from(pair);
        let level = 1000.0 + 15.0 * levels.draw();
        let warmth = 20.0 + 4.0 * (turn / 61.0).cos();
        let stepped = if pair >= 600 { size } else { 0.0 };
        let error = -0.05 * level + 0.1 * warmth + stepped + noise.draw();
        let seconds = EVERY * f64::from(pair);
        let inputs = [
            reading(Source::Influence(InfluenceId(0)), seconds, warmth),
            reference_value(0, seconds, level),
            indication(0, seconds, level + error),
        ];
        let outputs = feed(&mut engine, &inputs);
        said.extend(outputs.into_iter().map(|output| (pair as usize, output)));
    }
    said
}

/// Level and temperature count from where the window counts them: a step is measured against what
/// they explain, and what they do is none.
#[test]
fn a_step_is_told_from_what_level_and_temperature_do() {
    let said = with_span_and_temperature(3.0, 800);
    let steps = steps(&said);
    let [(found_at, step)] = steps[..] else {
        panic!("one step, not {steps:?}");
    };
    assert!((602..640).contains(&found_at), "{found_at}");
    assert!((step.size - 3.0).abs() < 4.0 * step.size_u, "{step:?}");
    assert!(step.size_u < 1.0, "{step:?}");
    assert!(step.earliest <= at(EVERY * 600.0) && step.latest >= at(EVERY * 600.0));
    let still = with_span_and_temperature(0.0, 1500);
    let none: Vec<_> = still
        .iter()
        .filter(|(_, output)| matches!(output, Output::Step(_)))
        .collect();
    assert!(none.is_empty(), "{none:?}");
}

/// A smooth wander, as of a clock beside another: a season, a tide, and a rate that drifts at
/// random.
fn wander(seed: u64, readings: usize) -> Vec<f64> {
    let mut noise = Noise::new(seed, 0.0);
    let (mut rate, mut wandered) = (0.0, 0.0);
    (0..readings)
        .map(|index| {
            rate += 3e-5 * noise.draw();
            wandered += rate;
            let turns = std::f64::consts::TAU * index as f64;
            wandered + 0.03 * (turns / 365.0).sin() + 0.001 * (turns / 13.7).sin()
        })
        .collect()
}

/// Where the noise is slow, no mean over few pairs stands out from it; the leap between two pairs
/// does. Every one is told, at its place to two readings, and the wander itself is none.
#[test]
fn every_leap_in_a_slow_wander_is_found() {
    for seed in 40..50 {
        let leaps: Vec<usize> = (500..3000).step_by(370).collect();
        let smooth = wander(seed, 3000);
        assert!(steps(&run(small(), smooth.iter().copied())).is_empty());
        let leaping = smooth.iter().enumerate().map(|(index, error)| {
            let before = leaps.iter().filter(|leap| index >= **leap).count();
            error - before as f64
        });
        let said = run(small(), leaping);
        let steps = steps(&said);
        assert_eq!(steps.len(), leaps.len(), "seed {seed}: {steps:?}");
        for ((_, step), leap) in steps.iter().zip(&leaps) {
            let off = step.first_after.since(at(EVERY * *leap as f64)).seconds() / EVERY;
            assert!(off.abs() <= 2.0, "seed {seed}: {off} readings: {step:?}");
            assert!((step.size + 1.0).abs() < 0.05, "seed {seed}: {step:?}");
        }
    }
}
