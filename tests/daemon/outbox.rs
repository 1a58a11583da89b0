//! What the engine said while the broker was away, or while the daemon was killed, still arrives.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use crate::live::schemas::Schemas;
use crate::live::wait_for;
use std::time::{SystemTime, UNIX_EPOCH};

/// Its alarm comes from the clock alone.
const CHANNEL: &str = r#"
[[channel]]
name = "one"
unit = "V"
indication = { topic = "plant/one" }
reference = { constant = 1.0 }
alarms = { gap_after = "2 s", delay = 1 }
"#;

const GAP: &str = "SELECT count(*) FROM outputs WHERE kind = 'alarm' AND body LIKE '%DataGap%'";
const OUTBOX: &str = "SELECT count(*) FROM outbox";

#[test]
fn an_alarm_raised_while_the_broker_is_away_survives_a_kill_and_arrives() {
    let mut broker = Mosquitto::start();
    let mut daemon = Holdtrue::start(broker.port, CHANNEL);
    daemon.wait_log("subscribed");
    broker.publish("plant/one", b"1.25");
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 1);
    broker.stop();
    daemon.wait_count(GAP, 1);
    assert!(daemon.count("SELECT count(*) FROM inputs WHERE kind = 'tick'") > 0);
    daemon.wait_count(OUTBOX, 1);
    daemon.kill();
    broker.launch();
    assert!(broker.all_retained("holdtrue/test/alarm/#").is_empty());
    daemon.launch();
    let retained = wait_for("the alarm is retained", || {
        broker.all_retained("holdtrue/test/alarm/#").pop()
    });
    assert!(retained.0.ends_with("/data-gap"), "{retained:?}");
    let json: serde_json::Value = serde_json::from_str(&retained.1).unwrap();
    assert_eq!(json["state"], "unacknowledged");
    wait_for("the outbox is empty", || {
        (daemon.count(OUTBOX) == 0).then_some(())
    });
    assert!(daemon.stop().success());
}

#[test]
fn a_broker_that_lost_its_memory_gets_every_retained_document_again() {
    let first = Mosquitto::start();
    let mut daemon = Holdtrue::start(first.port, CHANNEL);
    daemon.wait_log("subscribed");
    for _ in 0..40 {
        first.publish("plant/one", b"1.25");
    }
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 40);
    daemon.wait_count(GAP, 1);
    let before = wait_for("something is retained", || {
        let all = first.all_retained("holdtrue/test/alarm/#");
        (!all.is_empty()).then_some(all)
    });
    assert!(daemon.stop().success());
    drop(first);
    let second = Mosquitto::start();
    daemon.configure(second.port, "", "", CHANNEL);
    // Another configuration file, but the same channel: its state and its documents stand.
    daemon.launch();
    daemon.wait_log("publishing all retained documents again");
    wait_for("the same documents are retained", || {
        let all = second.all_retained("holdtrue/test/alarm/#");
        let topics = |all: &[(String, String)]| -> Vec<String> {
            all.iter().map(|it| it.0.clone()).collect()
        };
        (topics(&all) == topics(&before)).then_some(())
    });
    // A reading shows that it subscribed as well.
    second.publish("plant/one", b"1.25");
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 41);
    assert!(daemon.stop().success());
}

#[test]
fn a_lost_session_is_made_good_even_if_the_record_can_not_be_written_just_then() {
    let mut broker = Mosquitto::start();
    let mut daemon = Holdtrue::start(broker.port, CHANNEL);
    daemon.wait_log("subscribed");
    broker.publish("plant/one", b"1.25");
    daemon.wait_count(GAP, 1);
    wait_for("the alarm is retained", || {
        broker.all_retained("holdtrue/test/alarm/channel/#").pop()
    });
    wait_for("the outbox is empty", || {
        (daemon.count(OUTBOX) == 0).then_some(())
    });
    let lock = daemon.newest_file();
    lock.execute_batch("BEGIN IMMEDIATE").unwrap();
    broker.stop();
    broker.forget();
    broker.launch();
    daemon.wait_log("the record can't be written");
    daemon.wait_log("has lost our session, and what it is owed has to wait");
    assert!(
        broker
            .all_retained("holdtrue/test/alarm/channel/#")
            .is_empty()
    );
    lock.execute_batch("ROLLBACK").unwrap();
    wait_for("the alarm is retained again", || {
        broker.all_retained("holdtrue/test/alarm/channel/#").pop()
    });
    broker.publish("plant/one", b"1.25");
    daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 2);
    // The newest note of confirmed subscriptions names them again.
    let confirmed = "SELECT body <> '[]' FROM events WHERE kind = 'subscriptions'
                     ORDER BY batch DESC LIMIT 1";
    daemon.wait_count(confirmed, 1);
    assert!(daemon.stop().success());
}

#[test]
fn a_correction_expires_at_the_broker_with_its_validity() {
    let broker = Mosquitto::start();
    let channel = r#"
[[channel]]
name = "one"
unit = "V"
indication = { topic = "plant/one", value = "/i", time = "/t" }
reference = { constant = 1.0 }
window = "16 pairs"
segments = 16
publish = { max_age = "4 s" }
"#;
    let listener = Listener::start(broker.port, "holdtrue/#");
    let mut daemon = Holdtrue::start(broker.port, channel);
    daemon.wait_log("subscribed");
    let now = SystemTime::now()
        .duration_since(UNIX_EPOCH)
        .unwrap()
        .as_secs_f64();
    let lines: Vec<String> = (0..40)
        .map(|number| {
            let time = now - 4.0 + 0.1 * f64::from(number);
            let value = 1.25 + 0.01 * f64::from(number % 3);
            format!("{{\"i\":{value:?},\"t\":{time:.3}}}")
        })
        .collect();
    broker.publish_lines("plant/one", &lines);
    let topic = "holdtrue/test/correction/one";
    let heard = listener.wait("a correction", |it| {
        it.topic == topic && !it.payload.is_empty()
    });
    Schemas::read().check(&heard);
    // The daemon is gone and can't withdraw it; the broker must drop it by itself.
    daemon.kill();
    wait_for("the correction has expired", || {
        broker.retained(topic).is_none().then_some(())
    });
}
