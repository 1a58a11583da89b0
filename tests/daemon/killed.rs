//! Killed at random instants under load, the daemon and then the broker: no reading that the broker
//! took is lost or counts twice, nothing is published that is not recorded, and the record can be
//! verified and replayed.
//!
//! The short form runs with all tests. The long one is the same code:
//!
//!     RATE=2500 KILLS=200 RESTARTS=20 cargo test --release --test daemon killed -- --nocapture \
//!         --test-threads=1
//!
//! `SEED` chooses other instants; the seed is printed. A message that was recorded but not yet
//! acknowledged when the daemon died comes again, since that is what quality of service 1 means:
//! it is then in `raw_readings` once more, as it was received, and refused. What is counted is
//! therefore the pair that each reading made.

use crate::live::holdtrue::Holdtrue;
use crate::live::listener::{Heard, Listener};
use crate::live::load::{Load, Log, channel, channels};
use crate::live::mosquitto::Mosquitto;
use crate::live::wait_for;
use holdtrue::record::{Archive, verify};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use std::collections::{BTreeMap, HashMap, HashSet};
use std::process::Command;
use std::time::Duration;

const CHANNELS: usize = 100;
/// Readings a second: so few that a busy machine takes them with a build for tests.
const RATE: u64 = 500;
/// Readings that may wait for a daemon that is down and up again; more than that are not piled up.
/// The broker keeps 100,000.
const BACKLOG: u64 = 10_000;
/// What waits for a daemon that is down is late; it must be used all the same.
const SETTINGS: &str = "window = \"10 min\"\nlateness = \"10 min\"\nmax_permissible_error = 0.5";
/// Mosquitto saves its state every second, and acknowledges before. What it acknowledged this long
/// before it was killed may be lost by it; twice the interval, since a save takes a while.
const AT_RISK: Duration = Duration::from_secs(2);
/// The daemon waits longer from one short-lived connection to the next; after these, a new one goes
/// on.
const RESTARTS_IN_A_ROW: u64 = 4;
const CORRECTIONS: &str = "holdtrue/test/correction/";

/// A number from the environment, for the long form.
fn number(name: &str, short: u64) -> u64 {
    std::env::var(name).map_or(short, |text| text.parse().expect("a number"))
}

/// Readings a second.
fn rate() -> u32 {
    u32::try_from(number("RATE", RATE)).expect("a small number")
}

fn random(salt: u64) -> ChaCha8Rng {
    let seed = number("SEED", 1);
    eprintln!("SEED={seed}");
    ChaCha8Rng::seed_from_u64(seed ^ salt)
}

/// Up to so many milliseconds.
fn up_to(random: &mut ChaCha8Rng, milliseconds: u64) -> Duration {
    Duration::from_micros(random.next_u64() % (1000 * milliseconds))
}

#[test]
fn no_acknowledged_reading_is_lost_or_counts_twice_when_the_daemon_is_killed() {
    let kills = number("KILLS", 10);
    let mut random = random(0);
    let broker = Mosquitto::start();
    let listener = Listener::start(broker.port, &format!("{CORRECTIONS}#"));
    let mut daemon = Holdtrue::start(broker.port, &channels(CHANNELS, SETTINGS));
    daemon.wait_log("subscribed");
    let load = Load::start(broker.port, CHANNELS, rate());
    for kill in 0..kills {
        // More than it can take while it is killed again and again would pile up without end.
        wait_for("it is not far behind", || {
            let near = load.acknowledged() < came(&daemon) + BACKLOG;
            near.then_some(()).or_else(|| {
                std::thread::sleep(Duration::from_millis(200));
                None
            })
        });
        // One in four while it starts, reads its record or connects; the others at work.
        if kill % 4 == 3 {
            std::thread::sleep(up_to(&mut random, 300));
        } else {
            daemon.wait_log("connected to the broker");
            std::thread::sleep(up_to(&mut random, 1500));
        }
        daemon.kill();
        daemon.launch();
        if kill % 20 == 19 {
            eprintln!("{} kills, {} acknowledged", kill + 1, load.acknowledged());
        }
    }
    daemon.wait_log("connected to the broker");
    let log = load.finish();
    wait_until_recorded(&daemon, &log);
    // What was published last has reached the listener before it hears of the end.
    assert!(daemon.stop().success());
    let found = examine(&daemon, &log, &listener.on(CORRECTIONS));
    assert_eq!(found.missing, [], "acknowledged and not in the record");
    tell(&format!("{kills} kills of the daemon"), &log, &found);
}

#[test]
fn no_surviving_reading_is_lost_or_counts_twice_when_the_broker_is_killed() {
    let mut random = random(0x62);
    let mut left = number("RESTARTS", 3);
    while left > 0 {
        let restarts = left.min(RESTARTS_IN_A_ROW);
        left -= restarts;
        kill_the_broker(restarts, &mut random);
    }
}

fn kill_the_broker(restarts: u64, random: &mut ChaCha8Rng) {
    let mut broker = Mosquitto::start();
    let listener = Listener::start(broker.port, &format!("{CORRECTIONS}#"));
    let mut daemon = Holdtrue::start(broker.port, &channels(CHANNELS, SETTINGS));
    daemon.wait_log("subscribed");
    let load = Load::start(broker.port, CHANNELS, rate());
    // The session itself must be in the broker's file, or it is lost with all that waits in it.
    std::thread::sleep(AT_RISK);
    for restart in 1..=restarts {
        std::thread::sleep(Duration::from_millis(500) + up_to(random, 2000));
        broker.kill();
        broker.launch();
        // The next kill must meet a load, not the pause between attempts.
        let before = load.acknowledged();
        wait_for("the broker takes readings again", || {
            (load.acknowledged() > before + u64::from(rate() / 4)).then_some(())
        });
        wait_for("connected again", || {
            let connections = daemon.log().matches("connected to the broker").count();
            (connections as u64 > restart).then_some(())
        });
    }
    std::thread::sleep(AT_RISK);
    let log = load.finish();
    wait_until_recorded(&daemon, &log);
    assert!(daemon.stop().success());
    let found = examine(&daemon, &log, &listener.on(CORRECTIONS));
    let unexplained: Vec<_> = found
        .missing
        .iter()
        .filter(|reading| !is_at_risk(**reading, &log))
        .collect();
    assert!(
        unexplained.is_empty(),
        "lost, and not by the broker: {unexplained:?}"
    );
    tell(&format!("{restarts} kills of the broker"), &log, &found);
}

/// Whether the broker acknowledged so shortly before it was killed that it may have forgotten.
fn is_at_risk(reading: (usize, usize), log: &Log) -> bool {
    let acknowledged = log.acknowledged[&reading];
    log.lost
        .iter()
        .any(|lost| acknowledged <= *lost && *lost - acknowledged < AT_RISK)
}

/// Waits until the last acknowledged reading of each channel has come.
fn wait_until_recorded(daemon: &Holdtrue, log: &Log) {
    let mut last = vec![0; CHANNELS];
    for &(place, number) in log.acknowledged.keys() {
        last[place] = number;
    }
    wait_for("everything acknowledged is recorded", || {
        let newest = newest_sequences(daemon)?;
        let there = last.iter().enumerate().all(|(place, last)| {
            let newest = newest.get(&channel(place)).copied();
            newest.is_some_and(|newest| newest >= i64::try_from(*last).unwrap())
        });
        if !there {
            std::thread::sleep(Duration::from_millis(200));
        }
        there.then_some(())
    });
}

/// How many different readings have come, as the newest running numbers tell. (Inputs would count
/// those that came again.)
fn came(daemon: &Holdtrue) -> u64 {
    let newest = newest_sequences(daemon).unwrap_or_default();
    newest
        .values()
        .map(|newest| newest.unsigned_abs() + 1)
        .sum()
}

fn newest_sequences(daemon: &Holdtrue) -> Option<BTreeMap<String, i64>> {
    let connection = daemon.newest_file();
    let mut statement = connection
        .prepare(
            "SELECT name, max(sequence) FROM raw_readings
             JOIN sources ON sources.number = source GROUP BY source",
        )
        .ok()?;
    let rows = statement.query_map([], |row| Ok((row.get(0)?, row.get(1)?)));
    rows.ok()?.collect::<rusqlite::Result<_>>().ok()
}

/// What the record holds of what was published.
struct Found {
    /// Acknowledged, and not in the record.
    missing: Vec<(usize, usize)>,
    inputs: u64,
    /// Rows of readings that came again.
    again: usize,
    corrections: usize,
}

/// Compares the record with what was published and heard.
fn examine(daemon: &Holdtrue, log: &Log, heard: &[Heard]) -> Found {
    let archive = Archive::open(&daemon.record()).unwrap();
    let mut received: HashMap<(String, i64), usize> = HashMap::new();
    let mut pairs: HashMap<(String, i64), usize> = HashMap::new();
    let mut documents = HashSet::new();
    for name in archive.days() {
        let file = rusqlite::Connection::open(archive.path(*name)).unwrap();
        count_readings(&file, log, &mut received);
        count_pairs(&file, &mut pairs);
        collect_documents(&file, &mut documents);
    }
    assert!(
        pairs.values().all(|count| *count == 1),
        "readings counted twice"
    );
    let mut missing = Vec::new();
    for &(place, number) in log.acknowledged.keys() {
        let time = log.published[place][number].time;
        let is_received = received.contains_key(&(channel(place), i64::try_from(number).unwrap()));
        let is_paired = pairs.contains_key(&(channel(place), time));
        assert_eq!(is_received, is_paired, "channel {place}, reading {number}");
        if !is_received {
            missing.push((place, number));
        }
    }
    let strange: Vec<_> = heard
        .iter()
        .filter(|it| !documents.contains(&(it.topic.clone(), it.payload.clone())))
        .collect();
    assert!(strange.is_empty(), "published unrecorded: {strange:?}");
    assert!(!heard.is_empty(), "no correction was published");
    let verdict = verify(&archive, None, || {}).unwrap();
    assert_eq!(verdict.faults, []);
    let replayed = Command::new(env!("CARGO_BIN_EXE_holdtrue"))
        .arg("replay")
        .arg(daemon.record())
        .output()
        .unwrap();
    assert!(replayed.status.success(), "{replayed:?}");
    Found {
        missing,
        inputs: u64::try_from(verdict.inputs).unwrap(),
        again: received.values().map(|count| count - 1).sum(),
        corrections: heard.len(),
    }
}

/// Counts rows of readings; each must be one that was published.
fn count_readings(
    file: &rusqlite::Connection,
    log: &Log,
    received: &mut HashMap<(String, i64), usize>,
) {
    let published: HashMap<String, usize> =
        (0..CHANNELS).map(|place| (channel(place), place)).collect();
    let mut statement = file
        .prepare(
            "SELECT name, sequence, phenomenon, value FROM raw_readings
             JOIN sources ON sources.number = source",
        )
        .unwrap();
    let mut rows = statement.query([]).unwrap();
    while let Some(row) = rows.next().unwrap() {
        let (name, number): (String, i64) = (row.get(0).unwrap(), row.get(1).unwrap());
        let (time, value): (i64, f64) = (row.get(2).unwrap(), row.get(3).unwrap());
        let reading = log.published[published[&name]][usize::try_from(number).unwrap()];
        assert_eq!((time, value), (1000 * reading.time, reading.value));
        *received.entry((name, number)).or_insert(0) += 1;
    }
}

/// Counts pairs by channel and phenomenon time in microseconds.
fn count_pairs(file: &rusqlite::Connection, pairs: &mut HashMap<(String, i64), usize>) {
    let mut statement = file
        .prepare(
            "SELECT name, json_extract(body, '$.Pair.phenomenon') FROM outputs
             JOIN sources ON sources.number = subject WHERE outputs.kind = 'pair'",
        )
        .unwrap();
    let mut rows = statement.query([]).unwrap();
    while let Some(row) = rows.next().unwrap() {
        let time: i64 = row.get(1).unwrap();
        let pair = (row.get(0).unwrap(), time / 1000);
        *pairs.entry(pair).or_insert(0) += 1;
    }
}

fn collect_documents(file: &rusqlite::Connection, documents: &mut HashSet<(String, String)>) {
    let mut statement = file
        .prepare("SELECT topic, CAST(payload AS TEXT) FROM documents")
        .unwrap();
    let rows = statement.query_map([], |row| Ok((row.get(0)?, row.get(1)?)));
    documents.extend(rows.unwrap().map(Result::unwrap));
}

fn tell(what: &str, log: &Log, found: &Found) {
    let acknowledged = log.acknowledged.len();
    eprintln!(
        "{what}: {acknowledged} readings acknowledged ({:.0} a second), {} missing, {} came again; \
         {} corrections heard, all recorded; {} inputs verified and replayed alike",
        acknowledged as f64 / log.took.as_secs_f64(),
        found.missing.len(),
        found.again,
        found.corrections,
        found.inputs,
    );
}
