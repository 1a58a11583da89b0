//! Whatever arrives, the engine does not panic and says only finite things.

use crate::support::{START, channel, engine, feed, node, reference, span};
use holdtrue_engine::event::{
    Gate, Input, Output, Reading, Refused, RefusedReason, Source, Supplied,
};
use holdtrue_engine::setup::{
    ChannelId, Clock, ReferenceId, ReferenceKind, Setup, Stamped, WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};
use proptest::prelude::*;

fn value() -> impl Strategy<Value = f64> {
    prop_oneof![
        4 => -10.0..10.0_f64,
        1 => any::<f64>(),
        1 => prop_oneof![Just(1e100), Just(-1e100), Just(1e-300), Just(0.0), Just(-0.0)],
    ]
}

fn time() -> impl Strategy<Value = Timestamp> {
    prop_oneof![
        8 => (0..100_000_i64).prop_map(|step| START.plus(Duration(step * 50_000_000))),
        1 => any::<i64>().prop_map(Timestamp),
        1 => (0..1000_i64).prop_map(Timestamp),
    ]
}

fn source() -> impl Strategy<Value = Source> {
    prop_oneof![
        4 => (0..5_u32).prop_map(|id| Source::Indication(ChannelId(id))),
        2 => (0..5_u32).prop_map(|id| Source::Reference(ReferenceId(id))),
    ]
}

fn reading() -> impl Strategy<Value = Reading> {
    (
        source(),
        time(),
        time(),
        value(),
        any::<Option<i64>>(),
        0..20_u8,
    )
        .prop_map(
            |(source, received, phenomenon, value, sequence, excluded)| Reading {
                source,
                received,
                phenomenon,
                value,
                sequence: sequence.map(|number| number % 4),
                excluded: excluded == 0,
            },
        )
}

fn input() -> impl Strategy<Value = Input> {
    prop_oneof![
        20 => reading().prop_map(Input::Reading),
        2 => (time(), time(), any::<bool>(), 0..5_u32).prop_map(|(received, phenomenon, open, id)| {
            Input::Gate(Gate { reference: ReferenceId(id), received, phenomenon, open })
        }),
        1 => (time(), source()).prop_map(|(received, source)| Input::Refused(Refused {
            received,
            topic: "a/b".to_owned(),
            source: Some(source),
            reason: RefusedReason::Unreadable,
            detail: String::new(),
        })),
        2 => time().prop_map(|now| Input::Tick { now }),
        1 => (0..5_u32, time(), time(), proptest::collection::vec(reading(), 0..4)).prop_map(
            |(id, from, to, readings)| {
                Input::Supplied(Supplied { channel: ChannelId(id), from, to, readings })
            }
        ),
    ]
}

fn setup() -> impl Strategy<Value = Setup> {
    let window = prop_oneof![
        (1..40_u32).prop_map(WindowLength::Pairs),
        (1..10_000_i64).prop_map(|seconds| WindowLength::Time(Duration::from_seconds(seconds))),
        Just(WindowLength::Time(Duration(70))),
    ];
    (window, any::<bool>(), 0..=5_u8, 0..100_u32, any::<bool>()).prop_map(
        |(window, live, degree, seconds, interval)| {
            let mut measured = reference("lab", ReferenceKind::Measured);
            measured.stale_after = Some(span(60.0));
            if interval {
                measured.stands_for = span(20.0);
                measured.stamped = Stamped::Middle;
            }
            let constant = |gated| ReferenceKind::Constant { value: 1.0, gated };
            let members = vec![ChannelId(0), ChannelId(1), ChannelId(2)];
            let references = vec![
                measured,
                reference("zero", constant(false)),
                reference("gate", constant(true)),
                reference("rest", ReferenceKind::Group { members }),
            ];
            let channels = (0..4)
                .map(|id| {
                    let mut channel = channel(&format!("c{id}"), id);
                    channel.lateness = span(f64::from(seconds));
                    channel.fit.window = window;
                    channel.fit.segments = match window {
                        WindowLength::Pairs(pairs) => pairs.min(8),
                        WindowLength::Time(_) => 8,
                    };
                    channel.fit.max_degree = degree;
                    channel.max_permissible_error = Some(1.0);
                    channel.max_drift_rate = Some(1.0);
                    channel.alarms.gap_after = Some(span(30.0));
                    channel.corrected_values = true;
                    channel.resolution = 0.1;
                    channel
                })
                .collect();
            let clock = if live { Clock::Live } else { Clock::Readings };
            node(clock, references, channels)
        },
    )
}

/// JSON has no way to write NaN or infinity: `serde_json` writes `null`, which no float reads back.
fn all_finite(outputs: &[Output]) -> bool {
    let stored = serde_json::to_string(outputs).expect("outputs can be stored");
    serde_json::from_str::<Vec<Output>>(&stored).is_ok_and(|read| read == outputs)
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]

    #[test]
    fn nothing_panics_and_everything_said_is_finite(
        setup in setup(),
        inputs in proptest::collection::vec(input(), 1..250),
    ) {
        let mut engine = engine(setup.clone());
        let mut outputs = feed(&mut engine, &inputs);
        engine.step(&Input::Setup(Box::new(setup)), &mut outputs);
        prop_assert!(all_finite(&outputs), "{outputs:?}");
        if let (Some(next), Some(now)) = (engine.next_tick(), engine.standing().now) {
            prop_assert!(next > now, "a tick in the past would never end");
        }
        let stored = serde_json::to_string(&engine).expect("the engine can be stored");
        let read = serde_json::from_str(&stored).expect("a stored engine can be read");
        prop_assert_eq!(engine, read);
    }
}
