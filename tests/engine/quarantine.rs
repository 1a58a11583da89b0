//! A bad reference day, declared bad afterwards: the channels that rest on it are fitted anew from
//! the record without it, as if it had never come, and say what they supersede. Released, it counts
//! again. Nobody else moves.

use crate::stream::Shell;
use crate::support::{
    Noise, at, channel, constant, indication, node, reference, reference_value, span,
};
use holdtrue::state::{decode, encode};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{
    About, Act, Cause, CheckPoint, Correction, Input, Interval, Order, OrderAnswer, Output,
    Quarantine, Quarantined, RefusedReason, Release, Rung, ServiceEvent, Subject, Wish,
};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceId, ReferenceKind, Setup, WindowLength};

/// One reading and one reference value each, every so many seconds.
const EVERY: f64 = 3600.0;
/// Hours before the bad day, of the bad day, and after it.
const GOOD: u32 = 120;
const BAD: u32 = 24;
const AFTER: u32 = 48;
/// The reference shows so much too much on the bad day: too little for any screen.
const OFF: f64 = 0.05;

/// Two channels on the laboratory's values (too few to judge it), one on a constant.
fn setup(window: WindowLength) -> Setup {
    let channels = [0, 0, 1].into_iter().enumerate().map(|(place, id)| {
        let mut channel = channel(&format!("c{place}"), id);
        channel.fit.window = window;
        channel.max_permissible_error = Some(1.0);
        channel.lateness = span(60.0);
        // Each pair is judged and told.
        channel.publish.step = 0.0;
        channel.publish.dead_zone = 0.0;
        channel
    });
    let lab = reference("lab", ReferenceKind::Measured);
    let references = vec![lab, reference("buffer", constant(7.0))];
    node(Clock::Readings, references, channels.collect())
}

fn is_bad(hour: u32) -> bool {
    (GOOD..GOOD + BAD).contains(&hour)
}

/// What comes in some hours; the reference's values only where it is `heard`.
fn hours(hours: std::ops::Range<u32>, heard: impl Fn(u32) -> bool) -> Vec<Input> {
    let mut noise = Noise::new(7, 0.0);
    let mut inputs = Vec::new();
    for hour in 0..hours.end {
        let time = EVERY * f64::from(hour);
        let draws = [noise.draw(), noise.draw(), noise.draw(), noise.draw()];
        if !hours.contains(&hour) {
            continue;
        }
        let level = 7.0 + 0.5 * (f64::from(hour) / 9.0).sin();
        let drift = 0.002 * f64::from(hour);
        inputs.push(indication(0, time, level + drift + 0.05 * draws[0]));
        inputs.push(indication(1, time, level - drift + 0.05 * draws[1]));
        inputs.push(indication(2, time, 7.0 + drift + 0.05 * draws[2]));
        let off = if is_bad(hour) { OFF } else { 0.0 };
        if heard(hour) {
            inputs.push(reference_value(0, time, level + off + 0.01 * draws[3]));
        }
    }
    inputs
}

const END: u32 = GOOD + BAD + AFTER;

/// From this hour to that one.
fn between(from: u32, to: u32) -> Interval {
    Interval {
        from: at(EVERY * f64::from(from) - 600.0),
        to: Some(at(EVERY * f64::from(to) - 600.0)),
    }
}

fn order(id: &str, wish: Wish) -> Input {
    Input::Order(Box::new(Order {
        received: at(EVERY * f64::from(END)),
        id: id.to_owned(),
        reply_to: None,
        wish,
    }))
}

fn quarantine(id: &str, about: About, interval: Interval) -> Input {
    let wish = Wish::Quarantine(Quarantine {
        by: "M. Ito".to_owned(),
        about,
        interval,
        note: "standard was spoilt".to_owned(),
    });
    order(id, wish)
}

fn release(id: &str, quarantine: &str) -> Input {
    let wish = Wish::Release(Release {
        by: "M. Ito".to_owned(),
        quarantine: quarantine.to_owned(),
        note: String::new(),
    });
    order(id, wish)
}

fn lab() -> About {
    About::Reference("lab".to_owned())
}

/// A node and the record beside it.
#[derive(Clone, Default)]
struct Node {
    engine: Engine,
    shell: Shell,
}

impl Node {
    fn new(window: WindowLength) -> Self {
        let mut node = Self::default();
        node.take(&[Input::Setup(Box::new(setup(window)))]);
        node
    }

    /// Feeds inputs; what was said.
    fn take(&mut self, inputs: &[Input]) -> Vec<Output> {
        let before = self.shell.said().len();
        for input in inputs {
            self.shell.step(&mut self.engine, input);
        }
        self.shell.said()[before..].to_vec()
    }

    /// The newest correction of a channel.
    fn correction(&self, channel: u32) -> Correction {
        let mut said = self.shell.said().iter().rev();
        let found = said.find_map(|output| match output {
            Output::Correction(it) if it.channel == ChannelId(channel) => Some(it),
            _ => None,
        });
        (**found.expect("a correction")).clone()
    }
}

fn answers(said: &[Output]) -> Vec<&OrderAnswer> {
    said.iter()
        .filter_map(|output| match output {
            Output::Answer(answer) => Some(&**answer),
            _ => None,
        })
        .collect()
}

fn accepted(said: &[Output]) -> Quarantined {
    let answers = answers(said);
    assert_eq!(answers.len(), 1, "{said:?}");
    assert!(answers[0].accepted, "{}", answers[0].text);
    answers[0].quarantine.clone().expect("what it set going")
}

/// The numbers of two corrections agree: to the bit, or to a part of the uncertainty.
fn assert_alike(found: &Correction, expected: &Correction, tolerance: f64) {
    let numbers = |it: &Correction| {
        let mut numbers = it.zero.clone();
        numbers.extend(&it.weights);
        numbers.extend(it.covariance.iter().flatten());
        numbers.extend([
            it.correction,
            it.standard_uncertainty,
            it.expanded_uncertainty,
        ]);
        numbers.extend([
            it.residual_sd,
            it.degrees_of_freedom,
            it.range.0,
            it.range.1,
        ]);
        numbers
    };
    assert_eq!(found.degree, expected.degree);
    assert_eq!(found.origin, expected.origin);
    assert_eq!(found.window.pairs, expected.window.pairs);
    assert_eq!(found.window.from, expected.window.from);
    assert_eq!(found.zone, expected.zone);
    let (found, expected) = (numbers(found), numbers(expected));
    assert_eq!(found.len(), expected.len());
    for (found, expected) in found.iter().zip(&expected) {
        if tolerance > 0.0 {
            let off = (found - expected).abs();
            assert!(
                off <= tolerance * expected.abs().max(1e-3),
                "{found} {expected}"
            );
        } else {
            assert_eq!(found.to_bits(), expected.to_bits(), "{found} {expected}");
        }
    }
}

/// Holds the whole history.
const LONG: WindowLength = WindowLength::Pairs(1024);

/// A node that has taken everything, and one that never got the bad values.
fn both(window: WindowLength, out: impl Fn(u32) -> bool) -> (Node, Node) {
    let (mut node, mut clean) = (Node::new(window), Node::new(window));
    node.take(&hours(0..END, |_| true));
    clean.take(&hours(0..END, |hour| !out(hour)));
    (node, clean)
}

#[test]
fn quarantined_it_is_as_if_the_bad_day_had_never_come() {
    let (mut node, mut clean) = both(LONG, is_bad);
    let poisoned = [0, 1].map(|id| node.correction(id));
    let said = node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + BAD))]);
    let what = accepted(&said);
    assert_eq!(what.channels, ["c0", "c1"]);
    assert_eq!(what.refitted, ["c0", "c1"]);
    for id in [0, 1] {
        let found = node.correction(id);
        let superseding = found
            .supersedes
            .clone()
            .expect("it says what it supersedes");
        let before = &poisoned[id as usize];
        assert_eq!(superseding.order, "q-1");
        assert!(superseding.issue_number >= before.issue_number);
        let moved = (found.correction - before.correction).abs();
        assert!(moved > 1e-4, "the bad day told: {moved}");
        assert_alike(&found, &clean.correction(id), 0.0);
        assert_eq!(
            node.engine.standing().channels[id as usize].rung,
            Rung::Advise
        );
        let counters = node.engine.standing().counters;
        let out = counters.get(Subject::Channel(ChannelId(id)), RefusedReason::Quarantined);
        assert_eq!(out, u64::from(BAD));
    }
    // The pairs that are out are told, each once, and nothing is said of anybody else.
    let mut out = 0;
    for output in &said {
        match output {
            Output::Pair(fate) => {
                assert_ne!(fate.channel, ChannelId(2));
                let reason = fate.rejected.expect("out").reason;
                assert_eq!(reason, RefusedReason::Quarantined);
                out += 1;
            }
            Output::Correction(it) => assert_ne!(it.channel, ChannelId(2)),
            Output::Wanted { channel, .. } => assert_ne!(*channel, ChannelId(2)),
            _ => {}
        }
    }
    assert_eq!(out, 2 * BAD);
    // It goes on like the one that never got them.
    let next = hours(END..END + 60, |_| true);
    node.take(&next);
    clean.take(&next);
    for id in [0, 1, 2] {
        assert_alike(&node.correction(id), &clean.correction(id), 0.0);
    }
    assert_eq!(node.correction(0).supersedes, None, "said once");
}

/// A window that has left its beginning behind is put together at other instants than the one that
/// grew with time: the last digits differ.
#[test]
fn in_a_window_of_time_that_slides_it_is_so_to_rounding() {
    let (mut node, clean) = both(WindowLength::Time(span(80.0 * EVERY)), is_bad);
    accepted(&node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + BAD))]));
    for id in [0, 1] {
        assert_alike(&node.correction(id), &clean.correction(id), 1e-9);
    }
}

/// … and one of so many pairs takes older ones in for those that are out. (One pair to a segment:
/// with more, segments may begin at other pairs.)
#[test]
fn a_window_of_pairs_that_slides_is_filled_up_again() {
    let (mut node, clean) = both(WindowLength::Pairs(64), is_bad);
    accepted(&node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + BAD))]));
    for id in [0, 1] {
        assert_eq!(node.correction(id).window.pairs, 64);
        assert_alike(&node.correction(id), &clean.correction(id), 1e-9);
    }
}

#[test]
fn released_it_is_as_it_was_to_the_bit() {
    let (mut node, _) = both(LONG, is_bad);
    let poisoned = [0, 1].map(|id| node.correction(id));
    accepted(&node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + BAD))]));
    let said = node.take(&[release("r-1", "q-1")]);
    let what = accepted(&said);
    assert!(what.released);
    assert_eq!(what.quarantine, "q-1");
    for id in [0, 1] {
        let found = node.correction(id);
        let superseding = found
            .supersedes
            .clone()
            .expect("it says what it supersedes");
        assert_eq!(superseding.order, "r-1");
        assert_alike(&found, &poisoned[id as usize], 0.0);
    }
    let back = said
        .iter()
        .filter(|output| matches!(output, Output::Pair(fate) if fate.rejected.is_none()));
    assert_eq!(back.count(), 2 * BAD as usize);
}

#[test]
fn two_that_overlap_are_released_one_by_one() {
    let (mut node, clean) = both(LONG, is_bad);
    accepted(&node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + 16))]));
    accepted(&node.take(&[quarantine("q-2", lab(), between(GOOD + 8, GOOD + BAD))]));
    assert_alike(&node.correction(0), &clean.correction(0), 0.0);
    accepted(&node.take(&[release("r-1", "q-1")]));
    let (_, half) = both(LONG, |hour| (GOOD + 8..GOOD + BAD).contains(&hour));
    assert_alike(&node.correction(0), &half.correction(0), 0.0);
}

/// Parts of the state as a record holds them, read back.
fn restored(engine: &Engine) -> Engine {
    let stored: Vec<_> = engine
        .parts()
        .map(|id| (id, encode(engine, id).expect("a part of its own")))
        .collect();
    let parts = stored.iter().map(|(id, bytes)| (*id, bytes.as_slice()));
    decode(parts).expect("what was stored can be read")
}

#[test]
fn between_order_and_rows_it_holds_also_across_a_restart() {
    let (mut node, clean) = both(LONG, is_bad);
    let mut said = Vec::new();
    let told = quarantine("q-1", lab(), between(GOOD, GOOD + BAD));
    node.engine.step(&told, &mut said);
    let wanted: Vec<Output> = said
        .iter()
        .filter(|output| matches!(output, Output::Wanted { .. }))
        .cloned()
        .collect();
    assert_eq!(wanted.len(), 2);
    // Pairs made meanwhile wait.
    let next = hours(END..END + 2, |_| true);
    for input in &next {
        node.shell.remember(input);
        node.engine.step(input, &mut said);
    }
    for channel in &node.engine.standing().channels[..2] {
        assert_eq!(
            (channel.rung, channel.because),
            (Rung::Hold, Some(Cause::Quarantined))
        );
    }
    assert_eq!(node.engine.standing().channels[2].rung, Rung::Advise);
    let back = restored(&node.engine);
    assert!(back == node.engine);
    node.engine = back;
    node.shell.answer(&mut node.engine, &wanted);
    let mut clean = clean;
    clean.take(&next);
    for id in [0, 1] {
        assert_alike(&node.correction(id), &clean.correction(id), 0.0);
        assert_eq!(
            node.engine.standing().channels[id as usize].rung,
            Rung::Advise
        );
    }
}

/// Rows asked for by a first order come after a second one: they answer nothing any more.
#[test]
fn a_second_order_before_the_rows_have_come_asks_again() {
    let (mut node, mut clean) = both(LONG, is_bad);
    let next = hours(END..END + 2, |_| true);
    let mut said = Vec::new();
    let first = quarantine("q-1", lab(), between(GOOD, GOOD + 16));
    node.engine.step(&first, &mut said);
    for input in &next {
        node.shell.remember(input);
        node.engine.step(input, &mut said);
    }
    let second = quarantine("q-2", lab(), between(GOOD + 8, GOOD + BAD));
    node.engine.step(&second, &mut said);
    let wanted: Vec<Output> = said
        .iter()
        .filter(|output| matches!(output, Output::Wanted { .. }))
        .cloned()
        .collect();
    assert_eq!(wanted.len(), 4);
    node.shell.answer(&mut node.engine, &wanted);
    clean.take(&next);
    for id in [0, 1] {
        let found = node.correction(id);
        assert_alike(&found, &clean.correction(id), 0.0);
        assert_eq!(found.supersedes.expect("said").order, "q-2");
    }
}

#[test]
fn without_an_end_it_holds_what_comes_until_it_is_released() {
    let mut node = Node::new(LONG);
    node.take(&hours(0..GOOD, |_| true));
    let open = Interval {
        from: at(EVERY * f64::from(GOOD) - 600.0),
        to: None,
    };
    let what = accepted(&node.take(&[quarantine("q-1", lab(), open)]));
    assert_eq!(what.interval, open);
    node.take(&hours(GOOD..GOOD + 6, |_| true));
    let standing = node.engine.standing();
    let refused = Subject::Reference(ReferenceId(0));
    assert_eq!(
        standing.counters.get(refused, RefusedReason::Quarantined),
        6
    );
    assert_eq!(standing.channels[0].pairs, u64::from(GOOD));
    assert_eq!(standing.channels[0].because, Some(Cause::Quarantined));
    // A repeated message is still known as one.
    node.take(&hours(GOOD..GOOD + 1, |_| true));
    let counters = node.engine.standing().counters;
    assert_eq!(counters.get(refused, RefusedReason::Duplicate), 1);
    accepted(&node.take(&[release("r-1", "q-1")]));
    let mut never = Node::new(LONG);
    never.take(&hours(0..GOOD + 6, |_| true));
    node.take(&hours(GOOD + 6..GOOD + 9, |_| true));
    never.take(&hours(GOOD + 6..GOOD + 9, |_| true));
    assert_eq!(
        node.engine.standing().channels[0].pairs,
        u64::from(GOOD + 9)
    );
    assert_alike(&node.correction(0), &never.correction(0), 0.0);
}

#[test]
fn a_stretch_begins_where_it_began() {
    let serviced = |node: &mut Node, until: u32| {
        node.take(&hours(0..100, |_| true));
        let event = ServiceEvent {
            by: "M. Ito".to_owned(),
            about: About::Channel("c0".to_owned()),
            at: Some(at(EVERY * 99.5)),
            act: Act::Cleaned,
            as_found: Vec::new(),
            as_left: vec![CheckPoint {
                indication: 7.2,
                reference: 7.0,
                expanded_uncertainty: Some(0.1),
            }],
            serial: None,
            certificate: None,
            note: String::new(),
        };
        node.take(&[order("s-1", Wish::Service(event))]);
        node.take(&hours(100..END, |hour| hour < until || !is_bad(hour)));
    };
    let (mut node, mut clean) = (Node::new(LONG), Node::new(LONG));
    serviced(&mut node, END);
    serviced(&mut clean, 0);
    accepted(&node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + BAD))]));
    let (found, expected) = (node.correction(0), clean.correction(0));
    assert_eq!((found.stretch, expected.stretch), (2, 2));
    // What the screen knew of the noise from the stretch before is learned anew.
    assert_alike(&found, &expected, 0.0);
}

#[test]
fn where_the_record_no_longer_reaches_back_it_says_so() {
    let (mut node, _) = both(LONG, is_bad);
    node.shell.forget_before(at(EVERY * 60.0));
    let said = node.take(&[quarantine("q-1", lab(), between(GOOD, GOOD + BAD))]);
    accepted(&said);
    let told = said.iter().filter(|output| {
        matches!(output, Output::Notice(it)
            if it.code == "refitted" && it.text.contains("no longer reaches back"))
    });
    assert_eq!(told.count(), 2);
    let left = END - BAD - 60;
    assert_eq!(node.correction(0).window.pairs, u64::from(left));
    // Without anything, what rests on the old fit is taken back.
    let (mut node, _) = both(LONG, is_bad);
    node.shell.forget_before(at(EVERY * f64::from(END)));
    let said = node.take(&[quarantine(
        "q-1",
        lab(),
        Interval {
            from: at(0.0),
            to: None,
        },
    )]);
    assert!(
        said.iter()
            .any(|output| matches!(output, Output::Withdrawn { .. }))
    );
    assert_eq!(node.engine.standing().channels[0].issue_number, None);
}

#[test]
fn a_constant_and_a_sensor_can_be_quarantined() {
    let (mut node, _) = both(LONG, is_bad);
    let day = between(GOOD, GOOD + BAD);
    let buffer = About::Reference("buffer".to_owned());
    let what = accepted(&node.take(&[quarantine("q-1", buffer, day)]));
    assert_eq!(what.refitted, ["c2"]);
    assert_eq!(node.correction(2).window.pairs, u64::from(END - BAD));
    let sensor = About::Channel("c0".to_owned());
    let what = accepted(&node.take(&[quarantine("q-2", sensor, day)]));
    assert_eq!(what.refitted, ["c0"]);
    assert_eq!(node.correction(0).window.pairs, u64::from(END - BAD));
    assert_eq!(node.correction(1).window.pairs, u64::from(END));
}

#[test]
fn an_interval_that_no_fit_holds_moves_nobody() {
    let (mut node, _) = both(WindowLength::Pairs(16), is_bad);
    let before = node.engine.standing().channels;
    let what = accepted(&node.take(&[quarantine("q-1", lab(), between(0, 24))]));
    assert_eq!(what.channels, ["c0", "c1"]);
    assert!(what.refitted.is_empty());
    assert_eq!(node.engine.standing().channels, before);
}

#[test]
fn what_cannot_be_done_is_refused_with_the_way_out() {
    let (mut node, _) = both(LONG, is_bad);
    let day = between(GOOD, GOOD + BAD);
    let turned = Interval {
        from: day.from,
        to: Some(day.from),
    };
    let wrong = [
        (
            quarantine("q-1", About::Reference("lap".to_owned()), day),
            "reference",
        ),
        (
            quarantine("q-2", About::Channel("lab".to_owned()), day),
            "channel",
        ),
        (
            quarantine("q-3", About::Influence("lab".to_owned()), day),
            "influence",
        ),
        (quarantine("q-4", lab(), turned), "to"),
        (quarantine("", lab(), day), "id"),
        (release("r-1", "q-9"), "quarantine"),
    ];
    let before = node.engine.state().clone();
    for (order, field) in wrong {
        let said = node.take(&[order]);
        let answer = answers(&said)[0];
        assert!(!answer.accepted);
        assert_eq!(answer.problems[0].field, field);
        assert_eq!(node.engine.state(), &before);
    }
    // Told twice, it is done once and answered alike.
    let order = quarantine("q-1", lab(), day);
    let first = accepted(&node.take(std::slice::from_ref(&order)));
    let said = node.take(&[order]);
    assert_eq!(accepted(&said), first);
    assert_eq!(said.len(), 1);
}
