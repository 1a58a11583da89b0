//! Broker restarts, kills and orderly ends: nothing that the broker took is lost, nothing is
//! stepped twice, and a restart ends in the state that was.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use crate::live::publisher::Publisher;
use crate::live::wait_for;
use holdtrue::record::{Archive, RecordError};
use holdtrue_engine::engine::Engine;
use std::collections::BTreeMap;
use std::path::Path;

/// 2026-03-01T00:00:00Z.
const START_SECONDS: usize = 1_772_323_200;

const CHANNEL: &str = r#"
[[channel]]
name = "one"
unit = "V"
indication = { topic = "plant/one", value = "/i", time = "/t" }
reference = { value = "/r" }
window = "1 h"
lateness = "1 h"
"#;

const READINGS: &str = "time = \"readings\"";

/// Readings one second apart; the number can be told from the time.
fn payloads(count: usize) -> Vec<String> {
    (0..count)
        .map(|number| {
            let value = 1.0 + f64::from(u32::try_from(number % 7).unwrap()) * 0.01;
            format!(
                "{{\"i\":{value:?},\"r\":1.0,\"t\":{}}}",
                START_SECONDS + number
            )
        })
        .collect()
}

/// All inputs.
const INPUTS: &str = "SELECT (SELECT count(*) FROM inputs) + (SELECT count(*) FROM raw_readings)";

/// How often each reading made a pair, by its number, from the recorded outputs.
fn pairs(daemon: &Holdtrue) -> BTreeMap<usize, usize> {
    let connection = daemon.sqlite();
    let mut statement = connection
        .prepare("SELECT body FROM outputs WHERE kind = 'pair'")
        .unwrap();
    let mut rows = statement.query([]).unwrap();
    let mut counts = BTreeMap::new();
    while let Some(row) = rows.next().unwrap() {
        let body: String = row.get(0).unwrap();
        let json: serde_json::Value = serde_json::from_str(&body).unwrap();
        let nanoseconds = json["Pair"]["phenomenon"].as_u64().unwrap();
        let number = usize::try_from(nanoseconds / 1_000_000_000).unwrap() - START_SECONDS;
        *counts.entry(number).or_insert(0) += 1;
    }
    counts
}

/// Connections that the daemon made.
fn connected(daemon: &Holdtrue) -> usize {
    daemon.log().matches("connected to the broker").count()
}

/// The state that the record leads to, from its first input on.
fn replayed(folder: &Path) -> Engine {
    let mut engine = Engine::new();
    let mut outputs = Vec::new();
    Archive::open(folder)
        .unwrap()
        .walk::<RecordError>(|row| {
            outputs.clear();
            engine.step(row.input, &mut outputs);
            let now: Vec<String> = outputs.iter().map(holdtrue::record::output_text).collect();
            let recorded: Vec<String> = row.outputs.iter().map(|said| said.body.clone()).collect();
            assert_eq!(now, recorded, "input {}", row.position);
            Ok(())
        })
        .unwrap();
    engine
}

#[tokio::test]
async fn every_reading_that_the_broker_took_is_in_the_record_once_over_two_broker_restarts() {
    let mut broker = Mosquitto::start();
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", CHANNEL);
    daemon.launch();
    daemon.wait_log("subscribed");
    let payloads = payloads(4000);
    let publisher = Publisher::new(broker.port, "plant/one");
    let mut restarts = vec![2600, 1200];
    let taken = publisher
        .publish_all(&payloads, 5, |acknowledged| {
            if restarts.last().is_some_and(|at| acknowledged >= *at) {
                restarts.pop();
                broker.stop();
                broker.launch();
                // The next restart must meet a connection, not the pause between attempts.
                let connections = 3 - restarts.len();
                wait_for("connected again", || {
                    (connected(&daemon) == connections).then_some(())
                });
            }
        })
        .await;
    assert!(restarts.is_empty());
    assert!(
        taken.len() > 3980,
        "only {} reached the broker",
        taken.len()
    );
    let last = START_SECONDS + taken.last().unwrap();
    daemon.wait_count(
        &format!(
            "SELECT count(*) FROM outputs WHERE kind = 'pair' AND body LIKE '%{last}000000000%'"
        ),
        1,
    );
    assert!(daemon.stop().success());
    let pairs = pairs(&daemon);
    for number in &taken {
        assert_eq!(pairs.get(number), Some(&1), "reading {number}");
    }
    assert!(pairs.values().all(|count| *count == 1));
    assert_eq!(connected(&daemon), 3);
    replayed(&daemon.record());
}

#[tokio::test]
async fn killed_without_warning_it_goes_on_where_it_was() {
    let broker = Mosquitto::start();
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", CHANNEL);
    daemon.launch();
    daemon.wait_log("subscribed");
    let payloads = payloads(3000);
    let publisher = Publisher::new(broker.port, "plant/one");
    let mut kills = vec![2200, 1500, 700];
    let taken = publisher
        .publish_all(&payloads, 50, |acknowledged| {
            if kills.last().is_some_and(|at| acknowledged >= *at) {
                kills.pop();
                // In mid-stream: some of it is recorded, some is not.
                let pairs = i64::try_from(acknowledged).unwrap() - 200;
                daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", pairs);
                daemon.kill();
                daemon.launch();
            }
        })
        .await;
    assert_eq!((taken.len(), kills.len()), (3000, 0));
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 3000);
    // Told to end, it acknowledges everything that it has; nothing is left to come twice.
    assert!(daemon.stop().success());
    let pairs = pairs(&daemon);
    assert_eq!(pairs.len(), 3000, "readings lost");
    assert!(
        pairs.values().all(|count| *count == 1),
        "readings stepped twice"
    );
    let killed = replayed(&daemon.record());
    let inputs = daemon.count(INPUTS);
    daemon.launch();
    daemon.wait_log("connected to the broker");
    assert!(daemon.stop().success());
    assert_eq!(daemon.count(INPUTS), inputs, "the restart added inputs");
    assert_eq!(replayed(&daemon.record()), killed);
}

#[test]
fn the_will_speaks_when_it_is_killed_and_the_goodbye_when_it_is_told_to_end() {
    for protocol in [5, 4] {
        let broker = Mosquitto::start();
        let listener = Listener::start(broker.port, "holdtrue/test/state");
        let settings = format!("protocol = {protocol}");
        let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, &settings, CHANNEL);
        daemon.launch();
        listener.wait_state("running");
        daemon.kill();
        listener.wait_state("lost");
        daemon.launch();
        listener.forget();
        listener.wait_state("running");
        listener.forget();
        assert!(daemon.stop().success());
        listener.wait_state("stopped");
        // After the goodbye the will must not come. The broker handles in order: what is published
        // now arrives after it.
        broker.publish("holdtrue/test/state", b"{\"state\":\"end of test\"}");
        listener.wait_state("end of test");
        let states: Vec<String> = listener
            .all()
            .iter()
            .map(|it| it.json()["state"].as_str().unwrap().to_owned())
            .collect();
        assert!(!states.contains(&"lost".to_owned()), "{states:?}");
    }
}

#[test]
fn what_was_not_committed_when_told_to_end_is_committed_and_acknowledged() {
    let broker = Mosquitto::start();
    let rest = CHANNEL.to_owned();
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", &rest);
    let text = std::fs::read_to_string(daemon.folder().join("holdtrue.toml")).unwrap();
    std::fs::write(
        daemon.folder().join("holdtrue.toml"),
        text.replace("commit = \"100 ms\"", "commit = \"60 s\""),
    )
    .unwrap();
    daemon.launch();
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/one", &payloads(20));
    // Nothing tells from outside what it holds in memory; what it had not received by now it gets
    // after the restart, so the outcome is the same either way.
    std::thread::sleep(std::time::Duration::from_millis(500));
    assert!(daemon.stop().success());
    assert_eq!(pairs(&daemon).len(), 20);
    daemon.launch();
    daemon.wait_log("connected to the broker");
    assert!(daemon.stop().success());
    let refused = daemon.count("SELECT count(*) FROM raw_readings");
    assert_eq!(
        refused, 40,
        "20 indications and 20 references; more would have come twice"
    );
}

#[test]
fn told_to_end_with_messages_at_hand_it_still_says_that_it_stops() {
    let broker = Mosquitto::start();
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", CHANNEL);
    for round in 0..8 {
        daemon.launch();
        daemon.wait_log("subscribed");
        broker.publish_lines("plant/one", &payloads((round + 1) * 20));
        assert!(daemon.stop().success());
        let state = broker.retained("holdtrue/test/state").unwrap();
        let state: serde_json::Value = serde_json::from_slice(&state).unwrap();
        assert_eq!(state["state"], "stopped", "round {round}");
    }
}
