//! Orders over a real broker: told with the command or with plain MQTT, answered once they are
//! recorded, done once however often they come, and refused with a way out.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::{Heard, Listener};
use crate::live::mosquitto::Mosquitto;
use crate::live::schemas::Schemas;
use serde_json::Value;
use std::process::{Command, Output};
use std::time::{SystemTime, UNIX_EPOCH};

const CHANNEL: &str = r#"
[[channel]]
name = "hall/ph-1"
unit = "pH"
indication = { topic = "plant/ph", value = "/i", time = "/t" }
reference = { constant = 7.0, uncertainty = { each = 0.01, common = 0.01 } }
window = "10 d"
"#;

fn now_seconds() -> u64 {
    let since = SystemTime::now().duration_since(UNIX_EPOCH);
    since.unwrap().as_secs()
}

/// RFC 3339 of so many seconds since 1970.
fn text_of(seconds: u64) -> String {
    let instant = jiff::Timestamp::from_second(i64::try_from(seconds).unwrap());
    instant.unwrap().to_string()
}

/// A broker, a daemon on it that has 120 pairs with an error of about +0.12, one a minute until a
/// minute ago, and a listener to everything that it says.
struct Hall {
    listener: Listener,
    daemon: Holdtrue,
    broker: Mosquitto,
    /// The time of the last pair.
    last: u64,
}

impl Hall {
    fn open(broker_lines: &str) -> Self {
        let broker = Mosquitto::start();
        let listener = Listener::start(broker.port, "holdtrue/#");
        let mut daemon = Holdtrue::prepare_with(broker.port, "", broker_lines, CHANNEL);
        daemon.launch();
        daemon.wait_log("subscribed");
        let last = now_seconds() - 60;
        let lines: Vec<String> = (0..120_u64)
            .map(|number| {
                let noise = 0.01 * ((number as f64 * 0.618_033_988_749_895).fract() - 0.5);
                let time = last - 60 * (119 - number);
                format!("{{\"i\":{},\"t\":{time}}}", 7.12 + noise)
            })
            .collect();
        broker.publish_lines("plant/ph", &lines);
        daemon.wait_count("SELECT count(*) FROM outputs WHERE kind = 'pair'", 120);
        Self {
            listener,
            daemon,
            broker,
            last,
        }
    }

    /// Runs `holdtrue tell service` with the daemon's configuration.
    fn tell(&self, arguments: &[&str]) -> Output {
        Command::new(env!("CARGO_BIN_EXE_holdtrue"))
            .args(["tell", "service", "--config"])
            .arg(self.daemon.folder().join("holdtrue.toml"))
            .args(arguments)
            .output()
            .unwrap()
    }

    fn order(&self, payload: &str) {
        self.broker
            .publish("holdtrue/test/order/service", payload.as_bytes());
    }

    /// Waits for the answer with this id on the common topic.
    fn answer(&self, id: &str) -> Value {
        let fits =
            |heard: &Heard| heard.topic == "holdtrue/test/answer" && heard.json()["id"] == *id;
        self.listener.wait(&format!("answer {id}"), fits).json()
    }

    fn answers(&self) -> usize {
        self.listener.on("holdtrue/test/answer").len()
    }

    /// Everything heard follows its schema.
    fn check_documents(&self) {
        let schemas = Schemas::read();
        for heard in self.listener.all() {
            schemas.check(&heard);
        }
    }
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

#[test]
fn a_service_is_told_with_the_command_and_validates_the_model() {
    let mut hall = Hall::open("");
    let at = text_of(hall.last + 30);
    let told = hall.tell(&[
        "hall/ph-1",
        "cleaned",
        "--at",
        &at,
        "--by",
        "night shift",
        "--as-found",
        "7.12=7.00:0.02",
        "--as-left",
        "7.01=7.00:0.02",
        "--note",
        "film on the glass",
    ]);
    let (out, err) = (text(&told.stdout), text(&told.stderr));
    assert_eq!(told.status.code(), Some(0), "{out}{err}");
    assert!(out.contains("stretch 2 begins"), "{out}");
    assert!(
        out.contains("the model held") && out.contains("Fouling made 0.1100"),
        "{out}"
    );
    let validation = hall.broker.retained("holdtrue/test/validation/hall/ph-1");
    let validation: Value = serde_json::from_slice(&validation.unwrap()).unwrap();
    assert_eq!(validation["satisfactory"], true);
    assert_eq!(
        (validation["stretch"].as_u64(), validation["by"].as_str()),
        (Some(1), Some("night shift"))
    );
    let predicted = validation["predicted_error"].as_f64().unwrap();
    assert!((predicted - 0.12).abs() < 0.02, "{validation}");
    // The old correction is gone, and only pairs of the new stretch make the next.
    let correction = hall.broker.retained("holdtrue/test/correction/hall/ph-1");
    assert_eq!(correction, None);
    // The answer went where it was asked for, and not to everybody.
    assert_eq!(hall.listener.on("holdtrue/test/answer/").len(), 1);
    assert_eq!(hall.answers(), 1, "also counts those below");
    hall.check_documents();
    assert!(hall.daemon.stop().success());
    assert_eq!(
        hall.daemon
            .count("SELECT count(*) FROM inputs WHERE kind = 'order'"),
        1
    );
    // What was answered stands in the record; after a restart the order is still known.
    hall.daemon.launch();
    hall.daemon.wait_log("subscribed");
    let refused = hall.tell(&["hall/ph-2", "cleaned", "--by", "x", "--json"]);
    assert_eq!(refused.status.code(), Some(1));
    let answer: Value = serde_json::from_slice(&refused.stdout).unwrap();
    assert_eq!(answer["accepted"], false);
    assert_eq!(answer["problems"][0]["field"], "channel");
    assert!(
        answer["text"]
            .as_str()
            .unwrap()
            .contains("there are hall/ph-1")
    );
}

/// With MQTT 3.1.1 there is no response topic: the common one carries the answer.
#[test]
fn a_service_is_told_over_the_older_protocol_too() {
    let hall = Hall::open("protocol = 4");
    let told = hall.tell(&["hall/ph-1", "adjusted", "--by", "x", "--id", "v-1"]);
    assert_eq!(told.status.code(), Some(0), "{}", text(&told.stderr));
    assert_eq!(hall.answer("v-1")["accepted"], true);
    hall.check_documents();
}

#[test]
fn plain_messages_are_answered_and_repeated_ones_are_not_done_twice() {
    let mut hall = Hall::open("");
    let at = text_of(hall.last + 30);
    let order = format!(
        "{{\"id\":\"v-1\",\"channel\":\"hall/ph-1\",\"act\":\"cleaned\",\"by\":\"x\",\
         \"at\":\"{at}\",\
         \"as_found\":[{{\"indication\":7.12,\"reference\":7.0}}]}}"
    );
    hall.order(&order);
    let first = hall.answer("v-1");
    assert_eq!(first["service"]["stretches"][0]["stretch"], 2);
    assert!(first["service"]["comparison"]["en"].as_f64().unwrap().abs() < 1.0);
    // Again, in this run and in the next: the same answer, and nothing else.
    let corrections = hall
        .daemon
        .count("SELECT count(*) FROM outputs WHERE kind <> 'answer'");
    hall.listener.forget();
    hall.order(&order);
    assert_eq!(hall.answer("v-1"), first);
    hall.daemon.kill();
    hall.daemon.launch();
    hall.daemon.wait_log("subscribed");
    hall.listener.forget();
    hall.order(&order);
    assert_eq!(hall.answer("v-1"), first);
    hall.daemon
        .wait_count("SELECT count(*) FROM inputs WHERE kind = 'order'", 3);
    let after = hall
        .daemon
        .count("SELECT count(*) FROM outputs WHERE kind <> 'answer'");
    assert_eq!(after, corrections, "something was done twice");
    hall.check_documents();
}

/// A response topic and correlation data come back with the answer, over MQTT 5.
#[test]
fn an_answer_goes_where_it_is_asked_for() {
    let hall = Hall::open("");
    let port = hall.broker.port.to_string();
    let asked = Command::new("mosquitto_rr")
        .args([
            "-h",
            "127.0.0.1",
            "-p",
            &port,
            "-V",
            "5",
            "-q",
            "1",
            "-W",
            "30",
        ])
        .args(["-t", "holdtrue/test/order/service", "-e", "tool/answers"])
        .args([
            "-D",
            "publish",
            "correlation-data",
            "job-17",
            "-F",
            "%t %D %p",
        ])
        .args([
            "-m",
            "{\"id\":\"v-9\",\"reference\":\"hall/ph-1\",\"act\":\"calibrated\",\"by\":\"x\"}",
        ])
        .output()
        .unwrap();
    let line = text(&asked.stdout);
    let rest = line.strip_prefix("tool/answers job-17 ");
    let answer: Value = serde_json::from_str(rest.unwrap_or_else(|| panic!("{line}"))).unwrap();
    assert_eq!(
        (&answer["id"], &answer["accepted"]),
        (&Value::from("v-9"), &Value::from(true))
    );
    assert_eq!(answer["service"]["reference"], "hall/ph-1");
    assert_eq!(hall.answers(), 0, "and nowhere else");
}

#[test]
fn garbage_is_answered_with_everything_that_is_wrong_and_changes_nothing() {
    let mut hall = Hall::open("");
    let others = "SELECT count(*) FROM outputs WHERE kind NOT IN ('answer', 'pair', 'notice')";
    let before = hall.daemon.count(others);
    hall.order("{\"id\":\"g-1\",\"chanel\":\"hall/ph-1\",\"act\":\"polished\",\"at\":\"noon\"}");
    let answer = hall.answer("g-1");
    let fields: Vec<&str> = answer["problems"]
        .as_array()
        .unwrap()
        .iter()
        .map(|it| it["field"].as_str().unwrap())
        .collect();
    for field in ["chanel", "channel", "act", "by", "at"] {
        assert!(fields.contains(&field), "{field} not in {fields:?}");
    }
    for payload in [&b"7.0"[..], b"{\"id\":", b""] {
        hall.listener.forget();
        hall.broker.publish("holdtrue/test/order/service", payload);
        assert_eq!(hall.answer("")["accepted"], false);
    }
    hall.broker
        .publish("holdtrue/test/order/polish", b"{\"id\":\"g-2\"}");
    assert_eq!(hall.answer("g-2")["accepted"], false);
    // The listener reads lines of text and hears no more after this one.
    hall.broker
        .publish("holdtrue/test/order/service", &[0xff, 0xfe]);
    hall.daemon
        .wait_count("SELECT count(*) FROM outputs WHERE kind = 'answer'", 6);
    assert_eq!(hall.daemon.count(others), before);
    let orders = "SELECT count(*) FROM inputs WHERE kind = 'order'";
    assert_eq!(hall.daemon.count(orders), 6);
    assert!(hall.daemon.stop().success());
}

/// A retained order would come again at each subscription, also after later ones.
#[test]
fn retained_orders_are_refused_now_and_later() {
    let mut hall = Hall::open("");
    let order = b"{\"id\":\"r-1\",\"channel\":\"hall/ph-1\",\"act\":\"cleaned\",\"by\":\"x\"}";
    let topic = "holdtrue/test/order/service";
    hall.broker.publish_with(topic, order, &["-r"]);
    let answer = hall.answer("r-1");
    assert_eq!(answer["accepted"], false);
    assert!(
        answer["text"].as_str().unwrap().contains("retain"),
        "{answer}"
    );
    hall.broker.publish_with(topic, b"", &["-r"]);
    // The clearing itself is no order.
    hall.order("{\"id\":\"r-2\",\"channel\":\"hall/ph-1\",\"act\":\"cleaned\",\"by\":\"x\"}");
    assert_eq!(hall.answer("r-2")["accepted"], true);
    assert_eq!(hall.answers(), 2);
    assert!(hall.daemon.stop().success());
}

#[test]
fn without_a_daemon_or_a_broker_the_command_says_so() {
    let broker = Mosquitto::start();
    let tell = |url: &str, more: &[&str]| {
        Command::new(env!("CARGO_BIN_EXE_holdtrue"))
            .args([
                "tell", "service", "--broker", url, "--node", "test", "--wait", "2",
            ])
            .args(["ph", "cleaned", "--by", "x"])
            .args(more)
            .output()
            .unwrap()
    };
    let nobody = tell(&format!("mqtt://127.0.0.1:{}", broker.port), &[]);
    assert_eq!(nobody.status.code(), Some(3));
    assert!(
        text(&nobody.stderr).contains("no answer within 2 s"),
        "{}",
        text(&nobody.stderr)
    );
    // A port on which nothing listens: the discard service, reserved and unused.
    let nowhere = tell("mqtt://127.0.0.1:9", &[]);
    assert_eq!(nowhere.status.code(), Some(3));
    assert!(
        text(&nowhere.stderr).contains("no connection"),
        "{}",
        text(&nowhere.stderr)
    );
    for wrong in [
        tell("http://127.0.0.1", &[]),
        tell("mqtt://127.0.0.1", &["--as-found", "7,1=7"]),
        tell("mqtt://127.0.0.1", &["--polish"]),
    ] {
        assert_eq!(wrong.status.code(), Some(2), "{}", text(&wrong.stderr));
    }
}
