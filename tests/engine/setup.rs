//! A new configuration takes effect: what an edit leaves in place, what it clears, what is
//! remembered of what was removed.

use crate::support::{channel, constant, engine, feed, indication, node, reference, span};
use holdtrue_engine::event::{AlarmKind, AlarmState, Input, Output, Subject, Zone};
use holdtrue_engine::setup::{Clock, Setup, WindowLength};

/// One channel with every limit and every alarm it can have.
fn limited() -> Setup {
    let mut a = channel("a", 0);
    a.fit.window = WindowLength::Pairs(64);
    a.max_permissible_error = Some(2.0);
    a.max_drift_rate = Some(1.0);
    a.alarms.gap_after = Some(span(600.0));
    node(Clock::Live, vec![reference("zero", constant(0.0))], vec![a])
}

fn minutes(from: u32, to: u32, error: impl Fn(f64) -> f64) -> Vec<Input> {
    let wobble = |index: u32| 0.01 * f64::from(index % 7);
    (from..to)
        .map(|index| {
            let minute = f64::from(index);
            indication(0, 60.0 * minute, error(minute) + wobble(index))
        })
        .collect()
}

fn changed(setup: &Setup, change: impl Fn(&mut Setup)) -> Input {
    let mut setup = setup.clone();
    change(&mut setup);
    Input::Setup(Box::new(setup))
}

fn alarms(outputs: &[Output]) -> Vec<(AlarmKind, bool)> {
    let changes = outputs.iter().filter_map(|output| match output {
        Output::Alarm(change) => Some((change.kind, change.state != AlarmState::Normal)),
        _ => None,
    });
    changes.collect()
}

/// A renewed certificate, another limit, another delay: the fit stays, and the next pair is judged
/// by the new ones.
#[test]
fn an_edit_that_changes_no_row_keeps_the_fit() {
    let setup = limited();
    let mut engine = engine(setup.clone());
    let said = feed(&mut engine, &minutes(0, 100, |_| 3.0));
    assert_eq!(alarms(&said), [(AlarmKind::ErrorLimit, true)]);
    let before = engine.standing();
    assert_eq!(before.channels[0].zone, Some(Zone::Fail));

    let edit = changed(&setup, |setup| {
        setup.references[0].certificate = Some("C-200".to_owned());
        setup.references[0].uncertainty_common = 0.02;
        setup.references[0].stale_after = Some(span(3600.0));
        let channel = &mut setup.channels[0];
        channel.max_permissible_error = Some(9.0);
        channel.resolution = 0.01;
        channel.publish.step = 0.25;
        channel.alarms.delay = 2;
        channel.lateness = channel.lateness.max(span(30.0));
    });
    assert!(feed(&mut engine, &[edit]).is_empty());
    assert_eq!(engine.standing().channels[0].pairs, 100);
    assert_eq!(
        engine.standing().channels[0].issue_number,
        before.channels[0].issue_number
    );
    let said = feed(&mut engine, &minutes(100, 102, |_| 3.0));
    assert_eq!(engine.standing().channels[0].pairs, 102);
    assert_eq!(engine.standing().channels[0].zone, Some(Zone::Pass));
    assert_eq!(alarms(&said), [(AlarmKind::ErrorLimit, false)]);
    assert!(
        said.iter()
            .any(|output| matches!(output, Output::Correction(d) if d.zone == Some(Zone::Pass)))
    );
}

/// What changes the meaning of rows starts the channel anew.
#[test]
fn an_edit_that_changes_the_rows_starts_anew() {
    let edits: [fn(&mut Setup); 6] = [
        |setup| setup.channels[0].unit = "mV".to_owned(),
        |setup| setup.channels[0].lag = span(1.0),
        |setup| setup.channels[0].fit.segments = 32,
        |setup| setup.channels[0].fit.max_degree = 1,
        |setup| setup.references[0].kind = constant(1.0),
        |setup| setup.references[0].stands_for = span(60.0),
    ];
    for (number, edit) in edits.into_iter().enumerate() {
        let setup = limited();
        let mut engine = engine(setup.clone());
        feed(&mut engine, &minutes(0, 100, |_| 0.5));
        let said = feed(&mut engine, &[changed(&setup, edit)]);
        assert!(
            matches!(
                said[..],
                [Output::Withdrawn { .. }, Output::OutlookWithdrawn { .. }]
            ),
            "{number}: {said:?}"
        );
        assert_eq!(engine.standing().channels[0].pairs, 0, "{number}");
    }
}

/// An alarm whose limit was taken away has nothing left to clear it: it is cleared with its limit.
#[test]
fn an_alarm_goes_with_its_limit() {
    let setup = limited();
    let mut engine = engine(setup.clone());
    let said = feed(&mut engine, &minutes(0, 100, |minute| 3.0 + 0.01 * minute));
    let mut raised = alarms(&said);
    raised.sort();
    assert_eq!(
        raised,
        [(AlarmKind::ErrorLimit, true), (AlarmKind::DriftRate, true)]
    );
    let edit = changed(&setup, |setup| {
        setup.channels[0].max_permissible_error = None;
        setup.channels[0].max_drift_rate = None;
    });
    let said = feed(&mut engine, &[edit]);
    assert_eq!(
        alarms(&said),
        [
            (AlarmKind::ErrorLimit, false),
            (AlarmKind::DriftRate, false)
        ]
    );
    assert!(engine.standing().alarms.is_empty());
    let said = feed(
        &mut engine,
        &minutes(100, 200, |minute| 3.0 + 0.01 * minute),
    );
    assert!(alarms(&said).is_empty());
}

/// The node's own silence is asked about as long as any limit asks about silence; without, its
/// alarm does not stay behind.
#[test]
fn the_nodes_alarm_goes_with_the_last_limit_on_silence() {
    let mut setup = limited();
    setup.channels.push(channel("b", 0));
    let mut engine = engine(setup.clone());
    let mut said = feed(&mut engine, &minutes(0, 10, |_| 0.0));
    let silent = crate::support::at(7200.0);
    engine.step(&Input::Tick { now: silent }, &mut said);
    let node_gap = |outputs: &[Output]| {
        let changes = outputs.iter().filter_map(|output| match output {
            Output::Alarm(change) if change.subject == Subject::Node => Some(change.state),
            _ => None,
        });
        changes.collect::<Vec<_>>()
    };
    assert_eq!(node_gap(&said), [AlarmState::Unacknowledged]);
    let edit = changed(&setup, |setup| setup.channels[0].alarms.gap_after = None);
    let said = feed(&mut engine, &[edit]);
    assert_eq!(node_gap(&said), [AlarmState::Normal]);
    assert!(engine.standing().alarms.is_empty());
}

/// A channel that is removed and comes back goes on counting: its documents' numbers are never used
/// twice.
#[test]
fn issue_numbers_outlive_a_removal() {
    let setup = limited();
    let mut engine = engine(setup.clone());
    feed(&mut engine, &minutes(0, 100, |_| 0.5));
    let last = engine.standing().channels[0].issue_number.expect("issued");
    feed(
        &mut engine,
        &[changed(&setup, |setup| setup.channels.clear())],
    );
    feed(&mut engine, &[changed(&setup, |_| ())]);
    let said = feed(&mut engine, &minutes(100, 110, |_| 0.5));
    let first = said.iter().find_map(|output| match output {
        Output::Correction(document) => Some(document.issue_number),
        _ => None,
    });
    assert_eq!(first, Some(last + 1));
}
