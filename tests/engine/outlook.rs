//! What lies ahead of a channel: conformity by its rule, the time to its limit and the alarm before
//! it, and when nothing is claimed.

use crate::support::{Noise, channel, constant, engine, feed, indication, node, reference, span};
use holdtrue::document;
use holdtrue_engine::event::{
    AlarmKind, AlarmState, Conformity, Input, NoStatement, Outlook, Output, TimeToLimit, Zone,
};
use holdtrue_engine::fit::line::Basis;
use holdtrue_engine::setup::{Clock, DecisionRule, ReferenceKind, Setup, WindowLength};

/// One pair an hour.
const HOUR: f64 = 3600.0;

/// A channel with a window of 256 pairs, limit 2, service planned two days ahead, against zero.
fn setup() -> Setup {
    let mut a = channel("a", 0);
    a.fit.window = WindowLength::Pairs(256);
    a.max_permissible_error = Some(2.0);
    a.service_horizon = span(48.0 * HOUR);
    a.publish.max_age = span(24.0 * HOUR);
    a.screening.enabled = false;
    node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![a],
    )
}

/// Hourly pairs with these errors and noise of standard deviation 0.1.
fn hourly(seed: u64, hours: u32, error: impl Fn(f64) -> f64) -> Vec<Input> {
    let mut noise = Noise::new(seed, 0.0);
    (0..hours)
        .map(f64::from)
        .map(|hour| indication(0, HOUR * hour, error(hour) + 0.1 * noise.draw()))
        .collect()
}

fn outlooks(outputs: &[Output]) -> Vec<&Outlook> {
    let found = outputs.iter().filter_map(|output| match output {
        Output::Outlook(outlook) => Some(&**outlook),
        _ => None,
    });
    found.collect()
}

/// Changes of the two limit alarms, in order: kind, raised, hour.
fn limit_alarms(outputs: &[Output]) -> Vec<(AlarmKind, bool, f64)> {
    let changes = outputs.iter().filter_map(|output| match output {
        Output::Alarm(change)
            if matches!(change.kind, AlarmKind::ErrorLimit | AlarmKind::TimeToLimit) =>
        {
            let hour = crate::support::since_start(change.at) / HOUR;
            Some((change.kind, change.state != AlarmState::Normal, hour))
        }
        _ => None,
    });
    changes.collect()
}

/// Zero until hour 300, then 0.01 an hour: the limit of 2 is crossed at hour 500.
fn ramp(hour: f64) -> f64 {
    0.01 * (hour - 300.0).max(0.0)
}

#[test]
fn a_drift_is_foretold_before_it_reaches_its_limit() {
    let mut foretold_ahead = 0;
    for seed in 60..64 {
        let outputs = feed(&mut engine(setup()), &hourly(seed, 560, ramp));
        let alarms = limit_alarms(&outputs);
        let kinds: Vec<_> = alarms
            .iter()
            .map(|(kind, raised, _)| (*kind, *raised))
            .collect();
        assert_eq!(
            kinds,
            [
                (AlarmKind::TimeToLimit, true),
                (AlarmKind::ErrorLimit, true),
                (AlarmKind::TimeToLimit, false),
            ],
            "seed {seed}: first foretold, then come, and one alarm for one condition"
        );
        let (foretold, come) = (alarms[0].2, alarms[1].2);
        assert!(
            foretold > 300.0,
            "there was nothing to foretell: {foretold}"
        );
        assert!(come - foretold > 12.0, "{foretold} for {come}");
        foretold_ahead += u32::from(foretold < 490.0);
        // What the outlook then in force said of the crossing at hour 500.
        let said = outlooks(&outputs);
        let then = said
            .iter()
            .rev()
            .find(|it| crate::support::since_start(it.issued) <= HOUR * 480.0)
            .expect("issued long before");
        let TimeToLimit::Forecast {
            limit, earliest, ..
        } = then.time_to_limit
        else {
            panic!("seed {seed}: {then:?}");
        };
        assert!((limit - 2.0).abs() < 1e-12);
        assert!(crate::support::since_start(earliest) <= HOUR * 500.0);
        assert_eq!(then.recalibration.by, Some(earliest));
    }
    assert_eq!(foretold_ahead, 4);
}

#[test]
fn a_true_sensor_is_promised_no_crossing_and_raises_nothing() {
    // Near its limit as well: four standard deviations of the noise inside it.
    for seed in 70..76 {
        let near = feed(&mut engine(setup()), &hourly(seed, 1500, |_| 1.6));
        assert_eq!(limit_alarms(&near), [], "seed {seed}");
    }
    for seed in 70..76 {
        let outputs = feed(&mut engine(setup()), &hourly(seed, 1500, |_| 0.3));
        assert_eq!(limit_alarms(&outputs), []);
        let said = outlooks(&outputs);
        for outlook in &said {
            let forecast = matches!(outlook.time_to_limit, TimeToLimit::Forecast { .. });
            assert!(!forecast, "seed {seed}: {outlook:?}");
        }
        // 1500 pairs, 60 days: one a day for its validity, and some for news.
        assert!((60..300).contains(&said.len()), "{} outlooks", said.len());
        let last = said.last().expect("issued");
        let Conformity::Stated {
            zone,
            accepted,
            probability,
        } = last.conformity
        else {
            panic!("{last:?}");
        };
        assert!(zone == Zone::Pass && accepted && probability > 0.999);
        let cadence = last.cadence.expect("a line was fitted");
        assert!(cadence.is_sufficient(), "{cadence:?}");
    }
}

/// A curve is followed by the line of its newest part, and no farther ahead than that reaches back.
#[test]
fn a_curve_is_forecast_from_its_newest_part() {
    let mut wide = setup();
    wide.channels[0].max_permissible_error = Some(50.0);
    // 2 over a window squared: 20 standard deviations of the noise.
    let inputs = hourly(80, 600, |hour| 3e-5 * hour * hour);
    let outputs = feed(&mut engine(wide), &inputs);
    let said = outlooks(&outputs);
    let last = said.last().expect("issued");
    let drift = last.drift.expect("a line was fitted");
    assert_eq!(drift.basis, Basis::NewestPart);
    assert_eq!(drift.horizon.since(drift.to), drift.to.since(drift.from));
    let hours = drift.to.since(drift.from).seconds() / HOUR;
    assert!((56.0..72.0).contains(&hours), "a quarter of 256: {hours}");
    // The slope of the newest quarter, about 32 h ago.
    let truth = 2.0 * 3e-5 * (600.0 - 32.0) * 24.0;
    let far = (drift.rate - truth).abs();
    assert!(far < 1.5 * drift.expanded_uncertainty, "{drift:?} {truth}");
}

/// The rule decides, the zone does not change: an error inside the limit by less than U.
#[test]
fn acceptance_follows_the_rule() {
    let accepted = |rule| {
        let mut setup = setup();
        setup.channels[0].decision_rule = rule;
        // |e| = 1.9 with U ≈ 0.2 from the common part.
        setup.references[0].uncertainty_common = 0.1;
        let outputs = feed(&mut engine(setup), &hourly(81, 400, |_| 1.9));
        let last = outlooks(&outputs).last().copied().cloned().expect("issued");
        assert_eq!(last.conformity.zone(), Some(Zone::ConditionalPass));
        let correction = outputs.iter().rev().find_map(|output| match output {
            Output::Correction(correction) => Some(correction),
            _ => None,
        });
        let correction = correction.expect("issued");
        assert_eq!(correction.accepted, last.conformity.accepted());
        last.conformity.accepted()
    };
    assert_eq!(accepted(DecisionRule::Simple), Some(true));
    assert_eq!(
        accepted(DecisionRule::GuardBand { multiple: 1.0 }),
        Some(false)
    );
    assert_eq!(
        accepted(DecisionRule::GuardBand { multiple: 0.1 }),
        Some(true)
    );
}

/// A reference that is too weak for the limit shows trends and states no conformity.
#[test]
fn a_weak_reference_states_nothing_but_shows_the_drift() {
    let mut weak = setup();
    // 4 · 2 · 0.3 > 2.
    weak.references[0].uncertainty_common = 0.3;
    let outputs = feed(&mut engine(weak), &hourly(82, 480, ramp));
    let said = outlooks(&outputs);
    for outlook in &said {
        assert_eq!(
            outlook.conformity,
            Conformity::Refused(NoStatement::WeakReference)
        );
        assert_eq!(outlook.corrected_zone, None);
    }
    assert!(said.last().expect("issued").drift.expect("a line").resolved);
    let zoned = outputs.iter().any(|output| {
        matches!(output, Output::Correction(document)
            if document.zone.is_some() || document.accepted.is_some())
    });
    assert!(!zoned, "no zone in a correction either");
}

/// A group knows how its members differ; what they have in common must be declared.
#[test]
fn a_group_states_nothing_until_its_common_part_is_declared() {
    let conformity = |common: f64| {
        let mut group = setup();
        for name in ["b", "c", "d"] {
            let mut member = channel(name, 0);
            member.max_permissible_error = None;
            group.channels.push(member);
        }
        let members = (1..4).map(holdtrue_engine::setup::ChannelId).collect();
        let mut median = reference("a", ReferenceKind::Group { members });
        median.uncertainty_common = common;
        group.references.push(median);
        group.channels[0].reference = holdtrue_engine::setup::ReferenceId(1);
        let mut noise = Noise::new(83, 0.0);
        let inputs: Vec<Input> = (0..400_u32)
            .flat_map(|index| [1, 2, 3, 0].map(|id| (id, f64::from(index))))
            .map(|(id, hour)| indication(id, HOUR * hour, 0.1 * noise.draw()))
            .collect();
        let outputs = feed(&mut engine(group), &inputs);
        outlooks(&outputs).last().expect("issued").conformity
    };
    assert_eq!(
        conformity(0.0),
        Conformity::Refused(NoStatement::RelativeReference)
    );
    assert_eq!(conformity(0.05).zone(), Some(Zone::Pass));
}

#[test]
fn an_outlook_ends_with_its_validity_and_with_its_limits() {
    // Without limits there is none.
    let mut unlimited = setup();
    unlimited.channels[0].max_permissible_error = None;
    let inputs = hourly(84, 300, ramp);
    let mut running = engine(unlimited.clone());
    assert!(outlooks(&feed(&mut running, &inputs)).is_empty());
    // With limits there is one; when they go, it goes.
    let mut running = engine(setup());
    assert!(!outlooks(&feed(&mut running, &inputs)).is_empty());
    let withdrawn = |outputs: &[Output]| {
        outputs
            .iter()
            .filter(|output| matches!(output, Output::OutlookWithdrawn { .. }))
            .count()
    };
    let edited = feed(&mut running, &[Input::Setup(Box::new(unlimited))]);
    assert_eq!(withdrawn(&edited), 1);
    // Silence: it is withdrawn once, when it has expired.
    let mut live = setup();
    live.clock = Clock::Live;
    let mut running = engine(live);
    let outputs = feed(&mut running, &inputs);
    let end = outlooks(&outputs).last().expect("issued").valid_until;
    let ticks: Vec<Input> = (1..=40)
        .map(|hours| Input::Tick {
            now: end.plus(span(HOUR * f64::from(hours - 20))),
        })
        .collect();
    let silent = feed(&mut running, &ticks);
    assert_eq!(withdrawn(&silent), 1, "{silent:?}");
    assert!(outlooks(&silent).is_empty());
}

/// Every outlook, whatever it says, follows the published schema; what it refuses it says in words.
#[test]
fn documents_follow_their_schema() {
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/config/schemas/outlook.json");
    let schema: serde_json::Value =
        serde_json::from_str(&std::fs::read_to_string(path).unwrap()).unwrap();
    let validator = jsonschema::draft202012::new(&schema).unwrap();
    let mut weak = setup();
    weak.references[0].uncertainty_common = 0.3;
    let mut rated = setup();
    rated.channels[0].max_permissible_error = None;
    rated.channels[0].max_drift_rate = Some(1.0);
    rated.channels[0].decision_rule = DecisionRule::Simple;
    let mut states = std::collections::BTreeSet::new();
    for setup in [setup(), weak, rated] {
        let outputs = feed(&mut engine(setup.clone()), &hourly(85, 640, ramp));
        for output in outputs {
            let Output::Outlook(_) = &output else {
                continue;
            };
            let document = document::render(&output, &setup).expect("published");
            assert_eq!(document.topic, "holdtrue/north-works/outlook/a");
            assert!(document.retain && document.expires.is_none());
            let json: serde_json::Value = serde_json::from_slice(&document.payload).unwrap();
            let errors: Vec<String> = validator
                .iter_errors(&json)
                .map(|it| format!("{}: {it}", it.instance_path()))
                .collect();
            assert!(errors.is_empty(), "{errors:?}\n{json:#}");
            let rule = json["conformity"]["decision_rule"].as_str().unwrap();
            assert!(rule.contains("ILAC-G8"), "{rule}");
            states.insert(json["time_to_limit"]["state"].as_str().unwrap().to_owned());
        }
    }
    for state in ["forecast", "reached", "no-line", "no-limit"] {
        assert!(states.contains(state), "{state} among {states:?}");
    }
    assert!(states.contains("not-resolvable") || states.contains("beyond-horizon"));
}
