//! The screen keeps outliers out, stops at a step, and leaves drift and correlated noise alone.

use crate::support::{
    Noise, at, channel, constant, engine, indication, node, reference, reference_value, span,
};
use holdtrue_engine::event::{
    AlarmKind, AlarmState, Input, Output, PairFate, RefusedReason, Subject,
};
use holdtrue_engine::setup::{ChannelId, ChannelSetup, Clock, ReferenceKind, WindowLength};

/// Seconds between readings.
const EVERY: f64 = 60.0;

fn setup(channel: ChannelSetup) -> holdtrue_engine::setup::Setup {
    node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![channel],
    )
}

/// Feeds one error per minute and returns all that is said, with the index of the reading.
fn run(channel: ChannelSetup, errors: impl IntoIterator<Item = f64>) -> Vec<(usize, Output)> {
    let mut engine = engine(setup(channel));
    let mut said = Vec::new();
    for (index, error) in errors.into_iter().enumerate() {
        let mut outputs = Vec::new();
        engine.step(&indication(0, EVERY * index as f64, error), &mut outputs);
        said.extend(outputs.into_iter().map(|output| (index, output)));
    }
    said
}

fn rejected(said: &[(usize, Output)]) -> Vec<(usize, PairFate)> {
    let fates = said.iter().filter_map(|(index, output)| match output {
        Output::Pair(fate) if fate.rejected.is_some() => Some((*index, fate.clone())),
        _ => None,
    });
    fates.collect()
}

/// Changes of the locked-out alarm: index and whether it was raised.
fn lock_outs(said: &[(usize, Output)]) -> Vec<(usize, bool)> {
    let changes = said.iter().filter_map(|(index, output)| match output {
        Output::Alarm(change) if change.kind == AlarmKind::ScreenLockedOut => {
            Some((*index, change.state != AlarmState::Normal))
        }
        _ => None,
    });
    changes.collect()
}

#[test]
fn single_spikes_are_kept_out_and_nothing_else() {
    let mut noise = Noise::new(11, 0.0);
    let spikes = [200_usize, 333, 700, 701, 1500];
    let errors = (0..2000).map(|index| {
        let value = noise.draw();
        if spikes.contains(&index) {
            if index == 701 { -12.0 } else { 12.0 }
        } else {
            value
        }
    });
    let said = run(channel("a", 0), errors.collect::<Vec<_>>());
    let rejected = rejected(&said);
    let places: Vec<usize> = rejected.iter().map(|(index, _)| *index).collect();
    assert_eq!(places, spikes);
    for (_, fate) in &rejected {
        let rejection = fate.rejected.expect("these were kept out");
        assert_eq!(rejection.reason, RefusedReason::InnovationGate);
        assert!(rejection.value > rejection.threshold);
        assert!((4.0..7.0).contains(&rejection.threshold), "{rejection:?}");
    }
    assert!(lock_outs(&said).is_empty());
}

/// Where nobody looks for steps.
#[test]
fn a_step_locks_out_at_the_fifth_pair_and_unlocks_when_the_fit_has_followed() {
    let mut noise = Noise::new(12, 0.0);
    let mut small = channel("a", 0);
    small.fit.window = WindowLength::Pairs(256);
    small.steps = None;
    let errors: Vec<f64> = (0..1500)
        .map(|index| noise.draw() + if index >= 600 { 20.0 } else { 0.0 })
        .collect();
    let said = run(small, errors);
    let places: Vec<usize> = rejected(&said).iter().map(|(index, _)| *index).collect();
    assert_eq!(places, [600, 601, 602, 603]);
    let changes = lock_outs(&said);
    assert_eq!(changes.len(), 2, "{changes:?}");
    assert_eq!(changes[0], (604, true));
    let (cleared, raised) = changes[1];
    assert!(!raised);
    // The window holds 256 pairs: half of it must be new before the fit comes within five sigma.
    assert!((680..900).contains(&cleared), "cleared at {cleared}");
    let raises = said.iter().filter(|(index, output)| {
        matches!(output, Output::Degree(change) if change.to > change.from)
            && (604..cleared - 8).contains(index)
    });
    assert_eq!(raises.count(), 0, "no degree is raised while locked out");
}

#[test]
fn drift_is_never_screened_away() {
    // Window of 1024 pairs; drifts from slow to absurd, in sigma per window.
    for (seed, per_window) in [(1, 5.0), (2, 50.0), (3, 500.0)] {
        let mut noise = Noise::new(seed, 0.0);
        let errors: Vec<f64> = (0..3000)
            .map(|index| noise.draw() + per_window * f64::from(index) / 1024.0)
            .collect();
        let said = run(channel("a", 0), errors);
        assert!(lock_outs(&said).is_empty(), "{per_window}");
        let count = rejected(&said).len();
        assert!(count <= 3, "{per_window}: {count} rejected");
    }
}

#[test]
fn correlated_noise_seldom_meets_the_gate_and_never_locks_it_out() {
    for rho in [0.5, 0.8, 0.9, 0.97] {
        let mut count = 0;
        for seed in 0..10 {
            let mut noise = Noise::new(100 + seed, rho);
            let errors: Vec<f64> = (0..5000).map(|_| noise.draw()).collect();
            let said = run(channel("a", 0), errors);
            assert!(lock_outs(&said).is_empty(), "rho {rho} seed {seed}");
            count += rejected(&said).len();
        }
        assert!(count <= 25, "rho {rho}: {count} of 50000 rejected");
    }
}

#[test]
fn screening_off_keeps_nothing_out() {
    let mut open = channel("a", 0);
    open.screening.enabled = false;
    open.screening.range = Some((-1.0, 1.0));
    let mut noise = Noise::new(13, 0.0);
    let errors: Vec<f64> = (0..300)
        .map(|index| if index % 50 == 49 { 1e6 } else { noise.draw() })
        .collect();
    assert!(rejected(&run(open, errors)).is_empty());
}

/// Pairs older than the window say nothing about it: they are told as late, whatever their value,
/// and do not lock the screen out.
#[test]
fn pairs_from_before_the_window_do_not_drive_the_screen() {
    let mut channel = channel("a", 0);
    channel.fit.window = WindowLength::Time(span(86_400.0));
    channel.lateness = span(30.0 * 86_400.0);
    let mut engine = engine(setup(channel));
    let mut noise = Noise::new(17, 0.0);
    let mut outputs = Vec::new();
    let start = 10.0 * 86_400.0;
    for index in 0..200_u32 {
        let time = start + EVERY * f64::from(index);
        engine.step(&indication(0, time, noise.draw()), &mut outputs);
    }
    outputs.clear();
    for index in 0..20_u32 {
        engine.step(&indication(0, EVERY * f64::from(index), 50.0), &mut outputs);
    }
    let fates: Vec<_> = outputs
        .iter()
        .filter_map(|output| match output {
            Output::Pair(fate) => Some(fate.rejected.expect("kept out").reason),
            _ => None,
        })
        .collect();
    assert_eq!(fates, [RefusedReason::Late; 20]);
    assert!(!outputs.iter().any(|o| matches!(o, Output::Alarm(_))));
    assert!(!engine.standing().channels[0].locked_out);
}

/// One value again and again is a stuck sensor, and no silence of the node: it still reports. Once
/// it moves it is believed again, before any reference value comes.
#[test]
fn a_stuck_sensor_is_one_alarm_until_it_moves() {
    let mut alive = channel("a", 0);
    alive.noise = 1.0;
    alive.resolution = 0.1;
    alive.alarms.gap_after = Some(span(600.0));
    let lab = reference("lab", ReferenceKind::Measured);
    let mut engine = engine(node(Clock::Live, vec![lab], vec![alive]));
    let mut outputs = Vec::new();
    engine.step(&reference_value(0, 0.0, 5.0), &mut outputs);
    for minute in 0..60_u32 {
        let seconds = EVERY * f64::from(minute);
        engine.step(&indication(0, seconds, 5.0), &mut outputs);
        engine.step(
            &Input::Tick {
                now: at(seconds + 30.0),
            },
            &mut outputs,
        );
    }
    let alarms = |outputs: &mut Vec<Output>| -> Vec<(Subject, AlarmKind, AlarmState)> {
        outputs
            .drain(..)
            .filter_map(|output| match output {
                Output::Alarm(change) => Some((change.subject, change.kind, change.state)),
                _ => None,
            })
            .collect()
    };
    let sensor = Subject::Channel(ChannelId(0));
    let raised = (sensor, AlarmKind::Stuck, AlarmState::Unacknowledged);
    assert_eq!(alarms(&mut outputs), [raised]);
    for (minute, value) in [(60.0, 5.3), (61.0, 4.6), (62.0, 4.9)] {
        engine.step(&indication(0, EVERY * minute, value), &mut outputs);
    }
    let cleared = (sensor, AlarmKind::Stuck, AlarmState::Normal);
    assert_eq!(alarms(&mut outputs), [cleared]);
}
