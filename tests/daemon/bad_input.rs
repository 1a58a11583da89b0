//! Bad input is counted with its reason, noticed at a limited rate, and changes nothing else.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use crate::live::schemas::Schemas;
use holdtrue::record::{Archive, RecordError};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, RefusedReason};
use std::collections::{BTreeMap, BTreeSet};
use std::time::{SystemTime, UNIX_EPOCH};

const CHANNELS: &str = r#"
[[channel]]
name = "one"
unit = "V"
indication = { topic = "plant/one", value = "/i", time = "/t" }
reference = { value = "/r" }
window = "64 pairs"
segments = 16
[[reference]]
name = "lab"
topic = "plant/lab"
value = "/v"
time = "/t"
[[channel]]
name = "two"
unit = "V"
indication = { topic = "plant/two", value = "/i", time = "/t" }
reference = "lab"
"#;

const WILDCARD: &str = "subscribe = [\"plant/#\"]";

fn now_seconds() -> u64 {
    SystemTime::now()
        .duration_since(UNIX_EPOCH)
        .unwrap()
        .as_secs()
}

fn good(number: u64, time: u64) -> String {
    let value = 1.2 + 0.01 * f64::from(u32::try_from(number % 5).unwrap());
    format!("{{\"i\":{value:?},\"r\":1.0,\"t\":{time}}}")
}

/// Payloads on known topics that no time could make good: reason, topic, payload.
fn garbage() -> Vec<(&'static str, &'static str, Vec<u8>)> {
    let text = |text: &str| text.as_bytes().to_vec();
    vec![
        ("UnknownTopic", "plant/nobody/knows", text("1.0")),
        ("Unreadable", "plant/one", text("{\"i\":1.0,")),
        ("Unreadable", "plant/one", vec![0xff, 0xfe, 0x00, 0x31]),
        (
            "Unreadable",
            "plant/one",
            text("{\"i\":NaN,\"r\":1,\"t\":1772323200}"),
        ),
        (
            "NotFinite",
            "plant/one",
            text("{\"i\":1e400,\"r\":1,\"t\":1772323200}"),
        ),
        (
            "Missing",
            "plant/one",
            text("{\"value\":1.0,\"t\":1772323200}"),
        ),
        (
            "WrongType",
            "plant/one",
            text("{\"i\":\"high\",\"r\":1,\"t\":1772323200}"),
        ),
        (
            "BadTime",
            "plant/one",
            text("{\"i\":1,\"r\":1,\"t\":\"yesterday\"}"),
        ),
        (
            "NegativeTime",
            "plant/one",
            text("{\"i\":1,\"r\":1,\"t\":-5}"),
        ),
        ("Oversize", "plant/one", vec![b'7'; 1_000_000]),
        ("Empty", "plant/one", Vec::new()),
    ]
}

fn counted(daemon: &Holdtrue) -> BTreeMap<String, i64> {
    let connection = daemon.sqlite();
    let mut statement = connection
        .prepare(
            "SELECT json_extract(body, '$.Refused.reason'), count(*) FROM inputs
             WHERE kind = 'refused' GROUP BY 1",
        )
        .unwrap();
    let rows = statement
        .query_map([], |row| Ok((row.get(0)?, row.get(1)?)))
        .unwrap();
    rows.map(Result::unwrap).collect()
}

#[test]
fn each_kind_is_counted_with_its_reason_and_nothing_else_changes() {
    let broker = Mosquitto::start();
    broker.publish_with("plant/lab", b"{\"v\":99,\"t\":1772323200}", &["-r"]);
    let listener = Listener::start(broker.port, "holdtrue/#");
    let mut daemon = Holdtrue::prepare_with(broker.port, "", WILDCARD, CHANNELS);
    daemon.launch();
    daemon.wait_log("subscribed");
    let start = now_seconds() - 100;
    let mut readings = 0;
    for (round, (_, topic, payload)) in (0..).zip(garbage()) {
        for number in round * 6..(round + 1) * 6 {
            broker.publish("plant/one", good(number, start + number).as_bytes());
            readings += 1;
        }
        broker.publish(topic, &payload);
    }
    // A clock that is off by an hour, either way, and a value from the far future.
    for time in [start + 3600, start - 3600, 32_503_680_000] {
        broker.publish("plant/one", good(1, time).as_bytes());
    }
    broker.publish("plant/one", good(999, start + 90).as_bytes());
    daemon.wait_count(
        &format!(
            "SELECT count(*) FROM raw_readings WHERE phenomenon = {}000000000",
            start + 90
        ),
        2,
    );
    assert!(daemon.stop().success());

    let counted = counted(&daemon);
    let expected: BTreeSet<String> = garbage()
        .iter()
        .map(|it| it.0.to_owned())
        // The shell can read such a time; the engine refuses it, as it does late and future ones.
        .filter(|reason| reason != "NegativeTime")
        .chain(["Retained".to_owned()])
        .collect();
    assert_eq!(
        counted.keys().cloned().collect::<BTreeSet<_>>(),
        expected,
        "{counted:?}"
    );
    assert_eq!(readings, 66);
    check_state_document(&broker);
    check_notices(&listener);
    compare_with_a_run_without(&daemon, start);
}

fn check_state_document(broker: &Mosquitto) {
    let state = broker.retained("holdtrue/test/state").unwrap();
    let state: serde_json::Value = serde_json::from_slice(&state).unwrap();
    let mut reasons = BTreeMap::new();
    for refused in state["standing"]["refused"].as_array().unwrap() {
        let reason = refused["reason"].as_str().unwrap().to_owned();
        *reasons.entry(reason).or_insert(0) += refused["count"].as_u64().unwrap();
    }
    for reason in [
        "unknown-topic",
        "empty",
        "oversize",
        "unreadable",
        "missing",
        "wrong-type",
        "not-finite",
        "bad-time",
        "retained",
        "negative-time",
        "future",
        "late",
    ] {
        assert!(
            reasons.contains_key(reason),
            "{reason} not counted: {reasons:?}"
        );
    }
}

fn check_notices(listener: &Listener) {
    let schemas = Schemas::read();
    let mut seen = BTreeMap::new();
    for heard in listener.all() {
        schemas.check(&heard);
        if heard.topic.ends_with("/notice") {
            let json = heard.json();
            let key = format!("{} {} {}", json["subject"], json["name"], json["code"]);
            *seen.entry(key).or_insert(0) += 1;
        }
    }
    assert!(seen.len() >= 10, "too few kinds noticed: {seen:?}");
    // Within the few seconds of this test, one of a kind.
    assert!(
        seen.values().all(|count| *count == 1),
        "not limited: {seen:?}"
    );
}

/// Feeds two engines from the record: one with everything, one without what is bad.
fn compare_with_a_run_without(daemon: &Holdtrue, start: u64) {
    let archive = Archive::open(&daemon.record()).unwrap();
    let in_time = |time: i64| {
        let start = i64::try_from(start).unwrap();
        (start..=start + 90).contains(&(time / 1_000_000_000))
    };
    let (mut all, mut clean) = (Engine::new(), Engine::new());
    let mut left_out = 0;
    archive
        .walk::<RecordError>(|row| {
            let (mut from_all, mut from_clean) = (Vec::new(), Vec::new());
            all.step(row.input, &mut from_all);
            let bad = match row.input {
                Input::Refused(_) => true,
                Input::Reading(reading) => !in_time(reading.phenomenon.0),
                _ => false,
            };
            left_out += i32::from(bad);
            if !bad {
                clean.step(row.input, &mut from_clean);
            }
            from_all.retain(|output| !matches!(output, Output::Notice(_)));
            from_clean.retain(|output| !matches!(output, Output::Notice(_)));
            let texts = |outputs: &[Output]| -> Vec<String> {
                outputs.iter().map(holdtrue::record::output_text).collect()
            };
            assert_eq!(
                texts(&from_all),
                texts(&from_clean),
                "input {}",
                row.position
            );
            Ok(())
        })
        .unwrap();
    assert!(left_out >= 15, "only {left_out}");
    let text = |engine: &Engine| serde_json::to_string(engine.state()).unwrap();
    assert_eq!(text(&all), text(&clean));
    let pairs = clean.standing().channels[0].pairs;
    assert!(pairs >= 66, "the good readings were not used: {pairs}");
    assert_eq!(clean.standing().counters.all(), []);
    let counters = all.standing().counters;
    let late: u64 = counters
        .all()
        .iter()
        .filter(|count| count.reason == RefusedReason::Late)
        .map(|count| count.count)
        .sum();
    assert!(late > 0);
}

#[test]
fn retained_documents_are_byte_identical_to_a_run_without() {
    let run = |with_garbage: bool| {
        let broker = Mosquitto::start();
        let mut daemon =
            Holdtrue::prepare_with(broker.port, "time = \"readings\"", WILDCARD, CHANNELS);
        // The configuration holds the broker's port, and documents the configuration's fingerprint.
        let listener = Listener::start(broker.port, "holdtrue/test/state");
        daemon.launch();
        daemon.wait_log("subscribed");
        for round in 0..11 {
            let lines: Vec<String> = (round * 20..(round + 1) * 20)
                .map(|it| good(it, 1_772_323_200 + it))
                .collect();
            broker.publish_lines("plant/one", &lines);
            if with_garbage {
                let (_, topic, payload) = &garbage()[usize::try_from(round).unwrap()];
                broker.publish(topic, payload);
            }
        }
        daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 220);
        assert!(daemon.stop().success());
        listener.wait_state("stopped");
        let mut all = broker.all_retained("holdtrue/#");
        all.retain(|(topic, _)| !topic.ends_with("/state"));
        let fingerprint = |payload: &str| -> String {
            let json: serde_json::Value = serde_json::from_str(payload).unwrap();
            json["configuration"]
                .as_str()
                .unwrap_or_default()
                .to_owned()
        };
        for (_, payload) in &mut all {
            let own = fingerprint(payload);
            *payload = payload.replace(&own, "");
        }
        all
    };
    let (clean, dirty) = (run(false), run(true));
    assert!(!clean.is_empty(), "nothing is retained");
    assert_eq!(clean, dirty);
}
