//! When a correction is issued, what it says, how long it holds, and whether its band tells the
//! truth.

use crate::support::{
    Noise, at, channel, constant, engine, feed, indication, node, reference, reference_value,
    since_start, span,
};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Correction, Input, Output, Zone};
use holdtrue_engine::fit::{Fit, Row};
use holdtrue_engine::setup::{ChannelSetup, Clock, ReferenceKind, Setup, WindowLength};
use holdtrue_engine::time::Timestamp;

/// Seconds between readings.
const EVERY: f64 = 60.0;

fn against_zero(channel: ChannelSetup) -> Setup {
    node(
        Clock::Readings,
        vec![reference("zero", constant(0.0))],
        vec![channel],
    )
}

fn corrections(outputs: &[Output]) -> Vec<&Correction> {
    let documents = outputs.iter().filter_map(|output| match output {
        Output::Correction(document) => Some(&**document),
        _ => None,
    });
    documents.collect()
}

/// c(t) as a consumer evaluates it: one Horner loop.
fn applied(document: &Correction, time: Timestamp) -> f64 {
    let days = time.since(document.origin).days();
    document
        .zero
        .iter()
        .rev()
        .fold(0.0, |sum, c| sum * days + c)
}

/// One error per minute.
fn run(setup: Setup, errors: &[f64]) -> (Engine, Vec<Output>) {
    let mut engine = engine(setup);
    let inputs: Vec<Input> = errors
        .iter()
        .enumerate()
        .map(|(index, error)| indication(0, EVERY * index as f64, *error))
        .collect();
    let outputs = feed(&mut engine, &inputs);
    (engine, outputs)
}

#[test]
fn documents_are_numbered_valid_and_consistent() {
    let mut noise = Noise::new(21, 0.0);
    let errors: Vec<f64> = (0..3000)
        .map(|index| 0.5 * noise.draw() + 3.0 + 0.002 * f64::from(index))
        .collect();
    let mut setup = channel("a", 0);
    setup.max_permissible_error = Some(5.0);
    setup.max_correction = Some(20.0);
    let (_, outputs) = run(against_zero(setup), &errors);
    let documents = corrections(&outputs);
    assert!(documents.len() > 10);
    for (number, document) in (1..).zip(&documents) {
        assert_eq!(document.issue_number, number);
        assert!(document.valid_until > document.valid_from);
        assert!(document.valid_until <= document.issued.plus(span(3600.0)));
        let sum: f64 = document.weights.iter().sum();
        assert!((sum - 1.0).abs() < 1e-12, "{sum}");
        let at_origin = applied(document, document.origin);
        assert!((at_origin - document.correction).abs() <= 1e-12 * at_origin.abs());
        if document.suppressed {
            assert!(document.zero.iter().all(|c| c.to_bits() == 0));
        } else {
            let expanded = document.coverage_factor * document.standard_uncertainty;
            assert!((document.expanded_uncertainty - expanded).abs() < 1e-12);
        }
        let size = document.covariance.len();
        assert_eq!(size, document.zero.len());
        assert!(document.covariance.iter().all(|row| row.len() == size));
    }
    let last = documents.last().expect("documents were issued");
    let truth = 3.0 + 0.002 * 2999.0;
    let error = (applied(last, at(EVERY * 2999.0)) + truth).abs();
    assert!(error < 3.0 * last.expanded_uncertainty, "{error}");
    assert!(matches!(last.zone, Some(Zone::Fail)), "{:?}", last.zone);
    assert_eq!(last.corrected_zone, Some(Zone::Pass));
}

/// A sensor without error is left alone: the dead zone suppresses what is not significant, the
/// polynomial is zero and |ĉ| is inside U.
#[test]
fn a_true_sensor_is_left_alone() {
    let mut noise = Noise::new(22, 0.0);
    let errors: Vec<f64> = (0..3000).map(|_| noise.draw()).collect();
    let (_, outputs) = run(against_zero(channel("a", 0)), &errors);
    let documents = corrections(&outputs);
    let suppressed = documents.iter().filter(|d| d.suppressed).count();
    assert!(
        suppressed * 10 > documents.len() * 8,
        "{suppressed} of {}",
        documents.len()
    );
    for document in documents.iter().filter(|document| document.suppressed) {
        let own = document.coverage_factor * document.standard_uncertainty;
        assert!(document.expanded_uncertainty >= own);
        // Below 2u at issue, and somewhat more at the end of the validity.
        assert!(document.expanded_uncertainty <= own + 4.0 * document.standard_uncertainty);
    }
}

/// Which of the levels of an error are suppressed, each after 40 pairs without noise, with a known
/// common uncertainty of 1 and this dead zone.
fn suppressed_at(levels: &[f64], dead_zone: f64) -> Vec<bool> {
    let mut setup = channel("a", 0);
    setup.fit.window = WindowLength::Pairs(16);
    setup.fit.segments = 16;
    setup.fit.forced_degree = Some(0);
    setup.screening.enabled = false;
    setup.publish.dead_zone = dead_zone;
    let mut setup = against_zero(setup);
    setup.references[0].uncertainty_common = 1.0;
    let errors: Vec<f64> = levels
        .iter()
        .flat_map(|level| std::iter::repeat_n(*level, 40))
        .collect();
    let (_, outputs) = run(setup, &errors);
    let documents = corrections(&outputs);
    let in_force = |block: usize| {
        let end = at(EVERY * (40.0 * block as f64 + 39.5));
        let last = documents.iter().rfind(|document| document.issued <= end);
        last.expect("a document is in force").suppressed
    };
    (0..levels.len()).map(in_force).collect()
}

/// Applied from |ĉ| ≥ 2u, dropped below 1u: the thresholds are 2 and 1.
#[test]
fn the_dead_zone_has_two_edges() {
    let levels = [1.9, 2.1, 1.1, 0.9, 1.9, 2.1];
    let expected = [true, false, false, true, true, false];
    assert_eq!(suppressed_at(&levels, 2.0), expected);
}

/// Another multiple moves both edges; without a dead zone every correction is applied.
#[test]
fn the_dead_zone_is_as_wide_as_it_is_set() {
    let levels = [3.9, 4.1, 3.0, 1.9, 3.9];
    let expected = [true, false, false, true, true];
    assert_eq!(suppressed_at(&levels, 4.0), expected);
    assert_eq!(suppressed_at(&[0.1, 0.0, 1.1], 0.0), [false; 3]);
}

/// No new document without news: a steady sensor with a long validity issues few, a drifting one
/// as many as the drift crosses steps.
#[test]
fn documents_come_by_step_or_by_age() {
    let count = |drift: f64, seed| {
        let mut noise = Noise::new(seed, 0.0);
        let errors: Vec<f64> = (0..4000)
            .map(|index| 10.0 + noise.draw() + drift * f64::from(index))
            .collect();
        let mut setup = channel("a", 0);
        setup.publish.max_age = span(86_400.0);
        let (_, outputs) = run(against_zero(setup), &errors);
        let documents = corrections(&outputs);
        let late = documents.iter().filter(|d| d.issued > at(EVERY * 2000.0));
        late.count()
    };
    let steady = count(0.0, 23);
    assert!(steady < 200, "{steady} documents for 2000 steady pairs");
}

/// A stream without any noise leaves u at nothing but rounding; that is no reason to publish.
#[test]
fn rounding_is_no_news() {
    let mut setup = channel("a", 0);
    setup.publish.max_age = span(86_400.0);
    let rounded = |index: u32| (f64::from(index) * 0.7 + 0.3) - f64::from(index) * 0.7;
    let errors: Vec<f64> = (0..1000).map(rounded).collect();
    let (_, outputs) = run(against_zero(setup), &errors);
    let steps = outputs.iter().filter(|it| matches!(it, Output::Step(_)));
    assert_eq!(steps.count(), 0, "the last digits do not step");
    let documents = corrections(&outputs);
    // A young window holds a document for a part of its own length only: about twenty renewals.
    assert!(documents.len() < 40, "{} documents", documents.len());
    let last = documents.last().expect("one was issued");
    assert!((last.correction + 0.3).abs() < 1e-12);
}

/// Each document stays within `step`·u of what the fit says while it is in force, and within a
/// fifth of a step more at pairs that are not judged: a fit beside the engine is asked every time.
#[test]
fn the_document_in_force_is_never_more_than_a_step_off() {
    let mut noise = Noise::new(24, 0.0);
    let errors: Vec<f64> = (0..2000)
        .map(|index| noise.draw() + 5.0 + 0.004 * f64::from(index))
        .collect();
    let setup = channel("a", 0);
    let mut fit = Fit::new(setup.fit);
    let mut engine = engine(against_zero(setup));
    let mut held: Option<Correction> = None;
    let (mut checked, mut beyond) = (0, 0);
    for (index, error) in errors.iter().enumerate() {
        let time = EVERY * index as f64;
        let inserted = fit.insert(Row {
            time: at(time),
            error: *error,
            weight: 1.0,
            x: 0.0,
            influences: [0.0; 2],
        });
        if inserted.closed {
            fit.decide(true);
        }
        let outputs = feed(&mut engine, &[indication(0, time, *error)]);
        assert_eq!(engine.standing().channels[0].pairs, index as u64 + 1);
        let new = corrections(&outputs)
            .last()
            .map(|document| (*document).clone());
        held = new.or(held);
        let (Some(document), Some(published)) = (&held, fit.published()) else {
            continue;
        };
        if document.suppressed {
            continue;
        }
        let off = (applied(document, at(time)) + published.coefficients[0]).abs();
        let standing = engine.standing().channels[0].clone();
        let u = standing.standard_uncertainty.expect("there is a fit");
        assert!(off <= 0.6 * u + 1e-12, "{index}: {off} against u {u}");
        beyond += u32::from(off > 0.5 * u);
        checked += 1;
    }
    assert!(checked > 1500, "{checked}");
    assert!(beyond * 100 < checked, "{beyond} of {checked}");
}

/// When pairs stop, the correction is renewed up to the fit's horizon and then withdrawn; nothing
/// is published after that.
#[test]
fn without_pairs_the_correction_is_withdrawn() {
    let mut setup = node(
        Clock::Live,
        vec![reference("lab", ReferenceKind::Measured)],
        vec![channel("a", 0)],
    );
    setup.channels[0].publish.max_age = span(600.0);
    let mut engine = engine(setup);
    let mut outputs = Vec::new();
    for index in 0..100_u32 {
        let time = EVERY * f64::from(index);
        engine.step(
            &indication(0, time, 7.3 + 0.001 * f64::from(index % 5)),
            &mut outputs,
        );
        engine.step(&reference_value(0, time, 7.0), &mut outputs);
    }
    let last_pair = EVERY * 99.0;
    outputs.clear();
    // Only ticks from here on, whenever the engine wants one.
    let mut ticks = 0;
    while let Some(next) = engine.next_tick() {
        engine.step(&Input::Tick { now: next }, &mut outputs);
        ticks += 1;
        assert!(ticks < 1000, "the engine never comes to rest");
    }
    let withdrawals: Vec<f64> = outputs
        .iter()
        .filter_map(|output| match output {
            Output::Withdrawn { at, .. } => Some(since_start(*at)),
            _ => None,
        })
        .collect();
    assert_eq!(withdrawals.len(), 1);
    let held_for = (withdrawals[0] - last_pair) / last_pair;
    assert!((0.2..=0.51).contains(&held_for), "{held_for} windows");
    assert!(matches!(outputs.last(), Some(Output::Withdrawn { .. })));
    let renewed = corrections(&outputs);
    assert!(renewed.len() >= 2, "renewed {} times", renewed.len());
    assert!(
        renewed
            .iter()
            .all(|d| since_start(d.valid_until) <= withdrawals[0])
    );
    assert_eq!(engine.standing().channels[0].issue_number, None);
}

/// Corrected values use the correction in force and say which.
#[test]
fn corrected_values_follow_the_correction_in_force() {
    let mut noise = Noise::new(25, 0.0);
    let errors: Vec<f64> = (0..400).map(|_| 20.0 + noise.draw()).collect();
    let mut setup = channel("a", 0);
    setup.corrected_values = true;
    let (_, outputs) = run(against_zero(setup), &errors);
    let mut held: Option<&Correction> = None;
    let mut count = 0;
    for output in &outputs {
        match output {
            Output::Correction(document) => held = Some(document),
            Output::Corrected(value) => {
                let document = held.expect("a correction came first");
                assert_eq!(value.issue_number, document.issue_number);
                let expected = applied(document, value.phenomenon);
                assert!((value.correction - expected).abs() < 1e-12);
                assert!((value.corrected - value.indication - value.correction).abs() < 1e-12);
                assert!(value.expanded_uncertainty > 0.0);
                count += 1;
            }
            _ => {}
        }
    }
    assert!(count > 390, "{count}");
}

/// Coverage of U at the newest pair: the true error lies within ê ± U about as often as the
/// coverage says, with white and with correlated noise, steady and drifting. Gate: 90 % of instants
/// after the first window, averaged over runs (design: 93–99.5 % with averaging over degrees).
#[test]
fn the_band_tells_the_truth() {
    for (rho, drift) in [(0.0, 0.0), (0.0, 2.0), (0.8, 0.0), (0.8, 2.0)] {
        let (mut inside, mut all) = (0_u32, 0_u32);
        let (mut square_error, mut square_u) = (0.0, 0.0);
        for seed in 0..20 {
            let mut noise = Noise::new(1000 + seed, rho);
            let mut engine = engine(against_zero(channel("a", 0)));
            let mut outputs = Vec::new();
            for index in 0..3000_u32 {
                let truth = 50.0 + drift * f64::from(index) / 1024.0;
                let time = EVERY * f64::from(index);
                engine.step(&indication(0, time, truth + noise.draw()), &mut outputs);
                if index > 1024 && index % 16 == 0 {
                    let standing = &engine.standing().channels[0];
                    let c = standing.correction.expect("there is a fit");
                    let u = standing.standard_uncertainty.expect("there is a fit");
                    inside += u32::from((c + truth).abs() <= 1.96 * u);
                    all += 1;
                    square_error += (c + truth) * (c + truth);
                    square_u += u * u;
                }
                outputs.clear();
            }
        }
        let covered = f64::from(inside) / f64::from(all);
        let root = |square: f64| (square / f64::from(all)).sqrt();
        println!(
            "rho {rho}, {drift} sigma per window: {covered:.3} covered, rms error {:.4}, u {:.4}",
            root(square_error),
            root(square_u)
        );
        assert!(covered > 0.90, "rho {rho} drift {drift}: {covered}");
    }
}

/// While a correction is suppressed, the error that it leaves in is inside the U in force, however
/// it came about, up to the publish step: here an error that grows to just below 2u.
#[test]
fn what_is_suppressed_is_inside_the_u_in_force() {
    let mut setup = channel("a", 0);
    setup.fit.window = WindowLength::Pairs(64);
    setup.fit.forced_degree = Some(0);
    setup.screening.enabled = false;
    setup.publish.max_age = span(86_400.0);
    let mut setup = against_zero(setup);
    setup.references[0].uncertainty_common = 1.0;
    let mut engine = engine(setup);
    let mut held: Option<Correction> = None;
    let mut largest = 0.0_f64;
    for index in 0..400_u32 {
        let error = if index < 200 { 0.0 } else { 1.95 };
        let outputs = feed(
            &mut engine,
            &[indication(0, EVERY * f64::from(index), error)],
        );
        let new = corrections(&outputs).last().map(|d| (*d).clone());
        held = new.or(held);
        let standing = &engine.standing().channels[0];
        let (Some(document), Some(c)) = (&held, standing.correction) else {
            continue;
        };
        assert!(document.suppressed);
        let own = document.coverage_factor * document.standard_uncertainty;
        let inside = document.expanded_uncertainty - own;
        let u = standing.standard_uncertainty.expect("there is a fit");
        assert!(
            c.abs() <= inside + 0.5 * u + 1e-9,
            "{index}: {c} and {inside}"
        );
        largest = largest.max(inside);
    }
    assert!(largest > 1.9, "{largest}");
}

/// A suppressed document promises its U until it ends: a known slope is looked ahead on.
#[test]
fn what_is_suppressed_is_inside_u_until_the_end_of_the_validity() {
    let mut setup = channel("a", 0);
    setup.fit.window = WindowLength::Pairs(64);
    setup.fit.forced_degree = Some(1);
    setup.screening.enabled = false;
    let mut setup = against_zero(setup);
    setup.references[0].uncertainty_common = 1.0;
    let errors: Vec<f64> = (0..100).map(|index| 0.01 * f64::from(index)).collect();
    let (_, outputs) = run(setup, &errors);
    let documents = corrections(&outputs);
    assert!(documents.len() > 3);
    for document in documents.iter().skip(1) {
        assert!(document.suppressed);
        let own = document.coverage_factor * document.standard_uncertainty;
        let at_the_end = 0.01 * since_start(document.valid_until) / EVERY;
        let inside = document.expanded_uncertainty - own;
        assert!(inside >= at_the_end - 1e-6, "{inside} against {at_the_end}");
    }
}

/// Values that happen to be equal are not known without uncertainty: what was declared of noise and
/// reference bounds u from below, and where nothing was declared nothing is stated.
#[test]
fn equal_errors_are_not_known_exactly() {
    let judged = |noise: f64, each: f64| {
        let mut setup = channel("a", 0);
        // Four times the reference's expanded uncertainty fits into it.
        setup.max_permissible_error = Some(1.0);
        setup.noise = noise;
        let mut setup = against_zero(setup);
        setup.references[0].uncertainty_each = each;
        let (engine, outputs) = run(setup, &[0.95, 0.95]);
        let last = corrections(&outputs).last().map(|d| (*d).clone());
        let standing = engine.standing().channels[0].clone();
        (standing.standard_uncertainty, standing.zone, last)
    };
    for (noise, each) in [(0.1, 0.0), (0.0, 0.1)] {
        let (u, zone, document) = judged(noise, each);
        let u = u.expect("there is a fit");
        assert!((u - 0.1 / 2.0_f64.sqrt()).abs() < 1e-12, "{u}");
        assert_eq!(zone, Some(Zone::ConditionalPass));
        let nu = document.expect("one was issued").degrees_of_freedom;
        assert!((nu - 8.0).abs() < 1e-9, "{nu}");
    }
    let (u, zone, document) = judged(0.0, 0.0);
    assert_eq!((u, zone), (Some(0.0), None));
    let document = document.expect("one was issued");
    assert_eq!((document.zone, document.corrected_zone), (None, None));
}
