//! `holdtrue import` and `holdtrue export`: a recording becomes a record that says what the engine
//! says, once, and its views come out again.

use crate::support::told;
use holdtrue::configuration;
use holdtrue::keeper::Keeper;
use holdtrue::record::{Archive, output_text, verify};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::{ChannelId, Clock, ReferenceId, Setup};
use holdtrue_engine::time::Timestamp;
use std::fmt::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::atomic::AtomicBool;

/// 2025-01-01T00:00:00Z, in seconds.
const BEGIN: i64 = 1_735_689_600;
/// Days of one recording.
const DAYS: i64 = 10;
const NANOS: i64 = 1_000_000_000;

/// With the live clock, as it will be used later.
const CONFIGURATION: &str = r#"
[node]
name = "harrow-mere"
[broker]
url = "mqtt://127.0.0.1:1883"
[[reference]]
name = "lab/ph"
topic = "works/lab/ph"
value = "/ph"
uncertainty = { each = 0.01 }
[[channel]]
name = "intake/ph-1"
unit = "pH"
indication = { topic = "works/intake/ph1", value = "/value", time = "/at" }
reference = "lab/ph"
window = "5 d"
max_permissible_error = 0.20
"#;

/// A folder with a configuration and recordings in it.
struct Desk {
    folder: tempfile::TempDir,
}

impl Desk {
    fn new() -> Self {
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(folder.path().join("c.toml"), CONFIGURATION).unwrap();
        let desk = Self { folder };
        desk.write("ph.csv", &indications(0));
        desk.write("lab.csv", &references(0));
        desk
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    fn write(&self, name: &str, text: &str) {
        std::fs::write(self.path(name), text).unwrap();
    }

    fn holdtrue(&self, words: &[&str]) -> Output {
        Command::new(env!("CARGO_BIN_EXE_holdtrue"))
            .args(words)
            .current_dir(self.folder.path())
            .output()
            .unwrap()
    }

    /// `holdtrue import` of these files into this folder, with more words.
    fn import(&self, files: &[&str], record: &str, more: &[&str]) -> Output {
        let mut words = vec!["import"];
        words.extend(files);
        words.extend(["--config", "c.toml", "--record", record, "--time", "at"]);
        words.extend([
            "--map",
            "pH=intake/ph-1",
            "--map",
            "lab pH=reference:lab/ph",
        ]);
        words.extend(more);
        self.holdtrue(&words)
    }

    /// The rows of an exported view, the header first.
    fn export(&self, words: &[&str]) -> Vec<csv::StringRecord> {
        let mut all = vec!["export"];
        all.extend(words);
        let done = self.holdtrue(&all);
        assert_eq!(code(&done), 0, "{}", text(&done.stderr));
        let mut reader = csv::ReaderBuilder::new()
            .has_headers(false)
            .from_reader(&done.stdout[..]);
        reader.records().map(Result::unwrap).collect()
    }

    fn is_whole(&self, record: &str) -> bool {
        let archive = Archive::open(&self.path(record)).unwrap();
        let verdict = verify(&archive, None, || {}).unwrap();
        verdict.faults.is_empty()
    }
}

fn code(done: &Output) -> i32 {
    done.status.code().unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

/// The true value at a minute: a slow swing.
fn truth(minute: i64) -> f64 {
    7.0 + 0.2 * (minute as f64 / 700.0).sin()
}

/// An error of 0.05 that grows by 0.01 a day, and a little noise that repeats by no simple rule.
fn indication(minute: i64) -> f64 {
    let noise = ((minute * 7_919) % 1_000) as f64 / 1_000.0 - 0.5;
    let value = truth(minute) + 0.05 + 0.01 * (minute as f64 / 1440.0) + 0.01 * noise;
    (value * 1e4).round() / 1e4
}

fn reference(minute: i64) -> f64 {
    (truth(minute) * 1e4).round() / 1e4
}

/// Minute by minute, from a day on.
fn indications(day: i64) -> String {
    let minutes = day * 1440..(day + DAYS) * 1440;
    minutes.fold("at,pH\n".to_owned(), |mut text, minute| {
        writeln!(text, "{},{}", stamp(minute), indication(minute)).unwrap();
        text
    })
}

/// Hour by hour.
fn references(day: i64) -> String {
    let hours = day * 24..(day + DAYS) * 24;
    hours.fold("at,lab pH\n".to_owned(), |mut text, hour| {
        writeln!(text, "{},{}", stamp(hour * 60), reference(hour * 60)).unwrap();
        text
    })
}

fn at(minute: i64) -> Timestamp {
    Timestamp((BEGIN + minute * 60) * NANOS)
}

fn stamp(minute: i64) -> String {
    at(minute).to_string()
}

/// What the engine must have been told, configuration first.
fn expected_inputs() -> Vec<Input> {
    let setup = configuration::from_text(CONFIGURATION, "c.toml", Path::new(""), at(0));
    let setup = Setup {
        clock: Clock::Readings,
        ..setup.unwrap().setup
    };
    let reading = |source, minute, value| {
        Input::Reading(Reading {
            source,
            received: at(minute),
            phenomenon: at(minute),
            value,
            sequence: None,
            excluded: false,
        })
    };
    let mut inputs = vec![Input::Setup(Box::new(setup))];
    for minute in 0..DAYS * 1440 {
        if minute % 60 == 0 {
            let source = Source::Reference(ReferenceId(0));
            inputs.push(reading(source, minute, reference(minute)));
        }
        let source = Source::Indication(ChannelId(0));
        inputs.push(reading(source, minute, indication(minute)));
    }
    inputs
}

#[test]
fn a_recording_becomes_a_record_of_what_the_engine_says_to_it() {
    let desk = Desk::new();
    let done = desk.import(&["lab.csv", "ph.csv"], "trial", &["--json"]);
    assert_eq!(code(&done), 0, "{}", text(&done.stderr));
    let answer: serde_json::Value = serde_json::from_slice(&done.stdout).unwrap();
    assert_eq!(answer["imported"], true);
    assert_eq!(answer["inputs"], DAYS * (1440 + 24));
    assert_eq!(answer["columns"][0]["is"], "indication of intake/ph-1");
    assert_eq!(answer["columns"][1]["last"], stamp((DAYS * 24 - 1) * 60));

    let expected = expected_inputs();
    let recorded = told(&desk.path("trial"));
    assert_eq!(recorded.len(), expected.len());
    let (mut engine, mut outputs) = (Engine::new(), Vec::new());
    for (expected, (position, input, said)) in expected.iter().zip(&recorded) {
        assert_eq!(input, expected, "input {position}");
        outputs.clear();
        engine.step(expected, &mut outputs);
        let outputs: Vec<String> = outputs.iter().map(output_text).collect();
        assert_eq!(said, &outputs, "input {position}");
    }
    assert!(desk.is_whole("trial"));
    // The engine goes on where the recording ended; documents of the past wait for nobody.
    let record = desk.path("trial");
    let kept: Keeper = Keeper::open(&record, at(DAYS * 1440), &AtomicBool::new(false))
        .unwrap()
        .unwrap();
    assert_eq!(kept.engine().now(), Some(at(DAYS * 1440 - 1)));
    assert!(kept.outbox().all().is_empty());
    let learned = &kept.engine().standing().channels[0];
    assert!(
        learned.pairs > 100 && learned.issue_number.is_some(),
        "{learned:?}"
    );
}

#[test]
fn views_come_out_as_they_went_in() {
    let desk = Desk::new();
    desk.import(&["ph.csv", "lab.csv"], "trial", &[]);
    let readings = desk.export(&["trial", "readings", "--channel", "intake/ph-1"]);
    assert_eq!(i64::try_from(readings.len()), Ok(1 + DAYS * 1440));
    let column = |name: &str| readings[0].iter().position(|it| it == name).unwrap();
    for (minute, row) in (0..).zip(&readings[1..]) {
        let sampled: jiff::Timestamp = row[column("sampled")].parse().unwrap();
        assert_eq!(sampled.as_nanosecond(), i128::from(at(minute).0));
        let value: f64 = row[column("value")].parse().unwrap();
        assert_eq!(value.to_bits(), indication(minute).to_bits());
    }
    let hour = [
        "--from",
        "2025-01-03T10:00:00+01:00",
        "--to",
        "2025-01-03T10:00:00Z",
    ];
    let some = desk.export(&[&["trial", "readings"], &hour[..]].concat());
    assert_eq!(
        some.len(),
        1 + 61 + 2,
        "an hour of minutes and what the laboratory says at both its ends"
    );
    let pairs = desk.export(&["trial", "pairs"]);
    assert_eq!(i64::try_from(pairs.len()), Ok(1 + DAYS * 24));
    let corrections = desk.export(&["trial", "corrections"]);
    assert!(corrections.len() > 5, "{}", corrections.len());
    let number = corrections[0]
        .iter()
        .position(|it| it == "issue_number")
        .unwrap();
    let numbers = corrections[1..]
        .iter()
        .map(|row| row[number].parse::<i64>().unwrap());
    let count = i64::try_from(corrections.len()).unwrap();
    assert!(numbers.eq(1..count));
    let published = desk.export(&["trial", "published"]);
    assert!(published.len() >= corrections.len());
    assert!(
        published[1..]
            .iter()
            .all(|row| row.iter().next_back() == Some("not-sent"))
    );
    let written = desk.holdtrue(&["export", "trial", "pairs", "--out", "pairs.csv"]);
    assert_eq!((code(&written), written.stdout.len()), (0, 0));
    let lines = std::fs::read_to_string(desk.path("pairs.csv")).unwrap();
    assert_eq!(lines.lines().count(), pairs.len());
}

#[test]
fn the_same_recording_makes_the_same_record() {
    let desk = Desk::new();
    desk.import(&["ph.csv", "lab.csv"], "one", &[]);
    desk.import(&["lab.csv", "ph.csv"], "two", &[]);
    let head = |record: &str| {
        let archive = Archive::open(&desk.path(record)).unwrap();
        verify(&archive, None, || {}).unwrap().head
    };
    assert_eq!(head("one"), head("two"));
}

#[test]
fn a_record_is_gone_on_with_only_when_told_and_only_behind_its_end() {
    let desk = Desk::new();
    assert_eq!(code(&desk.import(&["ph.csv", "lab.csv"], "trial", &[])), 0);
    let before = told(&desk.path("trial")).len();
    let again = desk.import(&["ph.csv", "lab.csv"], "trial", &[]);
    assert_eq!(code(&again), 2);
    assert!(
        text(&again.stderr).contains("has a record already"),
        "{}",
        text(&again.stderr)
    );
    let overlapping = desk.import(&["ph.csv", "lab.csv"], "trial", &["--append"]);
    assert_eq!(code(&overlapping), 2);
    let why = text(&overlapping.stderr);
    assert!(
        why.contains("begins at 2025-01-01T00:00:00Z, before the record"),
        "{why}"
    );
    assert_eq!(told(&desk.path("trial")).len(), before);

    desk.write("ph-2.csv", &indications(DAYS));
    desk.write("lab-2.csv", &references(DAYS));
    let later = desk.import(&["ph-2.csv", "lab-2.csv"], "trial", &["--append"]);
    assert_eq!(code(&later), 0, "{}", text(&later.stderr));
    let after = told(&desk.path("trial"));
    // The configuration is the same and is not told again.
    assert_eq!(after.len() - before, before - 1);
    let setups = after
        .iter()
        .filter(|(_, input, _)| matches!(input, Input::Setup(_)));
    assert_eq!(setups.count(), 1);
    assert!(desk.is_whole("trial"));
}

#[test]
fn nothing_is_written_where_something_cannot_be_read_unless_that_is_left_out() {
    let desk = Desk::new();
    let bad = indications(0).replacen(&stamp(3), "noon", 1);
    desk.write("ph.csv", &bad);
    let refused = desk.import(&["ph.csv", "lab.csv"], "trial", &[]);
    assert_eq!(code(&refused), 2);
    let why = text(&refused.stderr);
    assert!(
        why.contains("ph.csv:5: at: \"noon\" is neither RFC 3339 nor a date"),
        "{why}"
    );
    assert!(why.contains("nothing imported: 1 values or rows"), "{why}");
    assert!(!desk.path("trial").exists());

    let left_out = desk.import(&["ph.csv", "lab.csv"], "trial", &["--skip-bad"]);
    assert_eq!(code(&left_out), 1);
    let said = text(&left_out.stdout);
    assert!(
        said.contains("left out, 1 in all:\nph.csv:5: at: \"noon\""),
        "{said}"
    );
    assert_eq!(
        i64::try_from(told(&desk.path("trial")).len()),
        Ok(DAYS * (1440 + 24))
    );
}

#[test]
fn a_dry_run_writes_nothing() {
    let desk = Desk::new();
    let done = desk.import(&["ph.csv"], "trial", &["--dry-run"]);
    // The laboratory's file is missing.
    assert_eq!(code(&done), 2);
    let why = text(&done.stderr);
    assert!(
        why.contains("none of the files has lab pH, which the mapping names"),
        "{why}"
    );
    let done = desk.import(&["ph.csv", "lab.csv"], "trial", &["--dry-run"]);
    assert_eq!(code(&done), 0, "{}", text(&done.stderr));
    let said = text(&done.stdout);
    assert!(
        said.contains("column  pH, indication of intake/ph-1: 14400 values"),
        "{said}"
    );
    assert!(said.ends_with("nothing written\n"), "{said}");
    assert!(!desk.path("trial").exists());
}

#[test]
fn what_the_outside_lacks_is_told_apart_from_what_is_asked_wrongly() {
    let desk = Desk::new();
    assert_eq!(code(&desk.import(&["ph.csv", "none.csv"], "trial", &[])), 3);
    desk.write("empty.csv", "at,pH,lab pH\n");
    let empty = desk.import(&["empty.csv"], "empty", &[]);
    assert_eq!(code(&empty), 2);
    assert!(text(&empty.stderr).contains("none of the files has a value"));
    assert!(!desk.path("empty").exists());
    desk.write("ph.data", "at,pH\n");
    let nameless = desk.import(&["ph.data"], "trial", &[]);
    assert_eq!(code(&nameless), 2);
    assert!(text(&nameless.stderr).contains("say --format csv, json-lines or senml"));
    desk.import(&["ph.csv", "lab.csv"], "trial", &[]);
    let cases: [(&[&str], &str); 5] = [
        (
            &["trial", "colours"],
            "no view \"colours\"; there are readings, pairs",
        ),
        (
            &["trial", "configurations", "--channel", "x"],
            "nothing to choose by --channel",
        ),
        (
            &["trial", "readings", "--from", "noon"],
            "neither a day like",
        ),
        (&[".", "readings"], ". holds no record"),
        (
            &["trial", "published", "--from", "2025-01-01"],
            "nothing to choose by --from",
        ),
    ];
    for (words, message) in cases {
        let done = desk.holdtrue(&[&["export"], words].concat());
        assert_eq!(code(&done), 2, "{words:?}");
        let said = text(&done.stderr);
        assert!(said.contains(message), "{words:?}: {said}");
    }
    assert_eq!(code(&desk.holdtrue(&["export", "nowhere", "readings"])), 3);
    let list = desk.holdtrue(&["export", "trial", "--list"]);
    assert_eq!(code(&list), 0);
    assert!(text(&list.stdout).contains("pairs "));
}
