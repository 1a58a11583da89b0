//! What "now" is when a clock is wrong: one wrong stamp, or one jump of the host's clock, must not
//! spoil what comes after it.

use crate::support::{
    at, channel, constant, engine, feed, gate, indication, node, reference, span,
};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, RefusedReason, Subject};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceKind, Setup, WindowLength};

const DAY: f64 = 86_400.0;
const YEAR: f64 = 365.0 * DAY;

/// Channels with a window of one day against a constant.
fn setup(clock: Clock, channels: u32) -> Setup {
    let channels = (0..channels)
        .map(|id| {
            let mut channel = channel(&format!("c{id}"), 0);
            channel.fit.window = WindowLength::Time(span(DAY));
            channel
        })
        .collect();
    node(clock, vec![reference("zero", constant(0.0))], channels)
}

fn refused(engine: &Engine, channel: u32, reason: RefusedReason) -> u64 {
    let subject = Subject::Channel(ChannelId(channel));
    engine.standing().counters.get(subject, reason)
}

fn minutes(channel: u32, from: u32, to: u32) -> Vec<Input> {
    (from..to)
        .map(|index| indication(channel, 60.0 * f64::from(index), 0.1))
        .collect()
}

/// A stamp years ahead in a recording is refused; a repetition of it proves nothing.
#[test]
fn one_stamp_far_ahead_does_not_move_a_recordings_now() {
    let mut engine = engine(setup(Clock::Readings, 1));
    feed(&mut engine, &minutes(0, 0, 100));
    let state = engine.state().clone();
    feed(&mut engine, &[indication(0, 70.0 * YEAR, 0.1)]);
    feed(&mut engine, &[indication(0, 70.0 * YEAR, 0.1)]);
    assert_eq!(engine.state(), &state);
    assert_eq!(refused(&engine, 0, RefusedReason::Future), 2);
    feed(&mut engine, &minutes(0, 100, 200));
    assert_eq!(engine.standing().channels[0].pairs, 200);
    assert_eq!(refused(&engine, 0, RefusedReason::Late), 0);
}

/// A sensor with a wrong clock goes on sending, and so do the others: its stamps never count.
#[test]
fn a_sensor_with_a_wrong_clock_does_not_confirm_itself_beside_others() {
    let mut engine = engine(setup(Clock::Readings, 2));
    let mut inputs = Vec::new();
    for index in 0..100_u32 {
        let time = 60.0 * f64::from(index);
        inputs.push(indication(0, time, 0.1));
        for second in 0..3 {
            let ahead = 70.0 * YEAR + time + f64::from(second);
            inputs.push(indication(1, ahead, 0.1));
        }
    }
    feed(&mut engine, &inputs);
    assert_eq!(refused(&engine, 1, RefusedReason::Future), 300);
    assert_eq!(engine.standing().channels[0].pairs, 100);
    assert_eq!(engine.standing().now, Some(at(60.0 * 99.0)));
}

/// A recording may stop for a year: the first reading after the gap waits for a second one, from
/// another source where there are several.
#[test]
fn a_real_gap_costs_one_reading() {
    for channels in [1, 2] {
        let mut engine = engine(setup(Clock::Readings, channels));
        let mut inputs = Vec::new();
        for start in [0.0, YEAR] {
            for index in 0..100_u32 {
                for id in 0..channels {
                    let time = start + 60.0 * f64::from(index) + f64::from(id);
                    inputs.push(indication(id, time, 0.1));
                }
            }
        }
        feed(&mut engine, &inputs);
        let standing = engine.standing();
        assert_eq!(refused(&engine, 0, RefusedReason::Future), 1);
        assert_eq!(standing.channels[0].pairs, 199);
        assert_eq!(
            standing.channels[0].last_indication,
            Some(at(YEAR + 60.0 * 99.0))
        );
    }
}

/// One of two sources has ended when the recording goes on after a gap: the other one is believed
/// in the end.
#[test]
fn the_last_source_of_a_recording_is_believed_in_the_end() {
    let mut engine = engine(setup(Clock::Readings, 2));
    feed(&mut engine, &minutes(0, 0, 100));
    feed(&mut engine, &minutes(1, 0, 100));
    let after: Vec<Input> = (0..100)
        .map(|index| indication(0, YEAR + 60.0 * f64::from(index), 0.1))
        .collect();
    feed(&mut engine, &after);
    let lost = refused(&engine, 0, RefusedReason::Future);
    assert_eq!(lost, 15);
    assert_eq!(engine.standing().channels[0].pairs, 200 - lost);
}

/// The host's clock jumped a day ahead and back. What was stamped meanwhile is given up; what comes
/// then is taken as if nothing had happened.
#[test]
fn live_steps_back_after_a_jump_of_the_hosts_clock() {
    let mut engine = engine(setup(Clock::Live, 2));
    feed(&mut engine, &minutes(0, 0, 100));
    feed(&mut engine, &minutes(1, 0, 100));
    // One reading of channel 0 and a tick are stamped a day ahead.
    let ahead = [
        indication(0, DAY + 6000.0, 0.1),
        Input::Tick {
            now: at(DAY + 6060.0),
        },
    ];
    feed(&mut engine, &ahead);
    assert_eq!(engine.standing().now, Some(at(DAY + 6060.0)));
    let mut inputs = Vec::new();
    for index in 100..150 {
        inputs.extend(minutes(1, index, index + 1));
        inputs.extend(minutes(0, index, index + 1));
    }
    let said = feed(&mut engine, &inputs);
    let faults = said
        .iter()
        .filter(|o| matches!(o, Output::Notice(notice) if notice.code == "clock-fault"));
    assert_eq!(faults.count(), 1);
    let standing = engine.standing();
    assert_eq!(standing.now, Some(at(60.0 * 149.0)));
    // Channel 1 has lost nothing; channel 0 begins again, with what came after the step.
    assert_eq!(standing.channels[1].pairs, 150);
    assert!(
        (40..=50).contains(&standing.channels[0].pairs),
        "{}",
        standing.channels[0].pairs
    );
    let valid = standing.channels[1].valid_until.expect("in force again");
    assert!(valid < at(DAY), "{valid}");
}

/// A sender's clock some minutes fast is tolerated; it must not shut out those that are right.
#[test]
fn one_fast_stamp_does_not_make_the_right_ones_late() {
    let mut plain = engine(setup(Clock::Live, 1));
    feed(&mut plain, &minutes(0, 0, 10));
    let mut fast = indication(0, 540.0 + 290.0, 0.1);
    if let Input::Reading(reading) = &mut fast {
        reading.received = at(540.0);
    }
    feed(&mut plain, &[fast]);
    let on_time: Vec<Input> = (541..800)
        .map(|second| indication(0, f64::from(second), 0.2))
        .collect();
    feed(&mut plain, &on_time);
    assert_eq!(refused(&plain, 0, RefusedReason::Late), 0);
    assert_eq!(engine_pairs(&plain), 270);

    let kind = ReferenceKind::Constant {
        value: 0.0,
        gated: true,
    };
    let gated = node(
        Clock::Live,
        vec![reference("zero", kind)],
        vec![channel("a", 0)],
    );
    let mut gated = engine(gated);
    let mut fast = gate(0, 290.0, true);
    if let Input::Gate(event) = &mut fast {
        event.received = at(0.0);
    }
    feed(&mut gated, &[fast, gate(0, 20.0, true)]);
    let late = gated
        .standing()
        .counters
        .all()
        .iter()
        .any(|count| count.reason == RefusedReason::Late);
    assert!(!late);
}

fn engine_pairs(engine: &Engine) -> u64 {
    engine.standing().channels[0].pairs
}
