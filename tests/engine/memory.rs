//! What is no longer in memory: fast sensors, slow references and gates that repeat themselves.

use crate::support::{
    at, channel, engine, feed, gate, indication, node, reading, reference, reference_value,
    since_start, span,
};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{
    Input, Output, PairFate, Reading, RefusedReason, Source, Subject, Supplied,
};
use holdtrue_engine::setup::{
    ChannelId, ChannelInfluence, Clock, InfluenceId, InfluenceSetup, ReferenceKind, Setup,
};

/// One channel, lateness 0, against one measured reference whose values stand for so many seconds.
fn setup(stands_for: f64, max_gap: f64) -> Setup {
    let mut lab = reference("lab", ReferenceKind::Measured);
    lab.stands_for = span(stands_for);
    let mut channel = channel("ph", 0);
    channel.lateness = span(0.0);
    channel.max_gap = span(max_gap);
    node(Clock::Readings, vec![lab], vec![channel])
}

fn pairs(outputs: &[Output]) -> Vec<&PairFate> {
    let fates = outputs.iter().filter_map(|output| match output {
        Output::Pair(fate) => Some(fate),
        _ => None,
    });
    fates.collect()
}

/// Answers every request as the shell does, from all that was ever fed.
fn answer(engine: &mut Engine, said: &[Output], fed: &[Input]) -> Vec<Output> {
    let mut outputs = Vec::new();
    for output in said {
        let &Output::Wanted { channel, from, to } = output else {
            continue;
        };
        let inside = |input: &Input| match input {
            Input::Reading(reading) if (from..to).contains(&reading.phenomenon) => {
                Some(reading.clone())
            }
            _ => None,
        };
        let readings: Vec<Reading> = fed.iter().filter_map(inside).collect();
        let supplied = Supplied {
            channel,
            from,
            to,
            readings,
        };
        engine.step(&Input::Supplied(supplied), &mut outputs);
    }
    outputs
}

fn counted(engine: &Engine) -> u64 {
    let counters = engine.standing().counters;
    counters.all().iter().map(|count| count.count).sum()
}

#[test]
fn a_laboratory_result_of_a_fast_sensor_is_paired_from_the_record() {
    let mut engine = engine(setup(0.0, 60.0));
    // Three hours at 1 Hz fill the track and more.
    let mut fed: Vec<Input> = (0..10_800_u32)
        .map(|second| indication(0, f64::from(second), f64::from(second)))
        .collect();
    fed.push(reference_value(0, 1000.5, 0.0));
    let said = feed(&mut engine, &fed);
    assert!(pairs(&said).is_empty());
    let said = answer(&mut engine, &said, &fed);
    let made = pairs(&said);
    assert_eq!(made.len(), 1, "{said:?}");
    assert_eq!(made[0].phenomenon, at(1000.5));
    assert!((made[0].indication - 1000.5).abs() < 1e-9);
    assert_eq!(counted(&engine), 0, "what is known twice is no refusal");
}

/// What acted on the sensor is known from the record only: it is asked for, and its answer is used
/// once and for all.
#[test]
fn a_pair_whose_influence_is_in_the_record_is_made_of_it_once() {
    let mut setup = setup(0.0, 60.0);
    setup.channels[0].fit.influences = 1;
    setup.channels[0].influences = vec![ChannelInfluence {
        source: InfluenceId(0),
        name: "temperature".to_owned(),
        unit: None,
    }];
    setup.influences = vec![InfluenceSetup {
        name: "hall/t".to_owned(),
    }];
    let mut engine = engine(setup);
    let mut fed: Vec<Input> = (0..10_800_u32)
        .flat_map(|second| {
            let seconds = f64::from(second);
            let temperature = Source::Influence(InfluenceId(0));
            [
                reading(temperature, seconds, 20.0),
                indication(0, seconds, seconds),
            ]
        })
        .collect();
    fed.push(reference_value(0, 1000.5, 0.0));
    let mut said = feed(&mut engine, &fed);
    let mut asked = 0;
    let mut fates: Vec<PairFate> = Vec::new();
    // For the indications, then for the temperatures beside them.
    for _ in 0..2 {
        asked += said.iter().filter(|it| is_wanted(it)).count();
        said = answer(&mut engine, &said, &fed);
        fates.extend(pairs(&said).into_iter().cloned());
    }
    assert_eq!(asked, 2);
    assert!(!said.iter().any(is_wanted), "{said:?}");
    assert_eq!(fates.len(), 1, "{fates:?}");
    assert_eq!((fates[0].phenomenon, fates[0].rejected), (at(1000.5), None));
    assert_eq!(engine.standing().channels[0].pairs, 1);
}

fn is_wanted(output: &Output) -> bool {
    matches!(output, Output::Wanted { .. })
}

#[test]
fn a_daily_mean_of_a_sensor_every_ten_seconds_covers_the_whole_day() {
    let mut engine = engine(setup(86_400.0, 60.0));
    let mut fed: Vec<Input> = (0..=8_640_u32)
        .map(|step| indication(0, f64::from(step) * 10.0, f64::from(step)))
        .collect();
    fed.push(reference_value(0, 86_400.0, 0.0));
    let said = feed(&mut engine, &fed);
    let said = answer(&mut engine, &said, &fed);
    let made = pairs(&said);
    assert_eq!(made.len(), 1, "{said:?}");
    assert_eq!(made[0].phenomenon, at(43_200.0));
    assert!((made[0].indication - 4319.5).abs() < 1e-9);
}

#[test]
fn one_answer_releases_no_other_request() {
    let mut engine = engine(setup(0.0, 60.0));
    let mut fed: Vec<Input> = (0..10_800_u32)
        .map(|second| indication(0, f64::from(second), 7.0))
        .collect();
    fed.push(reference_value(0, 1000.5, 7.0));
    fed.push(reference_value(0, 2000.5, 7.0));
    let said = feed(&mut engine, &fed);
    let wanted: Vec<Output> = said
        .into_iter()
        .filter(|output| matches!(output, Output::Wanted { .. }))
        .collect();
    assert_eq!(wanted.len(), 2);
    for (wanted, time) in wanted.iter().zip([1000.5, 2000.5]) {
        let said = answer(&mut engine, std::slice::from_ref(wanted), &fed);
        let made = pairs(&said);
        assert_eq!(made.len(), 1);
        assert_eq!(made[0].phenomenon, at(time));
    }
    assert_eq!(counted(&engine), 0);
}

/// A recording reference every minute against a reading by hand, entered four days late: the values
/// that waited for it were let go, the reading asks for them.
#[test]
fn a_hand_reading_entered_late_finds_its_reference_in_the_record() {
    let mut engine = engine(setup(0.0, 120.0));
    let mut fed: Vec<Input> = (0..10_000_u32)
        .map(|minute| reference_value(0, f64::from(minute) * 60.0, f64::from(minute)))
        .collect();
    fed.push(indication(0, 90.0, 2.0));
    fed.push(indication(0, 240_030.0, 4001.0));
    let said = feed(&mut engine, &fed);
    let said = answer(&mut engine, &said, &fed);
    let made: Vec<(f64, f64)> = pairs(&said)
        .iter()
        .map(|fate| (since_start(fate.phenomenon), fate.reference))
        .collect();
    assert_eq!(made, [(90.0, 1.5), (240_030.0, 4000.5)]);
    assert_eq!(counted(&engine), 0);
}

#[test]
fn whatever_waits_too_long_is_told() {
    let mut engine = engine(setup(60.0, 60.0));
    // No indication ever comes.
    let values: Vec<Input> = (0..5000_u32)
        .map(|minute| reference_value(0, f64::from(minute) * 60.0, 1.0))
        .collect();
    feed(&mut engine, &values);
    let counters = engine.standing().counters;
    let missed = counters.get(Subject::Channel(ChannelId(0)), RefusedReason::NoPartner);
    assert_eq!(missed, 5000 - 4096);
}

/// The gate tells its state with every message. Its history still reaches back to when it was shut,
/// and where it does not, nobody invents one.
#[test]
fn a_gate_that_repeats_itself_keeps_its_history() {
    let shut_at = |changes: fn(u32) -> bool| {
        let gated = ReferenceKind::Constant {
            value: 7.0,
            gated: true,
        };
        let setup = node(
            Clock::Readings,
            vec![reference("buffer", gated)],
            vec![channel("ph", 0)],
        );
        let mut engine = engine(setup);
        let mut inputs: Vec<Input> = (0..20_000_u32)
            .map(|second| gate(0, f64::from(second), changes(second)))
            .collect();
        inputs.push(indication(0, 500.0, 7.0));
        inputs.push(indication(0, 19_000.0, 7.0));
        let said = feed(&mut engine, &inputs);
        let times: Vec<f64> = pairs(&said)
            .iter()
            .map(|fate| since_start(fate.phenomenon))
            .collect();
        let counters = engine.standing().counters;
        let missed = counters.get(Subject::Channel(ChannelId(0)), RefusedReason::NoPartner);
        (times, missed)
    };
    assert_eq!(shut_at(|second| second >= 1000), (vec![19_000.0], 0));
    // Every second another state: more changes than can be kept.
    let flickering = shut_at(|second| second % 2 == 0);
    assert_eq!(flickering, (vec![19_000.0], 1));
}
