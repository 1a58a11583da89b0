//! Bad input changes counters and notices, nothing else; what the engine is and says survives
//! storage bit for bit.

use crate::support::{at, channel, constant, engine, feed, gate, indication, node, reference};
use crate::support::{reference_value, span};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Reading, Refused, RefusedReason, Source, Subject};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceId, ReferenceKind, Setup};
use holdtrue_engine::time::Timestamp;

/// Two channels against a measured reference, one against a gated constant, one against a group.
fn setup() -> Setup {
    let mut against_lab = channel("intake/ph-1", 0);
    against_lab.max_permissible_error = Some(0.2);
    against_lab.max_drift_rate = Some(5.0);
    against_lab.alarms.gap_after = Some(span(600.0));
    against_lab.corrected_values = true;
    against_lab.screening.range = Some((0.0, 14.0));
    let mut others = vec![
        against_lab,
        channel("intake/ph-2", 0),
        channel("hall/ph-3", 1),
        channel("hall/ph-4", 2),
    ];
    others[3].max_gap = span(120.0);
    let group = ReferenceKind::Group {
        members: vec![ChannelId(0), ChannelId(1), ChannelId(2)],
    };
    let mut lab = reference("lab/ph", ReferenceKind::Measured);
    lab.stale_after = Some(span(3600.0));
    let gated = ReferenceKind::Constant {
        value: 7.0,
        gated: true,
    };
    node(
        Clock::Live,
        vec![lab, reference("buffer", gated), reference("rest", group)],
        others,
    )
}

/// An hour and a half of good readings every minute, a reference value every five.
fn good_inputs() -> Vec<Input> {
    let mut inputs = Vec::new();
    for minute in 0..90_u32 {
        let time = f64::from(minute) * 60.0;
        let wobble = f64::from(minute * 7919 % 17) * 0.003;
        for id in 0..4 {
            let drift = if id == 0 {
                0.004 * f64::from(minute)
            } else {
                0.0
            };
            inputs.push(indication(
                id,
                time,
                7.0 + drift + wobble + f64::from(id) * 0.01,
            ));
        }
        if minute % 5 == 0 {
            inputs.push(reference_value(0, time + 20.0, 7.0));
        }
        if minute % 20 == 0 {
            inputs.push(gate(1, time, minute % 40 == 0));
        }
        inputs.push(Input::Tick {
            now: at(time + 30.0),
        });
    }
    inputs
}

fn bad(source: Source, time: f64, value: f64, sampled: Timestamp) -> Input {
    Input::Reading(Reading {
        source,
        received: at(time),
        phenomenon: sampled,
        value,
        sequence: None,
        excluded: false,
    })
}

/// One of each kind of bad input that could come between two good ones at `time`.
fn garbage(time: f64) -> Vec<Input> {
    let source = Source::Indication(ChannelId(0));
    let lab = Source::Reference(ReferenceId(0));
    let shell = [
        RefusedReason::UnknownTopic,
        RefusedReason::Empty,
        RefusedReason::Oversize,
        RefusedReason::Unreadable,
        RefusedReason::Missing,
        RefusedReason::WrongType,
        RefusedReason::NotFinite,
        RefusedReason::BadTime,
        RefusedReason::Retained,
    ];
    let mut inputs: Vec<Input> = shell
        .into_iter()
        .map(|reason| {
            Input::Refused(Refused {
                received: at(time + 4000.0),
                topic: "works/intake/ph1".to_owned(),
                source: Some(source),
                reason,
                detail: "{".to_owned(),
            })
        })
        .collect();
    inputs.extend([
        bad(source, time, f64::NAN, at(time)),
        bad(source, time, f64::INFINITY, at(time)),
        bad(source, time, 1e300, at(time)),
        bad(source, time, 7.0, Timestamp(-1)),
        bad(source, time, 7.0, Timestamp(i64::MIN)),
        bad(source, time, 7.0, Timestamp(i64::MAX)),
        // A sender's clock an hour off, to both sides.
        bad(source, time, 7.0, at(time + 3600.0)),
        bad(source, time, 7.5, at(time - 3600.0)),
        bad(source, time, 99.0, at(time)),
        bad(Source::Indication(ChannelId(77)), time, 7.0, at(time)),
        bad(Source::Reference(ReferenceId(1)), time, 7.0, at(time)),
        bad(lab, time, 7.0, at(time - 7200.0)),
        gate(0, time, true),
    ]);
    let Input::Reading(mut excluded) = bad(source, time, 7.0, at(time)) else {
        unreachable!("bad() makes readings");
    };
    excluded.excluded = true;
    inputs.push(Input::Reading(excluded));
    inputs
}

fn without_notices(outputs: Vec<Output>) -> Vec<Output> {
    outputs
        .into_iter()
        .filter(|output| !matches!(output, Output::Notice(_)))
        .collect()
}

/// JSON of anything: the bytes that a record would hold.
fn bytes(value: &impl serde::Serialize) -> String {
    serde_json::to_string(value).expect("the engine's types can be stored")
}

#[test]
fn garbage_leaves_state_and_outputs_byte_identical() {
    let mut clean = engine(setup());
    let mut dirty = engine(setup());
    let mut clean_said = Vec::new();
    let mut dirty_said = Vec::new();
    for (index, input) in good_inputs().iter().enumerate() {
        clean.step(input, &mut clean_said);
        dirty.step(input, &mut dirty_said);
        // From the second minute on there is something for a late reading to be late against.
        if index > 20 && index % 3 == 0 {
            let time = match input {
                Input::Reading(reading) => crate::support::since_start(reading.received),
                Input::Tick { now } => crate::support::since_start(*now),
                _ => continue,
            };
            for input in garbage(time) {
                let before = dirty.state().clone();
                dirty.step(&input, &mut dirty_said);
                assert_eq!(&before, dirty.state(), "{input:?}");
            }
        }
    }
    assert_eq!(bytes(clean.state()), bytes(dirty.state()));
    let clean_said = without_notices(clean_said);
    assert!(clean_said.len() > 100, "the run must say something");
    assert_eq!(bytes(&clean_said), bytes(&without_notices(dirty_said)));
    assert_ne!(clean.standing().counters, dirty.standing().counters);
}

#[test]
fn a_duplicate_changes_nothing_either() {
    let mut once = engine(setup());
    let mut twice = engine(setup());
    let mut said_once = Vec::new();
    let mut said_twice = Vec::new();
    for input in &good_inputs() {
        once.step(input, &mut said_once);
        twice.step(input, &mut said_twice);
        twice.step(input, &mut said_twice);
    }
    assert_eq!(once.state(), twice.state());
    assert_eq!(without_notices(said_once), without_notices(said_twice));
    let duplicates = twice
        .standing()
        .counters
        .get(Subject::Channel(ChannelId(0)), RefusedReason::Duplicate);
    assert_eq!(duplicates, 90);
}

#[test]
fn state_and_outputs_survive_storage_bit_for_bit() {
    let inputs = good_inputs();
    let (first, second) = inputs.split_at(inputs.len() / 2);
    let mut straight = engine(setup());
    let said = feed(&mut straight, first);
    let restored: Engine =
        serde_json::from_str(&bytes(&straight)).expect("a stored engine can be read");
    assert_eq!(straight, restored);
    let stored: Vec<Output> = serde_json::from_str(&bytes(&said)).expect("outputs can be read");
    assert_eq!(stored, said);
    assert_eq!(bytes(&stored), bytes(&said));
    let mut restored = restored;
    assert_eq!(
        bytes(&feed(&mut straight, second)),
        bytes(&feed(&mut restored, second))
    );
    assert_eq!(bytes(&straight), bytes(&restored));
}

#[test]
fn the_same_inputs_give_the_same_bytes() {
    let run = || {
        let mut engine = engine(setup());
        let said = feed(&mut engine, &good_inputs());
        (bytes(&engine), bytes(&said))
    };
    assert_eq!(run(), run());
}

#[test]
fn every_reason_to_refuse_can_be_reached() {
    use RefusedReason as R;
    let mut engine = engine(setup());
    let mut said = Vec::new();
    for input in &good_inputs() {
        engine.step(input, &mut said);
    }
    for input in garbage(5400.0) {
        engine.step(&input, &mut said);
    }
    // A repetition; a spike; a reference with nobody near it; a group whose members are silent.
    let last = good_inputs();
    engine.step(&last[last.len() - 2], &mut said);
    let mut spiky = crate::support::engine(node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![channel("a", 0)],
    ));
    for index in 0..40_u32 {
        let value = if index == 39 {
            50.0
        } else {
            f64::from(index % 3)
        };
        spiky.step(&indication(0, f64::from(index), value), &mut said);
    }
    for time in [6000.0, 7000.0, 8000.0] {
        engine.step(&reference_value(0, time, 7.0), &mut said);
        engine.step(&indication(0, time + 300.0, 7.0), &mut said);
        engine.step(&indication(3, time + 300.0, 7.0), &mut said);
        engine.step(
            &Input::Tick {
                now: at(time + 900.0),
            },
            &mut said,
        );
    }
    let counters = [engine.standing().counters, spiky.standing().counters];
    let reached: std::collections::BTreeSet<R> = counters
        .iter()
        .flat_map(holdtrue_engine::counters::Counters::all)
        .map(|count| count.reason)
        .collect();
    let all = [
        R::UnknownTopic,
        R::Empty,
        R::Oversize,
        R::Unreadable,
        R::Missing,
        R::WrongType,
        R::NotFinite,
        R::BadTime,
        R::Retained,
        R::NegativeTime,
        R::Future,
        R::Late,
        R::Duplicate,
        R::StatusExcluded,
        R::OutOfRange,
        R::InnovationGate,
        R::NoPartner,
        R::GroupTooSmall,
    ];
    for reason in all {
        assert!(reached.contains(&reason), "{reason:?} was never reached");
    }
}
