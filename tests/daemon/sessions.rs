//! Two daemons where there should be one, a changed configuration, a record that can't be trusted.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::Listener;
use crate::live::mosquitto::Mosquitto;
use crate::live::wait_for;

fn channel(name: &str) -> String {
    format!(
        "[[channel]]\nname = \"{name}\"\nunit = \"V\"\nreference = {{ value = \"/r\" }}\n\
         indication = {{ topic = \"plant/{name}\", value = \"/i\", time = \"/t\" }}\n\
         window = \"64 pairs\"\nsegments = 16\nmax_permissible_error = 0.1\n"
    )
}

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

const READINGS: &str = "time = \"readings\"";
const PAIRS: &str = "SELECT count(*) FROM outputs WHERE kind = 'pair'";

#[test]
fn two_daemons_with_one_client_id_are_told_apart_in_the_log() {
    let broker = Mosquitto::start();
    let settings = "client_id = \"twin\"";
    let mut first = Holdtrue::prepare_with(broker.port, READINGS, settings, &channel("one"));
    let mut second = Holdtrue::prepare_with(broker.port, READINGS, settings, &channel("one"));
    first.launch();
    first.wait_log("subscribed");
    second.launch();
    // Brokers that say why a connection ends are believed; this one only cuts it.
    first.wait_log("our client_id");
    // They throw each other out, with growing pauses: not hundreds of times.
    let count = |daemon: &Holdtrue| daemon.log().matches("connected to the broker").count();
    std::thread::sleep(std::time::Duration::from_secs(3));
    assert!(
        count(&first) + count(&second) < 20,
        "{} {}",
        count(&first),
        count(&second)
    );
}

#[test]
fn a_second_daemon_on_one_record_ends_with_a_clear_message() {
    let broker = Mosquitto::start();
    let mut first = Holdtrue::prepare_with(broker.port, READINGS, "", &channel("one"));
    first.launch();
    first.wait_log("subscribed");
    let settings = "client_id = \"other\"";
    let mut second = Holdtrue::prepare_with(broker.port, READINGS, settings, &channel("one"));
    let path = second.folder().join("holdtrue.toml");
    let text = std::fs::read_to_string(&path).unwrap();
    let record = format!("folder = {:?}", first.record());
    std::fs::write(&path, text.replace("folder = \"record\"", &record)).unwrap();
    second.launch();
    assert_eq!(second.wait_end().code(), Some(3));
    assert!(
        second.log().contains("is in use by another holdtrue"),
        "{}",
        second.log()
    );
}

#[test]
fn a_changed_configuration_clears_what_is_gone_and_keeps_what_stays() {
    let broker = Mosquitto::start();
    let listener = Listener::start(broker.port, "holdtrue/#");
    let both = channel("one") + &channel("two");
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", &both);
    daemon.launch();
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/one", &readings(0, 100));
    broker.publish_lines("plant/two", &readings(0, 100));
    daemon.wait_count(PAIRS, 200);
    assert!(daemon.stop().success());
    let about = |name: &str| -> Vec<String> {
        let all = broker.all_retained("holdtrue/test/#");
        let part = format!("/{name}");
        all.into_iter()
            .map(|it| it.0)
            .filter(|topic| topic.contains(&part))
            .collect()
    };
    let (one, two) = (about("one"), about("two"));
    assert!(two.len() >= 2, "a correction and an alarm: {two:?}");

    daemon.configure(
        broker.port,
        READINGS,
        "",
        &(channel("one") + &channel("three")),
    );
    daemon.launch();
    wait_for("what is gone is cleared", || {
        about("two").is_empty().then_some(())
    });
    assert_eq!(about("one"), one);
    wait_for("subscribed again", || {
        (daemon.log().matches("subscribed").count() >= 2).then_some(())
    });
    listener.forget();
    // The old topic is no longer subscribed to, the new one is; the kept channel goes on.
    broker.publish_lines("plant/two", &readings(100, 101));
    broker.publish_lines("plant/three", &readings(0, 5));
    broker.publish_lines("plant/one", &readings(100, 105));
    daemon.wait_count(PAIRS, 210);
    assert!(daemon.stop().success());
    assert_eq!(
        daemon.count("SELECT count(*) FROM inputs WHERE kind = 'refused'"),
        0
    );
    assert_eq!(
        daemon.count("SELECT count(*) FROM inputs WHERE kind = 'setup'"),
        2
    );
    for heard in listener.on("holdtrue/test/correction/one") {
        assert!(
            heard.json()["issue_number"].as_u64().unwrap() > 1,
            "began anew: {heard:?}"
        );
    }
    // Started once more with the same configuration, nothing is taken for new.
    daemon.launch();
    wait_for("connected", || {
        (daemon.log().matches("connected to the broker").count() == 3).then_some(())
    });
    assert!(daemon.stop().success());
    assert_eq!(
        daemon.count("SELECT count(*) FROM inputs WHERE kind = 'setup'"),
        2
    );
}

#[test]
fn a_session_without_our_subscriptions_gets_them_at_the_next_start() {
    let settings = "client_id = \"shared\"";
    let first = Mosquitto::start();
    let mut daemon = Holdtrue::prepare_with(first.port, READINGS, settings, &channel("one"));
    daemon.launch();
    daemon.wait_log("subscribed");
    assert!(daemon.stop().success());
    // Another broker, which keeps a session of that name that somebody else began.
    let second = Mosquitto::start();
    let port = second.port.to_string();
    let made = std::process::Command::new("mosquitto_sub")
        .args([
            "-h",
            "127.0.0.1",
            "-p",
            &port,
            "-i",
            "shared",
            "-c",
            "-q",
            "1",
        ])
        .args(["-t", "plant/other", "-E"])
        .status()
        .unwrap();
    assert!(made.success());
    daemon.configure(second.port, READINGS, settings, &channel("one"));
    daemon.launch();
    daemon.wait_log("session_present=true");
    daemon.wait_log("subscribed");
    second.publish_lines("plant/one", &readings(0, 5));
    daemon.wait_count(PAIRS, 5);
    assert!(daemon.stop().success());
}

#[test]
fn a_record_that_was_changed_is_not_gone_on_with() {
    let broker = Mosquitto::start();
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", &channel("one"));
    daemon.launch();
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/one", &readings(0, 50));
    daemon.wait_count(PAIRS, 50);
    assert!(daemon.stop().success());
    // What was saved after the reading would be believed.
    daemon
        .newest_file()
        .execute(
            "DELETE FROM states WHERE batch > (SELECT first_batch FROM day)",
            [],
        )
        .unwrap();
    let changed = daemon
        .newest_file()
        .execute(
            "UPDATE raw_readings SET value = 1.61 WHERE position =
             (SELECT min(position) FROM raw_readings WHERE value = 1.51)",
            [],
        )
        .unwrap();
    assert_eq!(changed, 1);
    daemon.launch();
    assert_eq!(daemon.wait_end().code(), Some(1));
    assert!(
        daemon
            .log()
            .contains("replay of the record differs at input"),
        "{}",
        daemon.log()
    );
    // The same difference after another version wrote the record is told, and gone on with.
    daemon
        .newest_file()
        .execute("UPDATE day SET arithmetic = 0, program = '0.0.1'", [])
        .unwrap();
    daemon.launch();
    daemon.wait_log("another version of holdtrue wrote");
    daemon.wait_log("connected to the broker");
    assert!(daemon.stop().success());
}

#[test]
fn a_broker_that_refuses_documents_is_told_of_in_the_log_and_does_not_stop_the_rest() {
    let folder = tempfile::tempdir().unwrap();
    let list = folder.path().join("acl");
    // All may do everything but write corrections.
    std::fs::write(
        &list,
        "topic readwrite plant/#\ntopic readwrite marker/#\ntopic readwrite holdtrue/test/state\n\
         topic readwrite holdtrue/test/alarm/#\ntopic read holdtrue/#\n",
    )
    .unwrap();
    let broker = Mosquitto::start_with(&format!("acl_file {}", list.display()));
    let listener = Listener::start(broker.port, "holdtrue/#");
    let mut daemon = Holdtrue::prepare_with(broker.port, READINGS, "", &channel("one"));
    daemon.launch();
    daemon.wait_log("subscribed");
    broker.publish_lines("plant/one", &readings(0, 100));
    daemon.wait_log("the broker refuses it: NotAuthorized");
    listener.wait("an alarm", |it| it.topic.contains("/alarm/"));
    daemon.wait_count(PAIRS, 100);
    assert!(daemon.stop().success());
    assert_eq!(
        daemon.count("SELECT count(*) FROM outbox"),
        0,
        "refused documents stay for ever"
    );
    let stopped = listener.wait_state("stopped");
    assert!(
        stopped.json()["standing"]["documents_refused"]
            .as_u64()
            .unwrap()
            > 0
    );
    assert!(listener.on("holdtrue/test/correction").is_empty());
}
