//! Service events: the stretch ends when the work was done, what was found validates the model,
//! what was left begins the next stretch, and an order is done once however often it comes.

use crate::support::{
    Noise, at, channel, constant, engine, feed, indication, node, reference, reference_value, span,
};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{
    About, Act, AlarmKind, AlarmState, CheckPoint, Correction, Input, Order, OrderAnswer, Output,
    Problem, RefusedReason, ReplyTo, ServiceEvent, Serviced, Validation, Wish,
};
use holdtrue_engine::setup::{ChannelSetup, Clock, ReferenceKind, Setup, WindowLength};
use holdtrue_engine::time::Timestamp;

/// Seconds between readings.
const EVERY: f64 = 3600.0;
const DAY: f64 = 86_400.0;

/// A channel against a constant 7, window of 30 days.
fn ph() -> ChannelSetup {
    let mut ph = channel("ph", 0);
    ph.fit.window = WindowLength::Time(span(30.0 * DAY));
    ph.max_permissible_error = Some(0.5);
    ph.publish.max_age = span(DAY);
    ph
}

fn setup(channel: ChannelSetup) -> Setup {
    let mut buffer = reference("buffer", constant(7.0));
    buffer.uncertainty_common = 0.01;
    node(Clock::Readings, vec![buffer], vec![channel])
}

/// Readings from one time to another (hours), with the error that `error` gives for each hour.
fn readings(from: u32, to: u32, mut error: impl FnMut(u32) -> f64) -> Vec<Input> {
    (from..to)
        .map(|hour| indication(0, EVERY * f64::from(hour), 7.0 + error(hour)))
        .collect()
}

/// An event of the channel `ph`, `hours` after the beginning.
fn event(act: Act, hours: f64) -> ServiceEvent {
    ServiceEvent {
        by: "night shift".to_owned(),
        about: About::Channel("ph".to_owned()),
        at: Some(at(EVERY * hours)),
        act,
        as_found: Vec::new(),
        as_left: Vec::new(),
        serial: None,
        certificate: None,
        note: String::new(),
    }
}

fn order(id: &str, event: ServiceEvent) -> Input {
    Input::Order(Box::new(Order {
        received: at(1000.0 * DAY),
        id: id.to_owned(),
        reply_to: None,
        wish: Wish::Service(event),
    }))
}

fn point(indication: f64, reference: f64, expanded: f64) -> CheckPoint {
    CheckPoint {
        indication,
        reference,
        expanded_uncertainty: Some(expanded),
    }
}

/// The one answer among what was said.
fn answer(said: &[Output]) -> &OrderAnswer {
    let mut answers = said.iter().filter_map(|output| match output {
        Output::Answer(answer) => Some(&**answer),
        _ => None,
    });
    let answer = answers.next().expect("every order is answered");
    assert!(answers.next().is_none(), "once");
    answer
}

/// Gives an order and returns what it led to, and everything that was said.
fn done(engine: &mut Engine, order: &Input) -> (Serviced, Vec<Output>) {
    let said = feed(engine, [order]);
    let answer = answer(&said);
    assert!(answer.accepted, "{}", answer.text);
    assert!(answer.problems.is_empty());
    (answer.service.clone().expect("of a service"), said)
}

/// Gives an order that must be refused and change nothing; its problems.
fn refused(engine: &mut Engine, order: &Input) -> Vec<Problem> {
    let before = engine.state().clone();
    let said = feed(engine, [order]);
    let answer = answer(&said);
    assert!(!answer.accepted, "{}", answer.text);
    assert_eq!(answer.service, None);
    assert_eq!(said.len(), 1, "nothing but the answer: {said:?}");
    assert!(*engine.state() == before, "a refused order changes nothing");
    for problem in &answer.problems {
        assert!(answer.text.contains(&problem.way_out), "{}", answer.text);
    }
    answer.problems.clone()
}

fn validations(said: &[Output]) -> Vec<&Validation> {
    said.iter()
        .filter_map(|output| match output {
            Output::Validation(validation) => Some(&**validation),
            _ => None,
        })
        .collect()
}

fn corrections(said: &[Output]) -> Vec<&Correction> {
    said.iter()
        .filter_map(|output| match output {
            Output::Correction(correction) => Some(&**correction),
            _ => None,
        })
        .collect()
}

fn withdrawn(said: &[Output]) -> usize {
    said.iter()
        .filter(|output| matches!(output, Output::Withdrawn { .. }))
        .count()
}

/// A drift of 0.01 a day for 20 days, then an adjustment to zero that is told at once.
#[test]
fn an_adjustment_ends_the_stretch_and_validates_the_model() {
    let mut noise = Noise::new(21, 0.0);
    let mut engine = engine(setup(ph()));
    let drift = |hour: u32| 0.01 * f64::from(hour) / 24.0;
    feed(
        &mut engine,
        &readings(0, 480, |hour| drift(hour) + 0.005 * noise.draw()),
    );
    assert_eq!(engine.standing().channels[0].pairs, 480);
    let mut adjusted = event(Act::Adjusted, 480.0);
    adjusted.as_found = vec![point(7.205, 7.0, 0.02)];
    adjusted.as_left = vec![point(7.002, 7.0, 0.02), point(6.998, 7.0, 0.02)];
    let (serviced, said) = done(&mut engine, &order("a-1", adjusted));
    assert_eq!(serviced.stretches, [("ph".to_owned(), 2)]);
    let comparison = serviced.comparison.expect("there was a model");
    assert!(
        (comparison.predicted_error - 0.2).abs() < 0.01,
        "{comparison:?}"
    );
    assert!(comparison.satisfactory && comparison.en.abs() <= 1.0);
    // En by hand from the published parts: common and fit in U, only the stated U of the buffer in
    // the other (no noise and no resolution are declared).
    let found = &comparison.points[0];
    assert!((found.error - 0.205).abs() < 1e-12 && (found.uncertainty - 0.02).abs() < 1e-12);
    let expected = (comparison.predicted_error - 0.205)
        / (comparison.predicted_uncertainty.powi(2) + 0.02_f64.powi(2)).sqrt();
    assert!((found.en - expected).abs() < 1e-9);
    // k is at least the normal quantile 1.96.
    assert!(
        comparison.predicted_uncertainty >= 1.95 * 0.01,
        "the common part is in it"
    );
    let validation = validations(&said)[0];
    assert_eq!((validation.stretch, validation.order.as_str()), (1, "a-1"));
    assert_eq!(validation.comparison, comparison);
    // The as-left readings are the only pairs of the new stretch; the old correction is gone.
    let standing = &engine.standing().channels[0];
    assert_eq!(standing.pairs, 2);
    for document in corrections(&said) {
        assert_eq!(document.stretch, 2);
        assert!(document.correction.abs() < 0.05, "{document:?}");
    }
    let said = feed(&mut engine, &readings(481, 600, |_| 0.005 * noise.draw()));
    let last = corrections(&said)
        .last()
        .copied()
        .expect("a correction")
        .clone();
    assert_eq!(last.stretch, 2);
    assert!(
        last.correction.abs() < 0.01,
        "nothing of the old drift: {last:?}"
    );
    assert!(last.window.from >= at(480.0 * EVERY));
}

/// The same adjustment, told two days later: what was sampled since belongs to the new stretch.
#[test]
fn told_late_the_stretch_still_ends_when_the_work_was_done() {
    let mut noise = Noise::new(22, 0.0);
    let mut nobody_looks = ph();
    nobody_looks.steps = None;
    let mut engine = engine(setup(nobody_looks));
    feed(
        &mut engine,
        &readings(0, 400, |_| 0.3 + 0.005 * noise.draw()),
    );
    let late = readings(400, 448, |_| 0.005 * noise.draw());
    feed(&mut engine, &late);
    let mut adjusted = event(Act::Adjusted, 399.5);
    adjusted.as_found = vec![point(7.3, 7.0, 0.02)];
    let (serviced, said) = done(&mut engine, &order("a-1", adjusted));
    let comparison = serviced.comparison.expect("there was a model");
    assert!(
        (comparison.predicted_error - 0.3).abs() < 0.01,
        "the model of before, not the mixture: {comparison:?}"
    );
    assert!(comparison.satisfactory);
    let last = *corrections(&said).last().expect("replaced at once");
    assert_eq!(last.stretch, 2);
    assert_eq!(last.window.pairs, 48);
    assert!(last.correction.abs() < 0.01, "{last:?}");
    assert_eq!(withdrawn(&said), 0);
}

/// Steps of 0.3 at hour 400 that were found before anybody told: the channel with one, and what was
/// said until hour 448.
fn stepped(seed: u64) -> (Engine, Vec<Output>, Noise) {
    let mut noise = Noise::new(seed, 0.0);
    let mut engine = engine(setup(ph()));
    let level = |hour: u32| if hour < 400 { 0.3 } else { 0.0 };
    let said = feed(
        &mut engine,
        &readings(0, 448, |hour| level(hour) + 0.005 * noise.draw()),
    );
    let steps = said.iter().filter(|it| matches!(it, Output::Step(_)));
    assert_eq!(steps.count(), 1);
    (engine, said, noise)
}

/// Whose alarms of a step are raised and cleared, with what they say.
fn step_alarms(said: &[Output]) -> Vec<(AlarmState, &str)> {
    said.iter()
        .filter_map(|output| match output {
            Output::Alarm(change) if change.kind == AlarmKind::Step => {
                Some((change.state, change.text.as_str()))
            }
            _ => None,
        })
        .collect()
}

/// Told at the hour before, at the step, or an hour or half a day early by a bad watch: the service
/// takes the step over, with its model, its as-left readings and its alarm.
#[test]
fn a_service_explains_the_step_that_was_found_before_it_was_told() {
    for hours in [388.5, 398.5, 399.5, 400.0] {
        let (mut engine, _, mut noise) = stepped(31);
        assert_eq!(engine.standing().channels[0].pairs, 48);
        let mut adjusted = event(Act::Adjusted, hours);
        adjusted.as_found = vec![point(7.3, 7.0, 0.02)];
        adjusted.as_left = vec![point(7.001, 7.0, 0.02)];
        let (serviced, said) = done(&mut engine, &order("a-1", adjusted));
        assert_eq!(serviced.stretches, [("ph".to_owned(), 2)], "{hours}");
        let comparison = serviced.comparison.expect("the model of before the step");
        assert!((comparison.predicted_error - 0.3).abs() < 0.01);
        assert!(comparison.satisfactory, "{comparison:?}");
        assert_eq!(validations(&said)[0].stretch, 1);
        let cleared = step_alarms(&said);
        assert!(
            matches!(cleared[..], [(AlarmState::Normal, text)] if text.contains("adjusted at")),
            "{cleared:?}"
        );
        assert_eq!(engine.standing().alarms, []);
        assert_eq!(
            withdrawn(&said),
            0,
            "the pairs since then carry the correction"
        );
        // The as-left reading, and what came since the step.
        assert_eq!(engine.standing().channels[0].pairs, 49, "{hours}");
        // The stretch goes on as any other does.
        let said = feed(&mut engine, &readings(448, 500, |_| 0.005 * noise.draw()));
        assert!(step_alarms(&said).is_empty());
        let last = corrections(&said).last().copied();
        assert!(last.is_none_or(|last| last.stretch == 2));
    }
}

/// A service of the day before, or one that followed the alarm, is not what made the step.
#[test]
fn a_service_at_another_time_explains_no_step() {
    let (mut engine, _, _) = stepped(32);
    let before = engine.standing();
    let mut earlier = event(Act::Adjusted, 387.0);
    earlier.as_found = vec![point(7.3, 7.0, 0.02)];
    let (serviced, said) = done(&mut engine, &order("a-1", earlier));
    assert_eq!((serviced.stretches.len(), serviced.comparison), (0, None));
    assert_eq!(said.len(), 1, "{said:?}");
    assert_eq!(engine.standing(), before, "the step's alarm stands");

    let mut later = event(Act::Calibrated, 440.5);
    later.as_found = vec![point(7.001, 7.0, 0.02)];
    let (serviced, said) = done(&mut engine, &order("a-2", later));
    assert_eq!(serviced.stretches, [("ph".to_owned(), 3)]);
    assert_eq!(validations(&said)[0].stretch, 2);
    assert!(serviced.comparison.expect("a model").satisfactory);
}

/// Another sensor in place made the step: nothing of the old one is left, and what came since the
/// step is the new one's.
#[test]
fn an_exchange_explains_a_step_as_well() {
    let (mut engine, _, _) = stepped(33);
    let mut replaced = event(Act::Replaced, 399.5);
    replaced.serial = Some("B-2".to_owned());
    let (serviced, said) = done(&mut engine, &order("a-1", replaced));
    assert_eq!(serviced.stretches, [("ph".to_owned(), 2)]);
    assert_eq!(step_alarms(&said).len(), 1);
    assert_eq!(engine.standing().alarms, []);
    assert_eq!(engine.standing().channels[0].pairs, 48);
}

/// The reference was set right; both channels saw that as their own step.
#[test]
fn a_service_of_the_reference_explains_the_steps_of_its_channels() {
    let mut noise = Noise::new(34, 0.0);
    let lab = reference("lab", ReferenceKind::Measured);
    let channels = ["a", "b"].map(|name| ChannelSetup {
        name: name.to_owned(),
        ..ph()
    });
    let mut engine = engine(node(Clock::Readings, vec![lab], channels.to_vec()));
    let mut said = Vec::new();
    for hour in 0..448_u32 {
        let time = EVERY * f64::from(hour);
        for channel in 0..2 {
            let value = 7.0 + 0.005 * noise.draw();
            said.extend(feed(&mut engine, [&indication(channel, time, value)]));
        }
        let value = if hour < 400 { 6.7 } else { 7.0 };
        said.extend(feed(&mut engine, [&reference_value(0, time, value)]));
    }
    assert_eq!(step_alarms(&said).len(), 2);
    let mut adjusted = event(Act::Adjusted, 399.5);
    adjusted.about = About::Reference("lab".to_owned());
    let (serviced, said) = done(&mut engine, &order("1", adjusted));
    let ended = [("a".to_owned(), 2), ("b".to_owned(), 2)];
    assert_eq!(serviced.stretches, ended);
    assert_eq!(step_alarms(&said).len(), 2);
    assert_eq!(engine.standing().alarms, []);
    assert_eq!(withdrawn(&said), 0);
}

/// An exchange told after what was done to the new sensor: the newer number and result stay.
#[test]
fn what_is_told_late_overwrites_nothing_newer() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 200, |_| 0.1));
    let mut newer = event(Act::Calibrated, 150.5);
    newer.serial = Some("B-2".to_owned());
    newer.as_found = vec![point(7.3, 7.0, 0.02)];
    done(&mut engine, &order("1", newer));
    let mut older = event(Act::Calibrated, 50.5);
    older.serial = Some("B-2".to_owned());
    older.as_found = vec![point(7.001, 7.0, 0.02)];
    done(&mut engine, &order("2", older));
    let said = feed(&mut engine, &readings(200, 300, |_| 0.1));
    let found = said.iter().rev().find_map(|output| match output {
        Output::Outlook(outlook) => outlook.recalibration.staircase,
        _ => None,
    });
    let found = found.expect("a result as found");
    assert_eq!(found.at, at(150.5 * EVERY));
    assert!((found.error - 0.3).abs() < 1e-9);
}

#[test]
fn a_model_that_is_wrong_is_told_so() {
    let mut noise = Noise::new(23, 0.0);
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 300, |_| 0.005 * noise.draw()));
    let mut calibrated = event(Act::Calibrated, 300.0);
    calibrated.as_found = vec![point(7.0, 7.0, 0.02), point(10.4, 10.0, 0.02)];
    calibrated.certificate = Some("C-7".to_owned());
    let (serviced, said) = done(&mut engine, &order("c-1", calibrated));
    let comparison = serviced.comparison.expect("there was a model");
    assert!(!comparison.satisfactory);
    assert!(comparison.points[0].en.abs() <= 1.0);
    assert_eq!(
        comparison.en.to_bits(),
        comparison.points[1].en.to_bits(),
        "the worst point counts"
    );
    assert!(comparison.en < -1.0, "expected less than was found");
    assert_eq!(validations(&said)[0].certificate.as_deref(), Some("C-7"));
    assert!(answer(&said).text.contains("did not hold"));
}

#[test]
fn without_a_model_or_readings_nothing_is_validated() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 1, |_| 0.1));
    let mut calibrated = event(Act::Calibrated, 0.5);
    calibrated.as_found = vec![point(7.0, 7.0, 0.02)];
    let (serviced, said) = done(&mut engine, &order("c-1", calibrated));
    assert_eq!(serviced.comparison, None);
    assert!(validations(&said).is_empty());
    feed(&mut engine, &readings(1, 100, |_| 0.1));
    let (serviced, said) = done(&mut engine, &order("c-2", event(Act::Calibrated, 100.0)));
    assert_eq!((serviced.comparison, validations(&said).len()), (None, 0));
    assert_eq!(
        withdrawn(&said),
        1,
        "the correction rests on what was before"
    );
}

#[test]
fn a_cleaning_splits_fouling_from_drift_and_counts_the_teeth() {
    let mut noise = Noise::new(24, 0.0);
    let mut engine = engine(setup(ph()));
    // 0.15 of fouling in ten days, 0.02 of drift, cleaned three times.
    let tooth = |hour: u32| 0.02 + 0.15 * f64::from(hour % 240) / 240.0;
    for visit in 1..=3_u32 {
        let until = 240 * visit;
        let inputs = readings(until - 240, until, |hour| {
            tooth(hour) + 0.003 * noise.draw()
        });
        feed(&mut engine, &inputs);
        let mut cleaned = event(Act::Cleaned, f64::from(until) - 0.5);
        // The ambient value rises by 0.1 during the cleaning.
        cleaned.as_found = vec![point(7.27, 7.1, 0.02)];
        cleaned.as_left = vec![point(7.22, 7.2, 0.02)];
        let (serviced, _) = done(&mut engine, &order(&format!("v-{visit}"), cleaned));
        let fouling = serviced.fouling.expect("read before and after");
        assert!((fouling.fouling_error - 0.15).abs() < 1e-9);
        assert_eq!(fouling.drift_error, None, "no standard was read");
        let comparison = serviced.comparison.expect("there was a model");
        assert!(comparison.satisfactory, "tooth {visit}: {comparison:?}");
        let teeth = serviced.saw_tooth.expect("cleaned");
        assert_eq!(teeth.cleanings, u64::from(visit));
        assert!((teeth.mean_fouling.expect("measured") - 0.15).abs() < 1e-9);
        let days = teeth.mean_interval_days;
        assert_eq!(days, (visit > 1).then_some(10.0));
        assert_eq!(serviced.stretches, [("ph".to_owned(), visit + 1)]);
    }
    // A check in a standard two hours later, before the calibration: what remained is drift.
    let mut calibrated = event(Act::Calibrated, 721.5);
    calibrated.as_found = vec![point(7.02, 7.0, 0.01)];
    let (serviced, said) = done(&mut engine, &order("v-4", calibrated));
    let fouling = serviced.fouling.expect("at the same visit");
    assert!((fouling.fouling_error - 0.15).abs() < 1e-9);
    assert!((fouling.drift_error.expect("a standard") - 0.02).abs() < 1e-9);
    assert!(
        answer(&said).text.contains("drift 0.02"),
        "{}",
        answer(&said).text
    );
}

/// The correction never smooths across a cleaning: told, the saw-tooth is followed.
#[test]
fn a_told_saw_tooth_is_corrected_better_than_an_untold_one() {
    let run = |told: bool| {
        let mut noise = Noise::new(25, 0.0);
        let mut nobody_looks = ph();
        nobody_looks.steps = None;
        let mut engine = engine(setup(nobody_looks));
        let tooth = |hour: u32| 0.2 * f64::from(hour % 240) / 240.0;
        let (mut sum, mut count) = (0.0, 0);
        for hour in 0..1440_u32 {
            let input = indication(
                0,
                EVERY * f64::from(hour),
                7.0 + tooth(hour) + 0.005 * noise.draw(),
            );
            if told && hour > 0 && hour.is_multiple_of(240) {
                let id = format!("v-{hour}");
                done(
                    &mut engine,
                    &order(&id, event(Act::Cleaned, f64::from(hour) - 0.5)),
                );
            }
            feed(&mut engine, [&input]);
            // From the second tooth on, at the newest instant.
            if hour >= 240 {
                let standing = &engine.standing().channels[0];
                let left = tooth(hour) + standing.correction.unwrap_or(0.0);
                sum += left * left;
                count += 1;
            }
        }
        (sum / f64::from(count)).sqrt()
    };
    let (told, untold) = (run(true), run(false));
    // Uncorrected the tooth has an RMS of 0.2/√3 = 0.115; a quarter of that may be left.
    assert!(told < 0.25 * 0.115, "{told}");
    assert!(untold > 3.0 * told, "{untold} against {told}");
}

#[test]
fn an_order_is_done_once_however_often_it_comes() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 100, |_| 0.1));
    let first = order("a-1", event(Act::Adjusted, 99.5));
    let (_, said) = done(&mut engine, &first);
    let first_answer = answer(&said).clone();
    feed(&mut engine, &readings(100, 110, |_| 0.0));
    let before = engine.state().clone();
    // The broker delivers it again, later and for another asker.
    let Input::Order(again) = &first else {
        unreachable!()
    };
    let reply_to = Some(ReplyTo {
        topic: "tool/7".to_owned(),
        correlation: Some(vec![7]),
    });
    let again = Input::Order(Box::new(Order {
        received: at(2000.0 * DAY),
        reply_to: reply_to.clone(),
        ..(**again).clone()
    }));
    let said = feed(&mut engine, [&again]);
    let expected = OrderAnswer {
        reply_to,
        ..first_answer
    };
    assert_eq!(said, [Output::Answer(Box::new(expected))]);
    assert!(*engine.state() == before, "nothing is done twice");
    // Another order under the same id is refused, not taken for a repetition.
    let other = order("a-1", event(Act::Cleaned, 105.0));
    let problems = refused(&mut engine, &other);
    assert_eq!(problems[0].field, "id");
}

/// Without a time of its own an order means "now"; told again, it still is the same order.
#[test]
fn an_order_without_a_time_is_known_again() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 100, |_| 0.1));
    let mut adjusted = event(Act::Adjusted, 0.0);
    adjusted.at = None;
    let first = order("a-1", adjusted);
    let (serviced, said) = done(&mut engine, &first);
    assert_eq!(
        serviced.performed,
        at(99.0 * EVERY),
        "the newest known time"
    );
    let expected = answer(&said).clone();
    feed(&mut engine, &readings(100, 110, |_| 0.0));
    assert_eq!(answer(&feed(&mut engine, [&first])), &expected);
}

#[test]
fn what_cannot_be_done_is_refused_with_all_reasons_at_once() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 1000, |_| 0.1));
    let mut bad = event(Act::Adjusted, 5000.0);
    bad.about = About::Channel("hp".to_owned());
    bad.as_found = vec![point(f64::NAN, 7.0, 0.1), point(7.0, 1e300, -1.0)];
    let problems = refused(&mut engine, &order("", bad));
    let fields: Vec<&str> = problems
        .iter()
        .map(|problem| problem.field.as_str())
        .collect();
    let expected = [
        "id",
        "channel",
        "at",
        "as_found[0].indication",
        "as_found[1].reference",
        "as_found[1].uncertainty",
    ];
    assert_eq!(fields, expected);
    assert!(problems[1].way_out.contains("there are ph"), "{problems:?}");

    let mut mixed_up = event(Act::Adjusted, 999.0);
    mixed_up.about = About::Reference("ph".to_owned());
    let problems = refused(&mut engine, &order("1", mixed_up));
    assert!(
        problems[0].way_out.contains("write `channel`"),
        "{problems:?}"
    );

    // The window is 30 days, 720 h.
    let problems = refused(&mut engine, &order("2", event(Act::Adjusted, 270.0)));
    assert!(
        problems[0].way_out.contains("looks back on"),
        "{problems:?}"
    );
    let (serviced, _) = done(&mut engine, &order("3", event(Act::Adjusted, 300.0)));
    assert_eq!(serviced.stretches, [("ph".to_owned(), 2)]);

    let mut early = event(Act::Adjusted, 999.0);
    early.at = Some(Timestamp(-1));
    let problems = refused(&mut engine, &order("4", early));
    assert!(problems.iter().any(|it| it.way_out.contains("before 1970")));

    let unusable = Input::Order(Box::new(Order {
        received: at(0.0),
        id: "5".to_owned(),
        reply_to: None,
        wish: Wish::Unusable(vec![Problem {
            field: "act".to_owned(),
            value: "polished".to_owned(),
            way_out: "no act of service".to_owned(),
        }]),
    }));
    assert_eq!(refused(&mut engine, &unusable).len(), 1);
}

/// Live, a time is compared with the clock: five minutes are forgiven, more is refused.
#[test]
fn live_the_future_is_refused() {
    let mut live = setup(ph());
    live.clock = Clock::Live;
    let mut engine = engine(live);
    feed(&mut engine, &readings(0, 100, |_| 0.1));
    let told = |hours: f64| {
        let Input::Order(mut order) = order(&hours.to_string(), event(Act::Cleaned, hours)) else {
            unreachable!()
        };
        order.received = at(99.0 * EVERY);
        Input::Order(order)
    };
    let problems = refused(&mut engine, &told(99.2));
    assert!(problems[0].way_out.contains("future"), "{problems:?}");
    done(&mut engine, &told(99.05));
}

#[test]
fn another_sensor_inherits_nothing_but_the_counts() {
    let mut noise = Noise::new(26, 0.0);
    let mut far_off = ph();
    far_off.max_correction = Some(10.0);
    let mut engine = engine(setup(far_off));
    let said = feed(
        &mut engine,
        &readings(0, 200, |_| 0.7 + 0.002 * noise.draw()),
    );
    let issued = corrections(&said)
        .last()
        .expect("a correction")
        .issue_number;
    let raised = |said: &[Output], state: AlarmState| {
        said.iter().any(|output| {
            matches!(output, Output::Alarm(change)
                if change.kind == AlarmKind::ErrorLimit && change.state == state)
        })
    };
    assert!(raised(&said, AlarmState::Unacknowledged));
    done(&mut engine, &order("1", event(Act::Cleaned, 199.2)));
    feed(
        &mut engine,
        &readings(200, 260, |_| 0.7 + 0.002 * noise.draw()),
    );

    let problems = refused(&mut engine, &order("2", event(Act::Replaced, 259.5)));
    assert_eq!(problems[0].field, "serial");
    let mut replaced = event(Act::Replaced, 259.5);
    replaced.serial = Some("B-2".to_owned());
    let (serviced, said) = done(&mut engine, &order("3", replaced.clone()));
    assert_eq!(serviced.stretches, [("ph".to_owned(), 3)]);
    assert_eq!(
        serviced.saw_tooth, None,
        "the cleanings were the other one's"
    );
    assert_eq!(withdrawn(&said), 1);
    assert!(
        raised(&said, AlarmState::Normal),
        "the alarm was about the other one"
    );
    assert_eq!(engine.standing().alarms, []);
    assert_eq!(engine.standing().channels[0].pairs, 0);

    // Ten times the noise of the old sensor: what the screen knew of that would keep it out.
    let said = feed(&mut engine, &readings(260, 300, |_| 0.02 * noise.draw()));
    let kept_out = said
        .iter()
        .filter(|output| matches!(output, Output::Pair(fate) if fate.rejected.is_some()));
    assert_eq!(kept_out.count(), 0);
    let first = corrections(&said)[0];
    assert!(first.issue_number > issued, "a number is never used twice");
    assert_eq!(first.stretch, 3);

    // The same serial number again, and a wrong one.
    replaced.at = Some(at(299.5 * EVERY));
    let problems = refused(&mut engine, &order("4", replaced));
    assert!(
        problems[0].way_out.contains("known to be in place"),
        "{problems:?}"
    );
    let mut wrong = event(Act::Cleaned, 299.5);
    wrong.serial = Some("B-3".to_owned());
    let problems = refused(&mut engine, &order("5", wrong));
    assert!(problems[0].way_out.contains("is B-2"), "{problems:?}");
}

/// A service keeps what is known of the noise of the same sensor: an outlier right after it is
/// still one.
#[test]
fn the_same_sensor_keeps_its_noise() {
    let mut noise = Noise::new(27, 0.0);
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 200, |_| 0.002 * noise.draw()));
    done(&mut engine, &order("1", event(Act::Cleaned, 199.5)));
    let said = feed(
        &mut engine,
        &readings(200, 215, |hour| {
            if hour == 212 {
                0.1
            } else {
                0.002 * noise.draw()
            }
        }),
    );
    let kept_out: Vec<Timestamp> = said
        .iter()
        .filter_map(|output| match output {
            Output::Pair(fate) if fate.rejected.is_some() => Some(fate.phenomenon),
            _ => None,
        })
        .collect();
    assert_eq!(kept_out, [at(212.0 * EVERY)]);
}

#[test]
fn a_service_explains_a_locked_out_screen() {
    let mut noise = Noise::new(28, 0.0);
    let mut nobody_looks = ph();
    nobody_looks.steps = None;
    let mut engine = engine(setup(nobody_looks));
    feed(&mut engine, &readings(0, 200, |_| 0.002 * noise.draw()));
    feed(
        &mut engine,
        &readings(200, 206, |_| 0.4 + 0.002 * noise.draw()),
    );
    let (_, said) = done(&mut engine, &order("1", event(Act::Adjusted, 199.5)));
    assert!(!engine.standing().channels[0].locked_out);
    assert_eq!(engine.standing().alarms, [], "nothing is left to look at");
    let document = *corrections(&said).last().expect("six pairs since");
    assert!((document.correction + 0.4).abs() < 0.01);
}

#[test]
fn a_reference_that_was_served_ends_the_stretches_of_its_channels_only() {
    let lab = |name: &str| {
        let mut lab = reference(name, ReferenceKind::Measured);
        lab.uncertainty_each = 0.01;
        lab
    };
    let channels = ["a", "b", "c"].into_iter().zip([0, 0, 1]);
    let channels = channels.map(|(name, of)| ChannelSetup {
        name: name.to_owned(),
        reference: holdtrue_engine::setup::ReferenceId(of),
        ..ph()
    });
    let mut engine = engine(node(
        Clock::Readings,
        vec![lab("lab/1"), lab("lab/2")],
        channels.collect(),
    ));
    for hour in 0..100_u32 {
        let time = EVERY * f64::from(hour);
        for channel in 0..3 {
            feed(&mut engine, [&indication(channel, time, 7.1)]);
        }
        for reference in 0..2 {
            feed(&mut engine, [&reference_value(reference, time, 7.0)]);
        }
    }
    let mut calibrated = event(Act::Calibrated, 99.5);
    calibrated.about = About::Reference("lab/1".to_owned());
    let (serviced, said) = done(&mut engine, &order("1", calibrated));
    let ended = [("a".to_owned(), 2), ("b".to_owned(), 2)];
    assert_eq!(serviced.stretches, ended);
    assert_eq!(withdrawn(&said), 2);
    let pairs: Vec<u64> = engine
        .standing()
        .channels
        .iter()
        .map(|it| it.pairs)
        .collect();
    assert_eq!(pairs, [0, 0, 100]);
}

/// A laboratory result from before the service comes after it: it belongs to the other stretch.
#[test]
fn what_comes_late_from_before_the_service_stays_out_of_the_next_stretch() {
    let mut patient = ph();
    patient.lateness = span(30.0 * DAY);
    let mut engine = engine(setup(patient));
    feed(&mut engine, &readings(0, 100, |_| 0.1));
    done(&mut engine, &order("1", event(Act::Adjusted, 99.5)));
    feed(&mut engine, &readings(100, 110, |_| 0.0));
    let said = feed(&mut engine, [&indication(0, 50.5 * EVERY, 7.1)]);
    let fates: Vec<_> = said
        .iter()
        .filter_map(|output| match output {
            Output::Pair(fate) => Some(fate.rejected.expect("kept out").reason),
            _ => None,
        })
        .collect();
    assert_eq!(fates, [RefusedReason::Late]);
    assert_eq!(engine.standing().channels[0].pairs, 10);
}

/// Two services told in the wrong order: the later one has ended the stretch of the earlier.
#[test]
fn a_service_before_the_present_stretch_is_noted_and_changes_no_fit() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 200, |_| 0.1));
    done(&mut engine, &order("1", event(Act::Cleaned, 150.5)));
    let before = engine.standing();
    let mut earlier = event(Act::Cleaned, 50.5);
    earlier.as_found = vec![point(7.4, 7.0, 0.02)];
    let (serviced, said) = done(&mut engine, &order("2", earlier));
    assert_eq!(serviced.stretches, []);
    assert_eq!(serviced.comparison, None, "that model is gone");
    assert_eq!(serviced.saw_tooth.expect("counted").cleanings, 2);
    assert_eq!(said.len(), 1, "{said:?}");
    assert_eq!(engine.standing(), before);
}

/// Editing what the fit looks back on begins the channel anew; its sensor is the same one.
#[test]
fn a_changed_configuration_does_not_forget_the_sensor() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 100, |_| 0.1));
    let mut replaced = event(Act::Replaced, 50.5);
    replaced.serial = Some("B-2".to_owned());
    done(&mut engine, &order("1", replaced));
    let mut edited = ph();
    edited.fit.window = WindowLength::Time(span(20.0 * DAY));
    engine.step(&Input::Setup(Box::new(setup(edited))), &mut Vec::new());
    assert_eq!(engine.standing().channels[0].pairs, 0, "it begins anew");
    let mut wrong = event(Act::Cleaned, 99.5);
    wrong.serial = Some("A-1".to_owned());
    assert_eq!(refused(&mut engine, &order("2", wrong))[0].field, "serial");
}

#[test]
fn stored_and_read_back_the_engine_goes_on_alike() {
    let mut noise = Noise::new(29, 0.0);
    let mut whole = engine(setup(ph()));
    feed(&mut whole, &readings(0, 150, |_| 0.1 + 0.01 * noise.draw()));
    let mut cleaned = event(Act::Cleaned, 140.5);
    cleaned.as_found = vec![point(7.1, 7.0, 0.02)];
    cleaned.as_left = vec![point(7.0, 7.0, 0.02)];
    let cleaned = order("1", cleaned);
    done(&mut whole, &cleaned);
    let stored = serde_json::to_string(&whole).expect("the engine can be stored");
    let mut restored: Engine = serde_json::from_str(&stored).expect("and read");
    assert!(restored == whole);
    let mut rest = readings(150, 300, |_| 0.01 * noise.draw());
    rest.push(cleaned);
    rest.push(order("2", event(Act::Adjusted, 260.5)));
    assert_eq!(feed(&mut restored, &rest), feed(&mut whole, &rest));
}

/// An order's own arrival is the host's time; a recording's comes from its readings.
#[test]
fn an_order_before_a_recordings_first_reading_is_refused() {
    let mut engine = engine(setup(ph()));
    let early = order("s-1", event(Act::Cleaned, 5.0));
    let problems = refused(&mut engine, &early);
    assert_eq!(problems.len(), 1, "{problems:?}");
    assert!(problems[0].way_out.contains("once readings flow"));
    feed(&mut engine, &readings(0, 10, |_| 0.0));
    done(&mut engine, &early);
}

/// What was read and which serial number was put in are a sensor's.
#[test]
fn readings_and_a_serial_number_of_a_reference_are_refused() {
    let mut engine = engine(setup(ph()));
    feed(&mut engine, &readings(0, 10, |_| 0.0));
    let mut told = event(Act::Calibrated, 5.0);
    told.about = About::Reference("buffer".to_owned());
    told.as_found = vec![point(7.1, 7.0, 0.01)];
    told.serial = Some("A-12".to_owned());
    let problems = refused(&mut engine, &order("s-1", told.clone()));
    let fields: Vec<_> = problems.iter().map(|it| it.field.as_str()).collect();
    assert_eq!(fields, ["as_found", "serial"]);
    told.as_found.clear();
    told.serial = None;
    done(&mut engine, &order("s-1", told));
}
