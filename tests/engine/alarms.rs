//! Alarms come after their delay, once, and clear past their deadband; a change of configuration
//! clears them.

use crate::support::{
    Noise, at, channel, constant, engine, feed, indication, node, reference, reference_value, span,
};
use holdtrue_engine::event::{AlarmKind, AlarmState, Input, Output, Subject};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceKind, Setup, WindowLength};

/// Changes of one kind of alarm: raised or not.
fn changes(outputs: &[Output], kind: AlarmKind) -> Vec<bool> {
    let changes = outputs.iter().filter_map(|output| match output {
        Output::Alarm(change) if change.kind == kind => Some(change.state != AlarmState::Normal),
        _ => None,
    });
    changes.collect()
}

fn minute(index: u32, error: f64) -> Input {
    indication(0, 60.0 * f64::from(index), error)
}

fn setup() -> Setup {
    let mut a = channel("a", 0);
    a.fit.window = WindowLength::Pairs(64);
    a.max_permissible_error = Some(2.0);
    a.screening.enabled = false;
    node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![a],
    )
}

#[test]
fn the_error_alarm_waits_for_its_delay_and_clears_past_its_deadband() {
    let mut noise = Noise::new(31, 0.0);
    let mut engine = engine(setup());
    let mut outputs = Vec::new();
    let mut raised_at = None;
    for index in 0..300_u32 {
        let error = if index < 100 { 0.0 } else { 3.0 } + 0.1 * noise.draw();
        let before = outputs.len();
        engine.step(&minute(index, error), &mut outputs);
        if changes(&outputs[before..], AlarmKind::ErrorLimit) == [true] {
            raised_at = Some(index);
        }
    }
    assert_eq!(changes(&outputs, AlarmKind::ErrorLimit), [true]);
    let raised_at = raised_at.expect("an error of 3 exceeds 2");
    assert!((100 + 2..100 + 64).contains(&raised_at), "{raised_at}");
    let change = outputs.iter().find_map(|output| match output {
        Output::Alarm(change) if change.kind == AlarmKind::ErrorLimit => Some(change),
        _ => None,
    });
    let change = change.expect("the alarm was raised");
    assert!(change.value > change.limit);
    assert_eq!(change.unit, "pH");
    // Three evaluations: at the first the condition began.
    let seconds = change.at.since(change.since).seconds();
    assert!((seconds - 120.0).abs() < 1e-9, "{seconds}");
    assert!(
        change.text.contains("a:") && change.text.contains("service"),
        "{}",
        change.text
    );
    // Back inside: cleared once, and not raised again by the noise.
    let inputs: Vec<Input> = (300..600)
        .map(|index| minute(index, 1.0 + 0.1 * noise.draw()))
        .collect();
    let after = feed(&mut engine, &inputs);
    assert_eq!(changes(&after, AlarmKind::ErrorLimit), [false]);
}

/// An error that wanders about its limit: delay and deadband leave a fraction of the changes that a
/// bare comparison would give.
#[test]
fn an_error_at_its_limit_does_not_chatter() {
    let run = |delay, deadband| {
        let mut noise = Noise::new(32, 0.0);
        let mut setup = setup();
        setup.channels[0].alarms.delay = delay;
        setup.channels[0].alarms.deadband = deadband;
        let mut engine = engine(setup);
        let inputs: Vec<Input> = (0..3000)
            .map(|index| minute(index, 2.0 + 0.5 * noise.draw()))
            .collect();
        changes(&feed(&mut engine, &inputs), AlarmKind::ErrorLimit).len()
    };
    let (bare, calm) = (run(1, 0.0), run(3, 1.0));
    assert!(calm * 5 < bare, "{calm} changes instead of {bare}");
}

#[test]
fn the_drift_alarm_needs_a_significant_slope() {
    let run = |slope_per_day: f64, seed| {
        let mut noise = Noise::new(seed, 0.0);
        let mut setup = setup();
        setup.channels[0].fit.window = WindowLength::Pairs(512);
        setup.channels[0].max_drift_rate = Some(1.0);
        let mut engine = engine(setup);
        let inputs: Vec<Input> = (0..1500)
            .map(|index| {
                let days = f64::from(index) * 60.0 / 86_400.0;
                minute(index, slope_per_day * days + 0.2 * noise.draw())
            })
            .collect();
        changes(&feed(&mut engine, &inputs), AlarmKind::DriftRate)
    };
    assert_eq!(run(6.0, 33), [true]);
    for seed in 40..50 {
        assert!(run(0.0, seed).is_empty(), "seed {seed}");
    }
}

#[test]
fn a_changed_configuration_keeps_what_is_unchanged_and_clears_what_is_not() {
    let two = |unit: &str, order: [&str; 2]| {
        let mut channels: Vec<_> = order.iter().map(|name| channel(name, 0)).collect();
        for channel in &mut channels {
            channel.max_permissible_error = Some(2.0);
            channel.max_correction = Some(9.0);
            channel.screening.enabled = false;
            if channel.name == "b" {
                channel.unit = unit.to_owned();
            }
        }
        node(
            Clock::Readings,
            vec![reference("zero", constant(0.0))],
            channels,
        )
    };
    let mut engine = engine(two("pH", ["a", "b"]));
    let mut inputs = Vec::new();
    for index in 0..50_u32 {
        for id in 0..2 {
            let value = 3.0 + 0.01 * f64::from(index % 7);
            inputs.push(indication(id, 60.0 * f64::from(index), value));
        }
    }
    feed(&mut engine, &inputs);
    let before = engine.standing();
    assert_eq!(before.alarms.len(), 2);

    // The same once more: nothing is said, nothing changes.
    let same = Input::Setup(Box::new(two("pH", ["a", "b"])));
    let state = engine.state().clone();
    assert!(feed(&mut engine, &[same]).is_empty());
    assert_eq!(engine.state(), &state);

    // b changes, and both change places: a keeps everything at its new place, b starts anew.
    let said = feed(
        &mut engine,
        &[Input::Setup(Box::new(two("mV", ["b", "a"])))],
    );
    let old_b = ChannelId(1);
    assert!(matches!(said[0], Output::Withdrawn { channel, .. } if channel == old_b));
    assert!(matches!(said[1], Output::OutlookWithdrawn { channel, .. } if channel == old_b));
    assert!(matches!(
        &said[2],
        Output::Alarm(change) if change.subject == Subject::Channel(old_b)
            && change.state == AlarmState::Normal
    ));
    assert_eq!(said.len(), 3, "{said:?}");
    let after = engine.standing();
    assert_eq!(after.alarms.len(), 1);
    assert_eq!(after.channels[1].pairs, before.channels[0].pairs);
    assert_eq!(after.channels[0].pairs, 0);
    // Documents of b go on counting where its topic left off.
    let more: Vec<Input> = (50..60)
        .map(|index| indication(0, 60.0 * f64::from(index), 3.0))
        .collect();
    let numbers: Vec<u64> = feed(&mut engine, &more)
        .iter()
        .filter_map(|output| match output {
            Output::Correction(document) => Some(document.issue_number),
            _ => None,
        })
        .collect();
    let last = before.channels[1].issue_number.expect("b had a correction");
    assert_eq!(numbers.first(), Some(&(last + 1)));

    // b is removed altogether.
    let mut only_a = two("mV", ["b", "a"]);
    only_a.channels.remove(0);
    let said = feed(&mut engine, &[Input::Setup(Box::new(only_a))]);
    assert!(matches!(said[0], Output::Withdrawn { channel, .. } if channel == ChannelId(0)));
    assert_eq!(engine.standing().channels.len(), 1);
}

/// The members of a group are known by name: the same group at other positions is the same group.
#[test]
fn a_group_keeps_its_state_when_its_members_move() {
    let group = |members: [u32; 3]| ReferenceKind::Group {
        members: members.map(ChannelId).to_vec(),
    };
    let references = |members| {
        vec![
            reference("zero", constant(0.0)),
            reference("rest", group(members)),
        ]
    };
    let one = node(
        Clock::Readings,
        references([1, 2, 3]),
        vec![
            channel("x", 1),
            channel("a", 0),
            channel("b", 0),
            channel("c", 0),
        ],
    );
    let moved = node(
        Clock::Readings,
        references([0, 1, 2]),
        vec![
            channel("a", 0),
            channel("b", 0),
            channel("c", 0),
            channel("x", 1),
        ],
    );
    let mut engine = engine(one);
    let mut inputs = Vec::new();
    for index in 0..10 {
        for id in 0..4 {
            inputs.push(indication(id, f64::from(index), f64::from(id)));
        }
    }
    feed(&mut engine, &inputs);
    assert_eq!(engine.standing().channels[0].pairs, 10);
    assert!(feed(&mut engine, &[Input::Setup(Box::new(moved))]).is_empty());
    assert_eq!(engine.standing().channels[3].pairs, 10);
}

/// A reference shared by many goes stale: one alarm, and no channel says anything.
#[test]
fn a_stale_reference_gives_one_alarm_for_twenty_channels() {
    let mut lab = reference("lab", ReferenceKind::Measured);
    lab.stale_after = Some(span(600.0));
    let mut channels: Vec<_> = (0..20).map(|id| channel(&format!("c{id}"), 0)).collect();
    for channel in &mut channels {
        channel.max_permissible_error = Some(1.0);
        channel.alarms.gap_after = Some(span(600.0));
    }
    let mut engine = engine(node(Clock::Readings, vec![lab], channels));
    let mut outputs = Vec::new();
    for index in 0..200_u32 {
        let time = 60.0 * f64::from(index);
        for id in 0..20 {
            let value = 7.0 + 0.01 * f64::from((index + id) % 5);
            engine.step(&indication(id, time, value), &mut outputs);
        }
        if index < 100 {
            engine.step(&reference_value(0, time, 7.0), &mut outputs);
        }
    }
    let alarms: Vec<_> = outputs
        .iter()
        .filter(|output| matches!(output, Output::Alarm(_)))
        .collect();
    assert_eq!(alarms.len(), 1, "{alarms:?}");
}

/// A sensor that was cut off sends what it kept, in order and all at once: its gap is over when the
/// newest has come, not raised and cleared again and again on the way.
#[test]
fn catching_up_clears_the_gap_once() {
    let mut channels = vec![channel("a", 0), channel("b", 0)];
    for channel in &mut channels {
        channel.alarms.gap_after = Some(span(600.0));
    }
    let mut engine = engine(node(
        Clock::Live,
        vec![reference("zero", constant(0.0))],
        channels,
    ));
    let mut outputs = Vec::new();
    for index in 0..300 {
        let time = 60.0 * f64::from(index);
        engine.step(&indication(1, time, 0.1), &mut outputs);
        if index < 10 {
            engine.step(&indication(0, time, 0.1), &mut outputs);
        }
    }
    assert_eq!(changes(&outputs, AlarmKind::DataGap), [true]);
    outputs.clear();
    for index in 10..300 {
        let mut kept = indication(0, 60.0 * f64::from(index), 0.1);
        if let Input::Reading(reading) = &mut kept {
            reading.received = at(60.0 * 299.0 + 1.0);
        }
        engine.step(&kept, &mut outputs);
    }
    assert_eq!(changes(&outputs, AlarmKind::DataGap), [false]);
}

/// Whether a slope is significant is a matter of the slope alone: how well the reference is known
/// must not matter.
#[test]
fn an_uncertain_reference_does_not_make_a_slope_significant() {
    let run = |common: f64, seed| {
        let mut noise = Noise::new(seed, 0.0);
        let mut setup = setup();
        setup.references[0].uncertainty_common = common;
        setup.channels[0].fit.window = WindowLength::Pairs(16);
        setup.channels[0].fit.segments = 16;
        setup.channels[0].fit.forced_degree = Some(1);
        setup.channels[0].max_permissible_error = None;
        setup.channels[0].max_drift_rate = Some(1e-6);
        let mut engine = engine(setup);
        let inputs: Vec<Input> = (0..400).map(|index| minute(index, noise.draw())).collect();
        let outputs = feed(&mut engine, &inputs);
        let alarms = outputs.into_iter().filter_map(|output| match output {
            Output::Alarm(change) => Some((change.at, change.state, change.value)),
            _ => None,
        });
        alarms.collect::<Vec<_>>()
    };
    let mut all = 0;
    for seed in 60..64 {
        let alarms = run(0.0, seed);
        assert_eq!(alarms, run(1000.0, seed), "seed {seed}");
        all += alarms.len();
    }
    assert!(all > 0, "no slope was ever significant");
}
