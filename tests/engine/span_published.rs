//! Span and influence quantities from readings to documents: a consumer that has the documents and
//! nothing else corrects as the daemon does; what is not known is not claimed.

use crate::support::{
    START, at, channel, engine, feed, gate, indication, node, reading, reference, reference_value,
    since_start, span,
};
use holdtrue::document::correction::{CorrectedDocument, CorrectionDocument};
use holdtrue::document::degree::DegreeDocument;
use holdtrue_engine::event::{Corrected, Correction, Input, Output, RefusedReason, Source};
use holdtrue_engine::setup::{
    ChannelInfluence, ChannelSetup, Clock, InfluenceId, InfluenceSetup, PairNoise, ReferenceId,
    ReferenceKind, Setup, WindowLength,
};
use rand_chacha::ChaCha12Rng;
use rand_chacha::rand_core::SeedableRng as _;
use rand_distr::{Distribution as _, Normal};
use serde_json::Value;

/// Seconds between two pairs.
const STEP: f64 = 60.0;
/// The invented sensor: its zero error at level 20 and 15 °C, span error per unit, effect per °C.
const ZERO: f64 = 0.5;
const FADE: f64 = -0.03;
const EFFECT: f64 = 0.02;

/// Level, temperature and systematic error at the n-th pair: both swing, out of step.
fn world(n: u32) -> (f64, f64, f64) {
    let turn = std::f64::consts::TAU * f64::from(n);
    let level = 20.0 + 5.0 * (turn / 97.0).sin();
    let temperature = 15.0 + 4.0 * (turn / 61.0).cos();
    (level, temperature, error(level, temperature))
}

fn error(level: f64, temperature: f64) -> f64 {
    ZERO + FADE * (level - 20.0) + EFFECT * (temperature - 15.0)
}

/// A channel with a measured reference, a temperature and a span.
fn setup(noise: PairNoise, adjust: impl FnOnce(&mut ChannelSetup)) -> Setup {
    let mut channel = channel("hall/a", 0);
    channel.fit.window = WindowLength::Pairs(512);
    channel.fit.max_span_degree = Some(0);
    channel.fit.influences = 1;
    channel.fit.noise = noise;
    channel.corrected_values = true;
    channel.publish.max_age = span(86_400.0);
    channel.influences = vec![ChannelInfluence {
        source: InfluenceId(0),
        name: "temperature".to_owned(),
        unit: Some("Cel".to_owned()),
    }];
    adjust(&mut channel);
    let references = vec![reference("lab", ReferenceKind::Measured)];
    let mut setup = node(Clock::Readings, references, vec![channel]);
    setup.influences = vec![InfluenceSetup {
        name: "hall /t".to_owned(),
    }];
    setup
}

fn temperature(seconds: f64, value: f64) -> Input {
    reading(Source::Influence(InfluenceId(0)), seconds, value)
}

/// `pairs` pairs with noise of these standard deviations on reference and indication.
fn run(setup: &Setup, pairs: u32, noise: (f64, f64), seed: u64) -> Vec<Output> {
    let mut engine = engine(setup.clone());
    let mut random = ChaCha12Rng::seed_from_u64(seed);
    let mut draw = |deviation: f64| {
        Normal::new(0.0, deviation)
            .expect("a deviation")
            .sample(&mut random)
    };
    let mut outputs = Vec::new();
    for n in 0..pairs {
        let (level, warmth, error) = world(n);
        let seconds = STEP * f64::from(n);
        let inputs = [
            temperature(seconds, warmth),
            reference_value(0, seconds, level + draw(noise.0)),
            indication(0, seconds, level + error + draw(noise.1)),
        ];
        outputs.extend(feed(&mut engine, &inputs));
    }
    outputs
}

fn corrections(outputs: &[Output]) -> Vec<&Correction> {
    let each = outputs.iter().filter_map(|output| match output {
        Output::Correction(correction) => Some(&**correction),
        _ => None,
    });
    each.collect()
}

fn corrected(outputs: &[Output]) -> Vec<&Corrected> {
    let each = outputs.iter().filter_map(|output| match output {
        Output::Corrected(corrected) => Some(corrected),
        _ => None,
    });
    each.collect()
}

/// The document of a correction, which follows its schema.
fn json(correction: &Correction, setup: &Setup) -> Value {
    let document = CorrectionDocument::new(correction, &setup.channels[0], setup);
    let text = serde_json::to_string(&document).expect("a document");
    follows(&text, include_str!("../../config/schemas/correction.json"))
}

/// Reads a document back and asserts that it follows its schema.
fn follows(document: &str, schema: &str) -> Value {
    let schema = serde_json::from_str(schema).expect("JSON");
    let validator = jsonschema::draft202012::new(&schema).expect("a schema");
    let read = serde_json::from_str(document).expect("JSON");
    let errors = validator.iter_errors(&read);
    let errors: Vec<String> = errors
        .map(|it| format!("{}: {it}", it.instance_path()))
        .collect();
    assert!(errors.is_empty(), "{errors:?}\n{document}");
    read
}

/// What a consumer makes of a document and an indication, from the JSON alone: the README's
/// formula.
fn consume(document: &Value, days: f64, indication: f64, influences: &[f64]) -> f64 {
    let horner = |key: &str| {
        let coefficients = document[key].as_array().expect("an array");
        let numbers = coefficients
            .iter()
            .rev()
            .map(|c| c.as_f64().expect("a number"));
        numbers.fold(0.0, |sum, coefficient| sum * days + coefficient)
    };
    let number = |value: &Value| value.as_f64().expect("a number");
    let terms = document["influences"].as_array().expect("an array");
    let influenced: f64 = terms
        .iter()
        .zip(influences)
        .map(|(term, value)| number(&term["coefficient"]) * (value - number(&term["centre"])))
        .sum();
    let (zero, span) = (horner("zero") + influenced, horner("span"));
    let shifted = zero + span * (indication - number(&document["span_centre"]));
    match document["span_side"].as_str() {
        Some("reference") => shifted / (1.0 - span),
        Some("indication") => shifted,
        other => panic!("{other:?}"),
    }
}

/// Noise of (reference, indication), and the side that the span is fitted on.
const SIDES: [((f64, f64), &str); 2] =
    [((0.005, 0.02), "reference"), ((0.02, 0.005), "indication")];

#[test]
fn a_consumer_needs_the_document_alone() {
    for ((each, noise), side) in SIDES {
        let declared = PairNoise {
            reference: each,
            indication: noise,
        };
        let setup = setup(declared, |_| {});
        let outputs = run(&setup, 2000, (each, noise), 9_501);
        let last = *corrections(&outputs).last().expect("a correction");
        let document = json(last, &setup);
        assert_eq!(document["span_side"], side);
        let claim = document["claim"].as_str().expect("a claim");
        assert!(claim.starts_with("zero and span"), "{side}: {claim}");
        assert_eq!(document["span_refused"], Value::Null);
        assert_eq!(document["influences"][0]["in_force"], true);
        assert_eq!(document["influences"][0]["name"], "temperature");
        let u = document["standard_uncertainty"].as_f64().expect("u");
        // Everywhere within the range, at the newest pair's time, the corrected value is true.
        for level in [15.5, 18.0, 20.0, 22.0, 24.5] {
            for warmth in [11.5, 15.0, 18.5] {
                let indication = level + error(level, warmth);
                let truth = level - indication;
                let got = consume(&document, 0.0, indication, &[warmth]);
                assert!(
                    (got - truth).abs() < 4.0 * u && 4.0 * u < 0.1 * ZERO,
                    "{side} at {level}, {warmth}: {got} for {truth}, u {u}"
                );
            }
        }
        // Tolerance: the daemon sums the same terms in another order.
        let value = corrected(&outputs)
            .into_iter()
            .next_back()
            .expect("a corrected value");
        let used = corrections(&outputs)
            .into_iter()
            .find(|it| it.issue_number == value.issue_number)
            .expect("the correction used");
        let (_, warmth, _) = world(1999);
        let days = value.phenomenon.since(used.origin).days();
        let own = consume(&json(used, &setup), days, value.indication, &[warmth]);
        assert!((own - value.correction).abs() < 1e-12, "{side}");
        assert!(!value.beyond_range && value.influences_assumed.is_empty());
    }
}

/// The document's covariance, in the order that its schema states, gives u at any level.
#[test]
fn the_error_is_judged_where_it_is_worst() {
    let noise = PairNoise {
        reference: 0.005,
        indication: 0.02,
    };
    let setup = setup(noise, |_| {});
    let outputs = run(&setup, 2000, (0.005, 0.02), 9_502);
    let last = *corrections(&outputs).last().expect("a correction");
    let (lowest, highest) = last.range;
    assert!(lowest < 15.2 && highest > 24.8, "{:?}", last.range);
    // The error is 0.65 at the lowest level, 0.35 at the highest.
    assert!(
        (last.judged_at - lowest).abs() < 1e-12,
        "{}",
        last.judged_at
    );
    assert!((last.correction + 0.65).abs() < 0.03, "{}", last.correction);
    let terms = last.zero.len() + last.span.len() + last.influences.len();
    assert_eq!((last.covariance.len(), last.span.len()), (terms, 1));
    let phi: Vec<f64> = (0..last.zero.len())
        .map(|power| if power == 0 { 1.0 } else { 0.0 })
        .chain([last.judged_at - last.span_centre, 0.0])
        .collect();
    let variance: f64 = (0..terms)
        .flat_map(|i| (0..terms).map(move |j| (i, j)))
        .map(|(i, j)| phi[i] * last.covariance[i][j] * phi[j])
        .sum();
    // Lack of fit may add to it; nothing else is declared here.
    let u = last.standard_uncertainty;
    assert!(variance.sqrt() <= u * (1.0 + 1e-9) && variance.sqrt() > 0.5 * u);
}

#[test]
fn beyond_what_was_seen_a_corrected_value_is_flagged() {
    let noise = PairNoise {
        reference: 0.005,
        indication: 0.02,
    };
    let setup = setup(noise, |_| {});
    let mut engine = engine(setup.clone());
    for n in 0..2000 {
        let (level, warmth, error) = world(n);
        let seconds = STEP * f64::from(n);
        let inputs = [
            temperature(seconds, warmth),
            reference_value(0, seconds, level),
            indication(0, seconds, level + error),
        ];
        feed(&mut engine, &inputs);
    }
    let end = STEP * 2000.0;
    let mut tell = |seconds: f64, warmth: Option<f64>, value: f64| {
        let mut inputs = Vec::from_iter(warmth.map(|warmth| temperature(end + seconds, warmth)));
        inputs.push(indication(0, end + seconds, value));
        let outputs = feed(&mut engine, &inputs);
        let value = corrected(&outputs)
            .into_iter()
            .next()
            .expect("a corrected value");
        value.clone()
    };
    let inside = tell(0.0, Some(15.0), 24.0);
    assert!(!inside.beyond_range, "{inside:?}");
    assert!(tell(1.0, Some(15.0), 27.0).beyond_range, "level above 25");
    assert!(tell(2.0, Some(15.0), 13.0).beyond_range, "level below 15");
    assert!(tell(3.0, Some(25.0), 24.0).beyond_range, "never as warm");
    // The thermometer falls silent: beyond max_gap (120 s) nobody knows.
    let held = tell(100.0, None, 24.0);
    assert!(held.influences_assumed.is_empty(), "{held:?}");
    let assumed = tell(200.0, None, 24.0);
    assert_eq!(assumed.influences_assumed, [0]);
    let document = CorrectedDocument::new(&assumed, &setup.channels[0]);
    let text = serde_json::to_string(&document).expect("a document");
    let document = follows(&text, include_str!("../../config/schemas/corrected.json"));
    assert_eq!(
        document["influences_assumed"],
        serde_json::json!(["temperature"])
    );
    assert!(!assumed.beyond_range, "{assumed:?}");
    // It may be 4 °C off the centre, either way.
    let wider = assumed.expanded_uncertainty - inside.expanded_uncertainty;
    assert!((wider - 4.0 * EFFECT).abs() < 0.01, "{wider}");
}

#[test]
fn a_pair_without_its_temperature_stays_out_and_is_counted() {
    let setup = setup(PairNoise::default(), |channel| {
        channel.max_gap = span(120.0);
    });
    let mut engine = engine(setup);
    let mut outputs = feed(
        &mut engine,
        &[temperature(0.0, 15.0), temperature(100.0, 17.0)],
    );
    for seconds in [50.0, 300.0, 700.0] {
        let inputs = [
            reference_value(0, seconds, 20.0),
            indication(0, seconds, 20.5),
        ];
        outputs.extend(feed(&mut engine, &inputs));
    }
    let fates: Vec<_> = outputs
        .iter()
        .filter_map(|output| match output {
            Output::Pair(fate) => {
                let rejected = fate.rejected.map(|rejection| rejection.reason);
                Some((since_start(fate.phenomenon), rejected))
            }
            _ => None,
        })
        .collect();
    // The one at 700 s may still get its temperature.
    let expected = [(50.0, None), (300.0, Some(RefusedReason::NoInfluence))];
    assert_eq!(fates, expected);
    let told = outputs.iter().any(|output| {
        matches!(output, Output::Notice(notice)
            if notice.code == "no-influence" && notice.text.contains("temperature"))
    });
    assert!(told, "{outputs:?}");
}

/// The level is the same always: nothing tells span from zero.
#[test]
fn at_one_level_no_span_is_claimed() {
    let setup = setup(PairNoise::default(), |channel| {
        channel.fit.influences = 0;
        channel.influences.clear();
    });
    let mut engine = engine(setup.clone());
    let mut random = ChaCha12Rng::seed_from_u64(9_503);
    let noise = Normal::new(0.0, 0.02).expect("a deviation");
    let mut outputs = Vec::new();
    for n in 0..1200 {
        let seconds = STEP * f64::from(n);
        let drift = 0.5 + 0.0005 * f64::from(n);
        let inputs = [
            reference_value(0, seconds, 20.0),
            indication(0, seconds, 20.0 + drift + noise.sample(&mut random)),
        ];
        outputs.extend(feed(&mut engine, &inputs));
    }
    let all = corrections(&outputs);
    assert!(all.len() > 10);
    for correction in &all {
        let document = json(correction, &setup);
        assert_eq!(document["span"], serde_json::json!([]));
        let claim = document["claim"].as_str().expect("a claim");
        assert!(claim.starts_with("zero only, valid near 20"), "{claim}");
    }
    let last = json(all.last().expect("one"), &setup);
    assert_eq!(last["span_refused"], "no-spread");
    assert_eq!(last["judged_at"], 20.0);
}

/// The documents of all changes of the announced model; people are told as well, though soon after
/// another notice of the same code only by its count.
fn changes(outputs: &[Output], setup: &Setup) -> Vec<Value> {
    let codes = ["model-changed", "degree-raised", "degree-lowered"];
    let told = outputs.iter().filter(
        |output| matches!(output, Output::Notice(notice) if codes.contains(&notice.code.as_str())),
    );
    let each = outputs.iter().filter_map(|output| match output {
        Output::Degree(change) => {
            let document = DegreeDocument::new(change, &setup.channels[0]);
            let text = serde_json::to_string(&document).expect("a document");
            Some(follows(
                &text,
                include_str!("../../config/schemas/degree.json"),
            ))
        }
        _ => None,
    });
    let changes: Vec<Value> = each.collect();
    assert!((1..=changes.len()).contains(&told.count()));
    changes
}

/// Every change states the numbers that decided it, whichever term it is of; also the withdrawal of
/// a span whose level has stopped to vary.
#[test]
fn every_change_of_the_model_states_its_evidence() {
    let noise = PairNoise {
        reference: 0.005,
        indication: 0.02,
    };
    let setup = setup(noise, |_| {});
    let mut engine = engine(setup.clone());
    let mut random = ChaCha12Rng::seed_from_u64(9_507);
    let normal = Normal::new(0.0, 0.02).expect("a deviation");
    let mut outputs = Vec::new();
    for n in 0..2200 {
        let (level, warmth, _) = world(n);
        let level = if n < 1500 { level } else { 20.0 };
        let seconds = STEP * f64::from(n);
        let shown = level + error(level, warmth) + normal.sample(&mut random);
        let inputs = [
            temperature(seconds, warmth),
            reference_value(0, seconds, level),
            indication(0, seconds, shown),
        ];
        outputs.extend(feed(&mut engine, &inputs));
    }
    let changes = changes(&outputs, &setup);
    let number = |change: &Value, key: &str| change[key].as_f64().expect("a number");
    let of = |term: &str| -> Vec<&Value> {
        let own = changes.iter().filter(|change| change["term"] == term);
        own.collect()
    };
    let [claimed] = of("influence")[..] else {
        panic!("the temperature is claimed once: {changes:?}");
    };
    assert_eq!(claimed["influence"], "temperature");
    let [raised, withdrawn] = of("span")[..] else {
        panic!("the span is claimed and withdrawn: {changes:?}");
    };
    for change in [claimed, raised] {
        assert_eq!((number(change, "from"), number(change, "to")), (0.0, 1.0));
        assert!(number(change, "gain") >= number(change, "needed"));
        assert!(number(change, "held_segments") >= number(change, "needed_segments"));
        assert_eq!(change["rss"].as_array().map(Vec::len), Some(2));
        assert_eq!(change["refused"], Value::Null);
    }
    assert_eq!(raised["influence"], Value::Null);
    assert_eq!(
        (number(withdrawn, "from"), number(withdrawn, "to")),
        (1.0, 0.0)
    );
    // What is left of the spread bends the slope before there is none.
    assert_eq!(withdrawn["refused"], "regressor-noise");
    assert!(of("zero").is_empty(), "nothing drifts: {changes:?}");
}

/// What is not configured is not refused either; what is, is refused from the first document on
/// until there are segments enough to tell.
#[test]
fn a_span_is_refused_only_where_one_is_configured() {
    let noise = (0.0, 0.02);
    let without = setup(PairNoise::default(), |channel| {
        channel.fit.max_span_degree = None;
    });
    let outputs = run(&without, 600, noise, 9_505);
    let all = corrections(&outputs);
    assert!(all.len() > 3);
    for correction in all {
        assert_eq!(json(correction, &without)["span_refused"], Value::Null);
    }
    let with = setup(PairNoise::default(), |_| {});
    let outputs = run(&with, 6, noise, 9_506);
    let first = *corrections(&outputs).first().expect("a correction");
    assert_eq!(json(first, &with)["span_refused"], "few-segments");
}

/// A level that has left the window is no longer one that the correction was learned at.
#[test]
fn the_range_is_that_of_the_window() {
    let setup = setup(PairNoise::default(), |channel| {
        channel.fit.window = WindowLength::Pairs(128);
    });
    let mut engine = engine(setup);
    let mut outputs = Vec::new();
    for n in 0..600_u32 {
        // High for a while, then low for good.
        let level = if n < 100 { 40.0 } else { 20.0 } + f64::from(n % 7);
        let seconds = STEP * f64::from(n);
        let inputs = [
            temperature(seconds, 15.0 + f64::from(n % 5)),
            reference_value(0, seconds, level),
            indication(0, seconds, level + 0.5 + 0.01 * f64::from(n % 3)),
        ];
        outputs.extend(feed(&mut engine, &inputs));
    }
    let ranges: Vec<_> = corrections(&outputs).iter().map(|it| it.range).collect();
    assert!(ranges.contains(&(20.0, 46.0)), "{ranges:?}");
    assert_eq!(ranges.last(), Some(&(20.0, 26.0)));
}

/// Zero and span checks alone, before and after each interval, correct as the two-point formula for
/// gas analysers does (check values V33 and V34: 40 CFR 1065.672 and Method 7E, from memory).
#[test]
fn zero_and_span_checks_reproduce_the_two_point_formulas() {
    // x = 0 + (1800 − 0)·(2·435.5 − (0.6 − 5.2)) / ((1800.5 + 1695.8) − (0.6 − 5.2))
    let v33 = ((0.6, -5.2), (1800.5, 1695.8), 1800.0, 435.5, 450.1928);
    // C = (50 − 0.5)·50 / (49 − 0.5): one check before, the same after.
    let v34 = ((0.5, 0.5), (49.0, 49.0), 50.0, 50.0, 51.0309);
    for (zeros, spans, gas, shown, wanted) in [v33, v34] {
        let document = two_point(zeros, spans, gas);
        let claim = document["claim"].as_str().expect("a claim");
        assert!(
            claim.starts_with("zero and span"),
            "{claim}, {}",
            document["span_refused"]
        );
        let corrected = shown + consume(&document, 0.0, shown, &[]);
        // Half a unit of the value's last digit.
        assert!(
            (corrected - wanted).abs() < 5e-5,
            "{corrected} for {wanted}"
        );
        assert_eq!(document["reference"], "zero-gas, span-gas");
    }
}

/// What the checks of eight cycles scatter by, at the zero and at the span: in sum nothing, so that
/// their means stay, and not alike, so that the scatter tells how sure the span is.
const SCATTER: [(f64, f64); 8] = [
    (1.0, -1.0),
    (-1.0, -1.0),
    (-1.0, 1.0),
    (1.0, 1.0),
    (-1.0, 1.0),
    (1.0, -1.0),
    (1.0, 1.0),
    (-1.0, -1.0),
];

/// The last document after many cycles of such checks: (before, after) of zero and span gas. The
/// readings in between, with both gates shut, are no pairs.
fn two_point(zeros: (f64, f64), spans: (f64, f64), gas: f64) -> Value {
    let gated = |value| ReferenceKind::Constant { value, gated: true };
    let points = vec![ReferenceId(0), ReferenceId(1)];
    let references = vec![
        reference("zero-gas", gated(0.0)),
        reference("span-gas", gated(gas)),
        reference("stack/nox", ReferenceKind::Checks { points }),
    ];
    let mut channel = channel("stack/nox", 2);
    channel.lateness = span(0.0);
    channel.fit.window = WindowLength::Pairs(128);
    channel.fit.segments = 32;
    channel.fit.max_degree = 0;
    channel.fit.forced_degree = Some(0);
    channel.fit.max_span_degree = Some(0);
    channel.screening.enabled = false;
    // A document per judgement, so that the last one rests on whole cycles.
    channel.publish.step = 1e-9;
    // The analyser repeats to a thousandth; the gases are better.
    channel.fit.noise = PairNoise {
        reference: 1e-6 * gas,
        indication: 1e-3 * gas,
    };
    let setup = node(Clock::Readings, references, vec![channel]);
    let mut engine = engine(setup.clone());
    let mut outputs = Vec::new();
    for cycle in 0..400_u32 {
        let (zero, span) = if cycle % 2 == 0 {
            (zeros.0, spans.0)
        } else {
            (zeros.1, spans.1)
        };
        let begin = 3600.0 * f64::from(cycle);
        let scatter = SCATTER[cycle as usize % SCATTER.len()];
        let unit = 1e-3 * gas;
        let (zero, span) = (zero + unit * scatter.0, span + unit * scatter.1);
        let inputs = [
            gate(0, begin, true),
            indication(0, begin + 60.0, zero),
            gate(0, begin + 120.0, false),
            gate(1, begin + 180.0, true),
            indication(0, begin + 240.0, span),
            gate(1, begin + 300.0, false),
            indication(0, begin + 360.0, 0.3 * gas),
        ];
        outputs.extend(feed(&mut engine, &inputs));
    }
    let pairs = outputs.iter().filter(|it| matches!(it, Output::Pair(_)));
    assert_eq!(pairs.count(), 800, "the sample itself is no check");
    let last = *corrections(&outputs).last().expect("a correction");
    json(last, &setup)
}

#[test]
fn a_monitored_channel_is_judged_and_never_corrected() {
    let outputs = run(
        &setup(PairNoise::default(), |channel| {
            channel.monitor_only = true;
            channel.corrected_values = false;
            channel.max_permissible_error = Some(0.3);
        }),
        1000,
        (0.0, 0.02),
        9_504,
    );
    assert!(corrections(&outputs).is_empty() && corrected(&outputs).is_empty());
    let alarmed = outputs
        .iter()
        .any(|output| matches!(output, Output::Alarm(_)));
    assert!(alarmed, "an error of 0.5 is beyond 0.3");
}

/// Whoever takes the protection away, or gives it, finds it told.
#[test]
fn monitor_only_is_told_when_it_changes() {
    let open = setup(PairNoise::default(), |channel| {
        channel.corrected_values = false;
    });
    let mut shut = open.clone();
    shut.channels[0].monitor_only = true;
    let mut engine = engine(open.clone());
    for n in 0..100 {
        let seconds = STEP * f64::from(n);
        let inputs = [
            temperature(seconds, 15.0),
            reference_value(0, seconds, 20.0),
            indication(0, seconds, 20.5 + 0.01 * f64::from(n % 2)),
        ];
        feed(&mut engine, &inputs);
    }
    let mut edit = |setup: &Setup| feed(&mut engine, &[Input::Setup(Box::new(setup.clone()))]);
    let codes = |outputs: &[Output]| {
        let codes = outputs.iter().filter_map(|output| match output {
            Output::Notice(notice) => Some(notice.code.clone()),
            Output::Withdrawn { .. } => Some("withdrawn".to_owned()),
            _ => None,
        });
        codes.collect::<Vec<_>>()
    };
    assert_eq!(codes(&edit(&shut)), ["monitor-only-on", "withdrawn"]);
    assert_eq!(codes(&edit(&shut)), Vec::<String>::new());
    assert_eq!(codes(&edit(&open)), ["monitor-only-off"]);
    let at_once = at(STEP * 100.0);
    assert!(at_once > START);
    let inputs = [
        temperature(STEP * 100.0, 15.0),
        reference_value(0, STEP * 100.0, 20.0),
        indication(0, STEP * 100.0, 20.5),
    ];
    let outputs = feed(&mut engine, &inputs);
    assert_eq!(
        corrections(&outputs).len(),
        1,
        "what was learned meanwhile counts"
    );
}
