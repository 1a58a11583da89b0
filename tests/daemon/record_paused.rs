//! A record that can't be written stops the daemon from taking anything, and nothing is lost by it.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use crate::live::schemas::Schemas;

const CHANNEL: &str = r#"
[[channel]]
name = "one"
unit = "V"
indication = { topic = "plant/one", value = "/i", time = "/t" }
reference = { value = "/r" }
window = "64 pairs"
segments = 16
"#;

const ALARM: &str = "holdtrue/test/alarm/node/record-paused";
const PAIRS: &str = "SELECT count(*) FROM outputs WHERE kind = 'pair'";
const DISTINCT_PAIRS: &str = "SELECT count(DISTINCT json_extract(body, '$.Pair.phenomenon'))
                              FROM outputs WHERE kind = 'pair'";

fn readings(from: u32, to: u32) -> Vec<String> {
    (from..to)
        .map(|number| {
            let value = 1.5 + 0.01 * f64::from(number % 5);
            format!(
                "{{\"i\":{value:?},\"r\":1.0,\"t\":{}}}",
                1_772_323_200 + number
            )
        })
        .collect()
}

/// Holds the write lock of the record, as a copy tool or a full disk would keep it from writing.
fn block(daemon: &Holdtrue) -> rusqlite::Connection {
    let connection = daemon.newest_file();
    connection.execute_batch("BEGIN IMMEDIATE").unwrap();
    connection
}

#[test]
fn it_pauses_says_so_and_goes_on_without_loss() {
    for protocol in [5, 4] {
        let broker = Mosquitto::start();
        let listener = Listener::start(broker.port, "holdtrue/#");
        // Small windows: more arrives than fits, so that messages must be left with the broker.
        let settings = format!("protocol = {protocol}\nreceive_maximum = 10");
        let mut daemon =
            Holdtrue::prepare_with(broker.port, "time = \"readings\"", &settings, CHANNEL);
        daemon.launch();
        daemon.wait_log("subscribed");
        broker.publish_lines("plant/one", &readings(0, 100));
        daemon.wait_count(PAIRS, 100);
        listener.wait_state("running");

        let lock = block(&daemon);
        broker.publish_lines("plant/one", &readings(100, 400));
        let paused = listener.wait_state("record-paused");
        assert!(
            paused.json()["why"].as_str().unwrap().contains("locked"),
            "{paused:?}"
        );
        assert_eq!(daemon.count(PAIRS), 100);
        listener.forget();
        std::thread::sleep(std::time::Duration::from_secs(2));
        let unrecorded: Vec<_> = listener
            .all()
            .into_iter()
            .filter(|it| {
                !it.topic.ends_with("/state")
                    && it.topic != "holdtrue/test/alarm/node/record-paused"
            })
            .collect();
        assert!(
            unrecorded.is_empty(),
            "published without a record: {unrecorded:?}"
        );

        let retained = broker.retained(ALARM).expect("the alarm is retained");
        let retained = String::from_utf8(retained).unwrap();
        assert!(retained.contains("\"unacknowledged\""), "{retained}");

        lock.execute_batch("ROLLBACK").unwrap();
        listener.wait_state("running");
        daemon.wait_count(PAIRS, 400);
        let cleared = listener.wait("the alarm is cleared", |it| {
            it.topic == ALARM && it.payload.contains("\"normal\"")
        });
        Schemas::read().check(&cleared);
        // What could not be recorded then is recorded now.
        daemon.wait_count(
            "SELECT count(*) FROM documents WHERE payload LIKE '%could not be written from%'",
            1,
        );
        assert!(daemon.stop().success());
        assert_eq!(
            (daemon.count(PAIRS), daemon.count(DISTINCT_PAIRS)),
            (400, 400)
        );
        assert!(daemon.log().contains("record can be written again"));
    }
}

#[test]
fn told_to_end_while_paused_it_leaves_the_messages_with_the_broker() {
    let broker = Mosquitto::start();
    let mut daemon = Holdtrue::prepare_with(broker.port, "time = \"readings\"", "", CHANNEL);
    let listener = Listener::start(broker.port, "holdtrue/#");
    daemon.launch();
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/one", &readings(0, 1));
    daemon.wait_count(PAIRS, 1);
    let lock = block(&daemon);
    broker.publish_lines("plant/one", &readings(1, 30));
    listener.wait_state("record-paused");
    assert!(daemon.stop().success());
    let stopped = listener.wait_state("stopped");
    assert!(stopped.json()["why"].is_string(), "{stopped:?}");
    assert_eq!(daemon.count(PAIRS), 1);
    lock.execute_batch("ROLLBACK").unwrap();
    daemon.launch();
    daemon.wait_count(PAIRS, 30);
    assert!(daemon.stop().success());
    assert_eq!(
        (daemon.count(PAIRS), daemon.count(DISTINCT_PAIRS)),
        (30, 30)
    );
}
