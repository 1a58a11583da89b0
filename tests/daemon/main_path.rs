//! The main job with the real binary and a real broker: readings in, corrections out, as a consumer
//! would read and apply them; every format, both protocol versions.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use crate::live::schemas::Schemas;
use serde_json::Value;

/// 2026-03-01T00:00:00Z.
const START_SECONDS: i64 = 1_772_323_200;
const HOUR_SECONDS: i64 = 3600;
/// Ten days of hourly readings.
const READINGS: i64 = 240;

/// The error planted in the readings, after so many days: 0.5 V and 0.04 V a day.
fn true_error(days: f64) -> f64 {
    0.5 + 0.04 * days
}

/// What the sensor shows at the reading with this number, and the reference value: a daily swing,
/// the planted error, and a little noise without trend.
fn reading(number: i64) -> (f64, f64) {
    let days = f64::from(i32::try_from(number).unwrap()) / 24.0;
    let reference = 20.0 + (days * std::f64::consts::TAU).sin();
    // A fixed sequence that jumps evenly over −0.5 … 0.5 (Weyl, golden ratio).
    let noise = (f64::from(i32::try_from(number).unwrap()) * 0.618_033_988_749_895).fract() - 0.5;
    (reference + true_error(days) + 0.02 * noise, reference)
}

fn json_lines() -> Vec<String> {
    (0..READINGS)
        .map(|number| {
            let (indication, reference) = reading(number);
            let time = START_SECONDS + number * HOUR_SECONDS;
            format!("{{\"i\":{indication:?},\"r\":{reference:?},\"t\":{time}}}")
        })
        .collect()
}

const JSON_CHANNEL: &str = r#"
[[channel]]
name = "hall/volt-1"
unit = "V"
indication = { topic = "plant/volt", value = "/i", time = "/t" }
reference = { value = "/r", certificate = "C-1" }
window = "12 d"
segments = 48
max_permissible_error = 0.6
max_correction = 9.0
corrected_values = true
"#;

/// Seconds since 1970 of a document's time.
fn seconds(text: &Value) -> f64 {
    let instant: jiff::Timestamp = text.as_str().unwrap().parse().unwrap();
    let nanoseconds = instant.as_nanosecond() - i128::from(START_SECONDS) * 1_000_000_000;
    f64::from(i32::try_from(nanoseconds / 1_000_000).unwrap()) / 1000.0
}

fn horner(coefficients: &Value, t: f64) -> f64 {
    let coefficients = coefficients.as_array().unwrap();
    coefficients
        .iter()
        .rev()
        .fold(0.0, |sum, it| sum * t + it.as_f64().unwrap())
}

/// The correction of an indication, exactly as the schema tells a consumer to compute it.
fn correction_of(document: &Value, indication: f64, at_seconds: f64) -> f64 {
    let t = (at_seconds - seconds(&document["origin"])) / 86_400.0;
    let zero = horner(&document["zero"], t);
    let span = horner(&document["span"], t);
    let centre = document["span_centre"].as_f64().unwrap();
    (zero + span * (indication - centre)) / (1.0 - span)
}

/// Checks the last correction against the planted truth and returns it.
fn check_correction(payload: &[u8]) -> Value {
    let document: Value = serde_json::from_slice(payload).unwrap();
    let last = READINGS - 1;
    let at = f64::from(i32::try_from(last * HOUR_SECONDS).unwrap());
    let (indication, reference) = reading(last);
    let corrected = indication + correction_of(&document, indication, at);
    let before = (indication - reference).abs();
    let after = (corrected - reference).abs();
    assert!(before > 0.85, "the planted error is {before}");
    assert!(after < 0.03, "after correction {after}: {document}");
    // The document states what it knew at its own newest pair; its polynomial goes on from there.
    let planted = true_error(seconds(&document["origin"]) / 86_400.0);
    let estimate = -document["correction"].as_f64().unwrap();
    let expanded = document["expanded_uncertainty"].as_f64().unwrap();
    assert!(expanded > 0.0 && expanded < 0.05, "U = {expanded}");
    assert!(
        (estimate - planted).abs() <= 2.0 * expanded,
        "{estimate} ± {expanded}, {planted}"
    );
    document
}

#[test]
fn json_in_and_a_retained_correction_out_that_makes_the_sensor_true() {
    let broker = Mosquitto::start();
    let listener = Listener::start(broker.port, "holdtrue/#");
    let mut daemon = Holdtrue::prepare_with(broker.port, "time = \"readings\"", "", JSON_CHANNEL);
    daemon.launch();
    listener.wait_state("running");
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/volt", &json_lines());
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", READINGS);
    let ended = daemon.stop();
    assert!(ended.success(), "{ended:?}");

    let retained = broker
        .retained("holdtrue/test/correction/hall/volt-1")
        .unwrap();
    let document = check_correction(&retained);
    assert_eq!(document["degree"], 1);
    assert_eq!(document["reference"], "hall/volt-1");
    assert_eq!(document["certificate"], "C-1");

    let schemas = Schemas::read();
    let all = listener.all();
    let kinds: std::collections::BTreeSet<&str> = all.iter().map(|it| schemas.check(it)).collect();
    for kind in [
        "correction",
        "corrected",
        "outlook",
        "state",
        "alarm",
        "degree",
    ] {
        assert!(kinds.contains(kind), "no {kind} among {kinds:?}");
    }
    check_order(&listener);
    // The error passed its limit after 2.5 days.
    let alarm = broker
        .retained("holdtrue/test/alarm/channel/hall/volt-1/error-limit")
        .unwrap();
    let alarm: Value = serde_json::from_slice(&alarm).unwrap();
    assert_eq!(alarm["state"], "unacknowledged");
    let state = broker.retained("holdtrue/test/state").unwrap();
    let state: Value = serde_json::from_slice(&state).unwrap();
    assert_eq!(state["state"], "stopped");
    assert_eq!(state["standing"]["refused"], serde_json::json!([]));
}

/// Issue numbers rise by one, and a corrected value uses a correction that was published before it.
fn check_order(listener: &Listener) {
    let mut issued = 0;
    for heard in listener.on("holdtrue/test/corre") {
        let number = heard.json()["issue_number"].as_u64().unwrap();
        if heard.topic.contains("/correction/") {
            assert_eq!(number, issued + 1);
            issued = number;
        } else {
            assert!(
                number <= issued,
                "correction {number} used before it was published"
            );
            let json = heard.json();
            let sum = json["indication"].as_f64().unwrap() + json["correction"].as_f64().unwrap();
            assert_eq!(json["corrected"].as_f64().unwrap().to_bits(), sum.to_bits());
        }
    }
    assert!(issued > 1, "only {issued} corrections");
}

#[test]
fn the_same_over_mqtt_3_1_1() {
    let broker = Mosquitto::start();
    let listener = Listener::start(broker.port, "holdtrue/#");
    let mut daemon = Holdtrue::prepare_with(
        broker.port,
        "time = \"readings\"",
        "protocol = 4",
        JSON_CHANNEL,
    );
    daemon.launch();
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/volt", &json_lines());
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", READINGS);
    assert!(daemon.stop().success());
    check_correction(
        &broker
            .retained("holdtrue/test/correction/hall/volt-1")
            .unwrap(),
    );
    listener.wait_state("stopped");
}

#[test]
fn senml_packs_against_laboratory_values() {
    let broker = Mosquitto::start();
    let channel = r#"
[[reference]]
name = "lab/volt"
topic = "plant/lab"
value = "/v"
time = "/t"
[[channel]]
name = "hall/volt-1"
unit = "V"
indication = { topic = "plant/pack", senml = "urn:dev:a1:volt" }
reference = "lab/volt"
window = "12 d"
segments = 48
lateness = "30 d"
"#;
    let mut daemon = Holdtrue::prepare_with(broker.port, "time = \"readings\"", "", channel);
    daemon.launch();
    daemon.wait_log("subscribed");
    // Packs of 24 hourly values; references one by one.
    let packs: Vec<String> = (0..READINGS / 24)
        .map(|day| {
            let records: Vec<String> = (day * 24..(day + 1) * 24)
                .map(|number| {
                    let time = (number - day * 24) * HOUR_SECONDS;
                    format!("{{\"t\":{time},\"v\":{:?}}}", reading(number).0)
                })
                .collect();
            let base = START_SECONDS + day * 24 * HOUR_SECONDS;
            let rest = records.join(",").replacen('{', "", 1);
            format!("[{{\"bn\":\"urn:dev:a1:volt\",\"bt\":{base},{rest}]")
        })
        .collect();
    let references: Vec<String> = (0..READINGS)
        .map(|number| {
            let time = START_SECONDS + number * HOUR_SECONDS;
            format!("{{\"v\":{:?},\"t\":{time}}}", reading(number).1)
        })
        .collect();
    broker.publish_lines("plant/pack", &packs);
    broker.publish_lines("plant/lab", &references);
    daemon.wait_count(
        "SELECT count(*) FROM outputs WHERE kind = 'pair'",
        READINGS - 1,
    );
    assert!(daemon.stop().success());
    check_correction(
        &broker
            .retained("holdtrue/test/correction/hall/volt-1")
            .unwrap(),
    );
}

#[test]
fn plain_numbers_as_they_come() {
    let broker = Mosquitto::start();
    let channel = r#"
[[channel]]
name = "hall/plain"
unit = "V"
indication = { topic = "plant/plain" }
reference = { constant = 2.5 }
window = "1 h"
"#;
    let mut daemon = Holdtrue::start(broker.port, channel);
    daemon.wait_log("subscribed");
    let lines: Vec<String> = (0..40)
        .map(|it| format!(" {:.2} ", 2.74 + 0.01 * f64::from(it % 3)))
        .collect();
    broker.publish_lines("plant/plain", &lines);
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 40);
    assert!(daemon.stop().success());
    // Forty values within milliseconds reach only milliseconds ahead: by now the document has
    // expired and been withdrawn, as it must. What it said stands in the record.
    assert_eq!(broker.retained("holdtrue/test/correction/hall/plain"), None);
    let newest: String = daemon
        .sqlite()
        .query_row(
            "SELECT body FROM outputs WHERE kind = 'correction' ORDER BY position DESC LIMIT 1",
            [],
            |row| row.get(0),
        )
        .unwrap();
    let newest: Value = serde_json::from_str(&newest).unwrap();
    let correction = newest["Correction"]["correction"].as_f64().unwrap();
    assert!((correction + 0.25).abs() < 0.01, "{newest}");
}

#[test]
fn a_flood_that_fills_the_outbox_is_taken_whole_once_and_over_one_connection() {
    let broker = Mosquitto::start();
    let channel = r#"
[[channel]]
name = "flooded"
unit = "V"
indication = { topic = "plant/volt", value = "/i", time = "/t" }
reference = { value = "/r" }
window = "1024 pairs"
publish = { step = 1e-9 }
"#;
    let mut daemon = Holdtrue::prepare_with(broker.port, "time = \"readings\"", "", channel);
    daemon.launch();
    daemon.wait_log("subscribed");
    let readings = 15_000;
    let lines: Vec<String> = (0..readings)
        .map(|number| {
            let value = 1.5 + 0.01 * f64::from(number % 5);
            let time = START_SECONDS + i64::from(number);
            format!("{{\"i\":{value:?},\"r\":1.0,\"t\":{time}}}")
        })
        .collect();
    broker.publish_lines("plant/volt", &lines);
    let pairs = "SELECT count(*) FROM outputs WHERE kind = 'pair'";
    daemon.wait_count(pairs, i64::from(readings));
    assert!(daemon.stop().success());
    let inputs = "SELECT count(*) FROM raw_readings";
    assert_eq!(
        daemon.count(inputs),
        2 * i64::from(readings),
        "some came twice"
    );
    assert_eq!(daemon.count("SELECT count(*) FROM outbox"), 0);
    let documents = daemon.count("SELECT count(*) FROM outputs WHERE kind = 'correction'");
    assert!(
        documents > 4096,
        "only {documents} documents: the outbox was never full"
    );
    assert_eq!(daemon.log().matches("connected to the broker").count(), 1);
}
