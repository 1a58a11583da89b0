//! Readings that arrive within `lateness` give the same pairs in any order.

use crate::support::{at, channel, engine, feed, node, reference, span};
use holdtrue_engine::event::{Gate, Input, Output, Reading, RefusedReason, Source};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceId, ReferenceKind, Setup};
use proptest::prelude::*;

/// Seconds that a reading may be late.
const LATENESS: f64 = 30.0;

/// What may come: source, time and value, and how late it arrives.
type Event = (u8, f64, f64, f64);

/// The same events, each arriving as late as it says.
fn arrivals(events: &[Event]) -> Vec<Event> {
    let mut arrivals = events.to_vec();
    arrivals.sort_by(|a, b| (a.1 + a.3).total_cmp(&(b.1 + b.3)));
    arrivals
}

fn input(event: &Event, sequence: i64) -> Input {
    let &(kind, time, value, _) = event;
    let source = match kind {
        0..=3 => Source::Indication(ChannelId(u32::from(kind))),
        4 => Source::Reference(ReferenceId(0)),
        _ => {
            return Input::Gate(Gate {
                reference: ReferenceId(1),
                received: at(time),
                phenomenon: at(time),
                open: value > 0.0,
            });
        }
    };
    Input::Reading(Reading {
        source,
        received: at(time),
        phenomenon: at(time),
        value,
        sequence: Some(sequence),
        excluded: false,
    })
}

/// Channel 0 against the measured reference, 1 against the gate, 2 against the group of the others,
/// 3 against the same reference as intervals.
fn setup(stands_for: f64, lag: f64) -> Setup {
    let mut measured = reference("lab", ReferenceKind::Measured);
    measured.stands_for = span(stands_for);
    let gated = ReferenceKind::Constant {
        value: 1.0,
        gated: true,
    };
    let group = ReferenceKind::Group {
        members: vec![ChannelId(0), ChannelId(1), ChannelId(3)],
    };
    let references = vec![measured, reference("gate", gated), reference("rest", group)];
    let mut channels = vec![
        channel("a", 0),
        channel("b", 1),
        channel("c", 2),
        channel("d", 0),
    ];
    for channel in &mut channels {
        channel.lateness = span(LATENESS);
        channel.max_gap = span(60.0);
        channel.lag = span(lag);
        channel.screening.enabled = false;
    }
    channels[3].lag = span(0.0);
    node(Clock::Readings, references, channels)
}

/// All pairs made, in a fixed order, and how many readings found no partner.
fn pairs(setup: Setup, events: &[Event], order: &[Event]) -> (Vec<String>, u64) {
    let mut engine = engine(setup);
    let sequence = |event: &Event| {
        let place = events.iter().position(|other| other == event);
        i64::try_from(place.expect("an arrival is an event")).expect("few events")
    };
    let mut inputs: Vec<Input> = order
        .iter()
        .map(|event| input(event, sequence(event)))
        .collect();
    // Long after everything else: what can be settled is.
    let end = events.iter().map(|event| event.1).fold(0.0, f64::max) + 1000.0;
    for step in 0..4_u32 {
        for kind in 0..5 {
            inputs.push(input(&(kind, end + 200.0 * f64::from(step), 0.0, 0.0), -1));
        }
    }
    let mut made: Vec<String> = feed(&mut engine, &inputs)
        .iter()
        .filter_map(|output| match output {
            Output::Pair(fate) => Some(format!(
                "{:?} {:?} {} {}",
                fate.channel, fate.phenomenon, fate.indication, fate.reference
            )),
            _ => None,
        })
        .collect();
    made.sort();
    let counters = engine.standing().counters;
    let late = counters
        .all()
        .iter()
        .filter(|count| count.reason == RefusedReason::Late)
        .map(|count| count.count)
        .sum();
    (made, late)
}

fn events() -> impl Strategy<Value = Vec<Event>> {
    let event = (0..6_u8, 0..600_u32, -100..100_i32, 0.0..LATENESS)
        .prop_map(|(kind, time, value, late)| (kind, f64::from(time), f64::from(value), late));
    // One value of a source for one instant: of two, the first decides an exact match, since that
    // is made at once.
    proptest::collection::vec(event, 1..120).prop_map(|events| {
        let mut kept: Vec<Event> = Vec::new();
        for event in events {
            if !kept
                .iter()
                .any(|other| other.0 == event.0 && at(other.1) == at(event.1))
            {
                kept.push(event);
            }
        }
        kept
    })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(4000))]

    #[test]
    fn any_order_within_lateness_gives_the_same_pairs(
        events in events(),
        stands_for in prop_oneof![Just(0.0), Just(60.0)],
        lag in prop_oneof![Just(0.0), Just(7.0), Just(-7.0)],
    ) {
        let mut ordered = events.clone();
        ordered.sort_by(|a, b| a.1.total_cmp(&b.1));
        let (expected, late) = pairs(setup(stands_for, lag), &events, &ordered);
        prop_assert_eq!(late, 0);
        let (shuffled, late) = pairs(setup(stands_for, lag), &events, &arrivals(&events));
        prop_assert_eq!(late, 0, "nothing came later than lateness allows");
        prop_assert_eq!(shuffled, expected);
    }
}
