//! `plant publish` and `plant feed` against a real Mosquitto: everything arrives, in order, once,
//! and is counted.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking"
)]

use clap::Parser;
use holdtrue_simulators::broker::{Delivered, Link, Pace, deliver};
use holdtrue_simulators::command::{Arguments, run};
use holdtrue_simulators::message::{Message, Topics};
use holdtrue_simulators::plant::Plant;
use holdtrue_simulators::scenario;
use std::collections::BTreeSet;
use std::net::TcpListener;
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};
use tempfile::TempDir;

/// A Mosquitto of our own on a free port; ends when dropped.
struct Mosquitto {
    port: u16,
    process: Child,
    folder: TempDir,
}

impl Drop for Mosquitto {
    fn drop(&mut self) {
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}

impl Mosquitto {
    fn start() -> Self {
        let free = TcpListener::bind("127.0.0.1:0").unwrap();
        let port = free.local_addr().unwrap().port();
        drop(free);
        let folder = tempfile::tempdir().unwrap();
        let settings = format!(
            "listener {port} 127.0.0.1\nuser root\nallow_anonymous true\nmax_queued_messages 0\n\
             persistence true\npersistence_location {}/\nautosave_interval 1\n\
             autosave_on_changes true\n",
            folder.path().display()
        );
        std::fs::write(folder.path().join("mosquitto.conf"), settings).unwrap();
        let process = Self::spawn(port, folder.path());
        Self {
            port,
            process,
            folder,
        }
    }

    fn spawn(port: u16, folder: &Path) -> Child {
        let path = format!("{}:/usr/sbin", std::env::var("PATH").unwrap_or_default());
        let process = Command::new("mosquitto")
            .env("PATH", path)
            .arg("-c")
            .arg(folder.join("mosquitto.conf"))
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .expect("mosquitto is installed; tests/run does it");
        let began = Instant::now();
        while std::net::TcpStream::connect(("127.0.0.1", port)).is_err() {
            assert!(
                began.elapsed() < Duration::from_secs(10),
                "mosquitto does not listen"
            );
            std::thread::sleep(Duration::from_millis(20));
        }
        process
    }

    fn restart(&mut self) {
        let pid = self.process.id().to_string();
        assert!(Command::new("kill").arg(&pid).status().unwrap().success());
        self.process.wait().unwrap();
        self.process = Self::spawn(self.port, self.folder.path());
    }

    fn url(&self) -> String {
        format!("mqtt://127.0.0.1:{}", self.port)
    }

    /// Opens a session that keeps what comes for it, also while nobody reads.
    fn keep(&self, filter: &str) {
        let status = self.client(filter).arg("-E").status();
        assert!(status.expect(INSTALLED).success());
    }

    /// Topic and payload of what the session has kept, until `count` messages or silence.
    fn kept(&self, filter: &str, count: usize) -> Vec<(String, String)> {
        let output = self
            .client(filter)
            .args(["-C", &count.to_string(), "-W", "10", "-F", "%t %p"])
            .output()
            .expect(INSTALLED);
        String::from_utf8(output.stdout)
            .unwrap()
            .lines()
            .filter_map(|line| line.split_once(' '))
            .map(|(topic, payload)| (topic.to_owned(), payload.to_owned()))
            .collect()
    }

    fn client(&self, filter: &str) -> Command {
        let mut client = Command::new("mosquitto_sub");
        client.args(["-h", "127.0.0.1", "-p", &self.port.to_string()]);
        client.args([
            "-V", "mqttv311", "-c", "-i", "keeper", "-q", "1", "-t", filter,
        ]);
        client
    }
}

/// Why a client can be started.
const INSTALLED: &str = "mosquitto-clients is installed; tests/run does it";

/// Runs `plant` with these words.
fn plant(words: &[&str]) -> Result<(), String> {
    let arguments = Arguments::try_parse_from([&["plant"], words].concat())
        .map_err(|error| error.to_string())?;
    run(arguments).map_err(|failure| failure.to_string())
}

/// What a run of a scenario sends.
fn sent(scenario: &str, seed: u64, days: f64) -> Vec<Message> {
    let plant = Plant::new(scenario::find(scenario).unwrap(), seed, days);
    let topics = Topics::new(&plant.scenario);
    plant.map(|sample| topics.message(&sample)).collect()
}

#[test]
fn publish_delivers_every_reading_in_order() {
    let broker = Mosquitto::start();
    let expected: Vec<(String, String)> = sent("harrow-mere", 3, 2.0)
        .into_iter()
        .map(|m| (m.topic, m.payload))
        .collect();
    broker.keep("#");
    let url = broker.url();
    plant(&[
        "publish",
        "harrow-mere",
        "--seed",
        "3",
        "--days",
        "2",
        "--broker",
        &url,
    ])
    .unwrap();
    let arrived = broker.kept("#", expected.len());
    assert!(
        arrived == expected,
        "{} of {}",
        arrived.len(),
        expected.len()
    );
}

#[test]
fn feed_delivers_every_row_in_the_files_order() {
    let broker = Mosquitto::start();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("bench.csv");
    // Dates that step back stay where they are.
    std::fs::write(
        &path,
        "seq;day;ohm\n1;05.02.1980;27.8680\n2;13.02.1980;27.8773\n3;12.02.1980;27.8929\n",
    )
    .unwrap();
    broker.keep("bench/#");
    plant(&[
        "feed",
        path.to_str().unwrap(),
        "--broker",
        &broker.url(),
        "--topic",
        "bench/resistor",
        "--separator",
        ";",
        "--time-format",
        "%d.%m.%Y",
        "--field",
        "at=day:time",
        "--field",
        "value=ohm",
        "--field",
        "seq=seq",
        "--constant",
        "reference=0",
    ])
    .unwrap();
    let expected = [
        r#"{"at":"1980-02-05T00:00:00Z","reference":0,"seq":1,"value":27.868}"#,
        r#"{"at":"1980-02-13T00:00:00Z","reference":0,"seq":2,"value":27.8773}"#,
        r#"{"at":"1980-02-12T00:00:00Z","reference":0,"seq":3,"value":27.8929}"#,
    ]
    .map(|payload| ("bench/resistor".to_owned(), payload.to_owned()));
    assert_eq!(broker.kept("bench/#", 3), expected);
}

#[test]
fn rows_left_out_end_with_exit_code_1_and_the_rest_arrives() {
    let broker = Mosquitto::start();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("rows.jsonl");
    std::fs::write(
        &path,
        "{\"at\":\"2026-03-02\",\"v\":1}\n\nnot JSON\n{\"v\":2}\n",
    )
    .unwrap();
    broker.keep("rows");
    let url = broker.url();
    let words = [
        "feed",
        path.to_str().unwrap(),
        "--broker",
        &url,
        "--topic",
        "rows",
    ];
    let told = plant(&words).expect_err("a row was left out");
    assert!(told.starts_with("1 rows left out"), "{told}");
    let payloads: Vec<String> = broker
        .kept("rows", 2)
        .into_iter()
        .map(|(_, payload)| payload)
        .collect();
    assert_eq!(payloads, [r#"{"at":"2026-03-02","v":1}"#, r#"{"v":2}"#]);
}

#[test]
fn nobody_at_the_other_end_is_said_after_the_patience() {
    let free = TcpListener::bind("127.0.0.1:0").unwrap();
    let address = free.local_addr().unwrap();
    drop(free);
    let mut link = Link::from_url(&format!("mqtt://{address}")).unwrap();
    link.patience = Duration::from_millis(500);
    let lost = block_on(deliver(
        sent("linear", 1, 0.1).into_iter(),
        &link,
        Pace::AsAcknowledged,
        std::future::pending(),
        |_| {},
    ))
    .expect_err("nobody listens");
    assert_eq!(lost.delivered, Delivered::default());
    assert!(lost.to_string().contains("0 of 0"), "{lost}");
}

#[test]
fn a_broker_restart_in_mid_stream_loses_nothing_that_was_acknowledged() {
    let mut broker = Mosquitto::start();
    let messages = sent("linear", 2, 12.0);
    let expected: BTreeSet<(String, String)> = messages
        .iter()
        .map(|m| (m.topic.clone(), m.payload.clone()))
        .collect();
    let count = messages.len();
    assert!(count > 1000);
    // The session outlives the restart: the broker keeps what comes while nobody is there.
    broker.keep("#");
    let link = Link::from_url(&broker.url()).unwrap();
    // Everything within four seconds; the broker goes away after one.
    let pace = Pace::Times(12.0 * 86_400.0 / 4.0);
    let publisher = std::thread::spawn(move || {
        block_on(deliver(
            messages.into_iter(),
            &link,
            pace,
            std::future::pending(),
            |_| {},
        ))
    });
    std::thread::sleep(Duration::from_secs(1));
    broker.restart();
    let delivered = publisher.join().unwrap().expect("the broker came back");
    assert_eq!(
        (delivered.sent, delivered.acknowledged),
        (count as u64, count as u64)
    );
    // At least once: what was under way when the broker went may come twice, so ask for more than
    // there should be and read until silence.
    let arrived = broker.kept("#", 2 * count);
    assert!(arrived.len() <= count + 32, "{} arrived", arrived.len());
    let arrived: BTreeSet<(String, String)> = arrived.into_iter().collect();
    assert!(arrived == expected, "{} of {count}", arrived.len());
}

#[test]
fn pace_goes_by_the_readings_own_times() {
    let broker = Mosquitto::start();
    let link = Link::from_url(&broker.url()).unwrap();
    let began = Instant::now();
    // One day in 0.8 s; the last reading is 20 minutes short of it.
    let messages = sent("steady", 1, 1.0).into_iter();
    let pace = Pace::Times(86_400.0 / 0.8);
    block_on(deliver(
        messages,
        &link,
        pace,
        std::future::pending(),
        |_| {},
    ))
    .unwrap();
    assert!(
        began.elapsed() >= Duration::from_millis(780),
        "{:?}",
        began.elapsed()
    );
}

#[test]
fn a_stop_ends_the_stream_but_waits_for_what_is_under_way() {
    let broker = Mosquitto::start();
    let link = Link::from_url(&broker.url()).unwrap();
    let messages = sent("linear", 1, 30.0);
    let count = messages.len() as u64;
    let pace = Pace::Times(86_400.0);
    let stop = tokio_sleep(Duration::from_millis(500));
    let delivered = block_on(deliver(messages.into_iter(), &link, pace, stop, |_| {})).unwrap();
    assert!(
        delivered.sent > 0 && delivered.sent < count,
        "{delivered:?}"
    );
    assert_eq!(delivered.sent, delivered.acknowledged);
}

async fn tokio_sleep(time: Duration) {
    tokio::time::sleep(time).await;
}

fn block_on<T>(future: impl Future<Output = T>) -> T {
    tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .unwrap()
        .block_on(future)
}
