//! The fail-safe ladder: a correction that can't be kept up to date is held with a growing
//! uncertainty, for a limited time, then withdrawn; trouble gone leads back; limits on size and
//! rate count as trouble.

use crate::support::{
    Noise, at, channel, constant, engine, feed, indication, node, reference, reference_value, span,
};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{
    About, Act, AlarmKind, AlarmState, Cause, Correction, Input, Order, Output, Rung, ServiceEvent,
    Status, Wish,
};
use holdtrue_engine::setup::{ChannelSetup, Clock, ReferenceKind, WindowLength};

const EVERY: f64 = 3600.0;

/// Feeds an engine whose channel has an error of `error` at each hour, against a reference that
/// gives its values only `while_known`.
fn run(
    channel: ChannelSetup,
    hours: u32,
    error: impl Fn(u32) -> f64,
    while_known: impl Fn(u32) -> bool,
) -> (Engine, Vec<Output>) {
    let mut lab = reference("lab", ReferenceKind::Measured);
    lab.stale_after = Some(span(3.0 * EVERY));
    let mut engine = engine(node(Clock::Readings, vec![lab], vec![channel]));
    let mut noise = Noise::new(81, 0.0);
    let mut outputs = Vec::new();
    for hour in 0..hours {
        let time = EVERY * f64::from(hour);
        let value = 7.0 + error(hour) + 0.1 * noise.draw();
        engine.step(&indication(0, time, value), &mut outputs);
        if while_known(hour) {
            engine.step(&reference_value(0, time, 7.0), &mut outputs);
        }
    }
    (engine, outputs)
}

fn setup() -> ChannelSetup {
    let mut channel = channel("a", 0);
    channel.fit.window = WindowLength::Pairs(64);
    channel.publish.max_age = span(12.0 * EVERY);
    channel
}

fn held(outputs: &[Output]) -> Vec<&Correction> {
    let documents = outputs.iter().filter_map(|output| match output {
        Output::Correction(document) if document.rung == Rung::Hold => Some(&**document),
        _ => None,
    });
    documents.collect()
}

fn withdrawals(outputs: &[Output]) -> Vec<f64> {
    let times = outputs.iter().filter_map(|output| match output {
        Output::Withdrawn { at: time, .. } => Some(time.since(at(0.0)).seconds() / EVERY),
        _ => None,
    });
    times.collect()
}

#[test]
fn a_silent_reference_leads_to_hold_and_then_to_withdrawal() {
    let mut channel = setup();
    channel.hold_limit = Some(span(20.0 * EVERY));
    channel.publish.step = 0.05;
    let (engine, outputs) = run(channel, 160, |_| 2.0, |hour| hour < 100);
    let held = held(&outputs);
    assert!(held.len() > 2, "{}", held.len());
    let begin = held[0].issued;
    for pair in held.windows(2) {
        let (before, after) = (pair[0], pair[1]);
        assert!(after.standard_uncertainty > before.standard_uncertainty);
        assert!(after.expanded_uncertainty > before.expanded_uncertainty);
        assert_eq!(after.issue_number, before.issue_number + 1);
    }
    for document in &held {
        assert_eq!(document.because, Some(Cause::ReferenceStale));
        assert!(document.valid_until <= begin.plus(span(20.0 * EVERY)));
        assert!(
            (document.correction + 2.0).abs() < 0.5,
            "{}",
            document.correction
        );
    }
    // Stale past three hours after the last value, held for twenty more: to the hour.
    assert_eq!(withdrawals(&outputs), [123.0]);
    let standing = &engine.standing().channels[0];
    assert_eq!(standing.rung, Rung::Withdrawn);
    assert_eq!(standing.because, Some(Cause::ReferenceStale));
    assert_eq!(standing.status(), Status::OutOfSpecification);
}

/// The node hears nothing for ten hours of each twenty, which excuses the reference's silence each
/// time; the correction that waits for it grows no younger by that. It is held for twenty hours
/// after its first hold, and does not come back without a pair.
#[test]
fn silences_of_the_node_do_not_prolong_the_hold() {
    let mut channel = setup();
    channel.hold_limit = Some(span(20.0 * EVERY));
    let mut lab = reference("lab", ReferenceKind::Measured);
    lab.stale_after = Some(span(3.0 * EVERY));
    let mut engine = engine(node(Clock::Readings, vec![lab], vec![channel]));
    let mut noise = Noise::new(81, 0.0);
    let mut outputs = Vec::new();
    for hour in (0..400).filter(|hour| *hour < 100 || hour % 20 < 10) {
        let time = EVERY * f64::from(hour);
        let value = 9.0 + 0.1 * noise.draw();
        engine.step(&indication(0, time, value), &mut outputs);
        if hour < 100 || hour == 380 {
            engine.step(&reference_value(0, time, 7.0), &mut outputs);
        }
    }
    let resumed = |it: &&Output| matches!(it, Output::Notice(notice) if notice.code == "resumed");
    assert!(outputs.iter().filter(resumed).count() > 10);
    let withdrawn = withdrawals(&outputs);
    assert!(
        matches!(withdrawn[..], [first] if (119.0..=140.0).contains(&first)),
        "{withdrawn:?}"
    );
    let issued = outputs.iter().filter_map(|output| match output {
        Output::Correction(document) => Some(document.issued.since(at(0.0)).seconds() / EVERY),
        _ => None,
    });
    let late: Vec<f64> = issued.filter(|hour| *hour > withdrawn[0]).collect();
    assert_eq!(late.first(), Some(&380.0), "a pair brings it back");
}

#[test]
fn a_reference_that_comes_back_in_time_ends_the_hold_without_a_gap() {
    let (engine, outputs) = run(setup(), 160, |_| 2.0, |hour| !(100..110).contains(&hour));
    assert!(!held(&outputs).is_empty());
    assert!(withdrawals(&outputs).is_empty());
    let standing = &engine.standing().channels[0];
    assert_eq!((standing.rung, standing.because), (Rung::Advise, None));
    assert_eq!(standing.status(), Status::Good);
}

#[test]
fn a_channel_without_a_fit_has_nothing_but_its_indications() {
    let (engine, outputs) = run(setup(), 20, |_| 2.0, |_| false);
    assert!(!outputs.iter().any(|it| matches!(it, Output::Correction(_))));
    let standing = &engine.standing().channels[0];
    assert_eq!(standing.rung, Rung::RawOnly);
    // Not only that nothing is known: why not.
    assert_eq!(standing.because, Some(Cause::ReferenceStale));
    let (engine, _) = run(setup(), 3, |_| 2.0, |_| false);
    let standing = &engine.standing().channels[0];
    assert_eq!(standing.because, Some(Cause::NothingLearned));
}

/// A stretch that ends while the reference is silent: what rested on it is taken back, once, and is
/// not said again as if it could still be held.
#[test]
fn a_stretch_that_ends_in_trouble_holds_nothing() {
    let (mut engine, before) = run(setup(), 110, |_| 2.0, |hour| hour < 100);
    assert!(!held(&before).is_empty());
    let cleaned = Input::Order(Box::new(Order {
        received: at(110.0 * EVERY),
        id: "1".to_owned(),
        reply_to: None,
        wish: Wish::Service(ServiceEvent {
            by: "night shift".to_owned(),
            about: About::Channel("a".to_owned()),
            at: Some(at(108.5 * EVERY)),
            act: Act::Cleaned,
            as_found: Vec::new(),
            as_left: Vec::new(),
            serial: None,
            certificate: None,
            note: String::new(),
        }),
    }));
    let said = feed(&mut engine, [&cleaned]);
    assert!(!said.iter().any(|it| matches!(it, Output::Correction(_))));
    let why: Vec<&str> = said
        .iter()
        .filter_map(|output| match output {
            Output::Withdrawn { why, .. } => Some(why.as_str()),
            _ => None,
        })
        .collect();
    assert!(
        matches!(why[..], [why] if why.contains("no longer holds: the sensor was cleaned")),
        "{why:?}"
    );
    let standing = &engine.standing().channels[0];
    assert_eq!(standing.rung, Rung::Withdrawn);
    assert_eq!(standing.because, Some(Cause::ReferenceStale), "the gravest");
    assert_eq!(standing.issue_number, None);
}

/// A sensor that needs more correction than permitted: no document exceeds the limit, the last one
/// below it is held, then withdrawn; the alarm says it where the limit is one of its own.
#[test]
fn a_correction_is_never_larger_than_permitted() {
    for own_limit in [None, Some(3.0)] {
        let mut channel = setup();
        channel.max_permissible_error = Some(own_limit.map_or(3.0, |_| 50.0));
        channel.max_correction = own_limit;
        channel.hold_limit = Some(span(20.0 * EVERY));
        let (engine, outputs) = run(channel, 400, |hour| 0.015 * f64::from(hour), |_| true);
        let largest = outputs.iter().filter_map(|output| match output {
            Output::Correction(document) if document.rung == Rung::Advise => {
                Some(document.correction.abs())
            }
            _ => None,
        });
        assert!(largest.fold(0.0, f64::max) <= 3.0);
        let held = held(&outputs);
        assert!(!held.is_empty());
        assert!(
            held.iter()
                .all(|it| it.because == Some(Cause::CorrectionSize))
        );
        assert_eq!(withdrawals(&outputs).len(), 1);
        assert_eq!(engine.standing().channels[0].rung, Rung::Withdrawn);
        let kinds = |kind| {
            let of_kind = outputs.iter().filter(|output| match output {
                Output::Alarm(change) => {
                    change.kind == kind && change.state == AlarmState::Unacknowledged
                }
                _ => false,
            });
            of_kind.count()
        };
        let own = usize::from(own_limit.is_some());
        assert_eq!(kinds(AlarmKind::CorrectionLimit), own);
        assert_eq!(kinds(AlarmKind::ErrorLimit), 1 - own);
    }
}

/// A screen that is locked out makes the correction doubtful: it is held, not followed.
#[test]
fn a_locked_out_screen_holds_the_correction() {
    let mut channel = setup();
    channel.steps = None;
    channel.fit.window = WindowLength::Pairs(512);
    let mut engine = engine(node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![channel],
    ));
    let mut noise = Noise::new(82, 0.0);
    let mut outputs = Vec::new();
    let mut minute = |index: u32, error: f64| -> Input {
        indication(0, 60.0 * f64::from(index), error + noise.draw())
    };
    for index in 0..400 {
        engine.step(&minute(index, 10.0), &mut outputs);
    }
    outputs.clear();
    let mut was_locked_out = false;
    for index in 400..410 {
        engine.step(&minute(index, 60.0), &mut outputs);
        if engine.standing().channels[0].locked_out {
            let standing = &engine.standing().channels[0];
            assert_eq!(standing.because, Some(Cause::ScreenLockedOut));
            assert_eq!(standing.rung, Rung::Hold);
            was_locked_out = true;
        }
    }
    assert!(was_locked_out && !held(&outputs).is_empty());
    for document in held(&outputs) {
        assert!(
            (document.correction + 10.0).abs() < 2.0,
            "{}",
            document.correction
        );
    }
}
