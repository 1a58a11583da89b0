//! `plant write`: the same seed gives the same bytes, the truth stands beside the readings, and the
//! configuration that comes with them is one the daemon takes without a warning.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking"
)]

use clap::Parser;
use holdtrue::configuration;
use holdtrue_engine::time::Timestamp;
use holdtrue_simulators::command::{Arguments, run};
use holdtrue_simulators::feed::rows::{Mapping, Rows};
use holdtrue_simulators::feed::table::{FileForm, Table};
use holdtrue_simulators::message::{Message, Topics};
use holdtrue_simulators::plant::Plant;
use holdtrue_simulators::scenario;
use std::path::Path;
use tempfile::TempDir;

/// Runs `plant` with these words.
fn plant(words: &[&str]) -> Result<(), String> {
    let arguments = Arguments::try_parse_from([&["plant"], words].concat())
        .map_err(|error| error.to_string())?;
    run(arguments).map_err(|failure| failure.to_string())
}

fn written(seed: &str, format: &str) -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().to_str().unwrap();
    let words = [
        "--days", "3", "--seed", seed, "--format", format, "--out", out,
    ];
    plant(&[&["write", "harrow-mere"], &words[..]].concat()).unwrap();
    folder
}

fn bytes(folder: &Path) -> Vec<(String, Vec<u8>)> {
    let mut files: Vec<_> = std::fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap())
        .map(|entry| {
            (
                entry.file_name().into_string().unwrap(),
                std::fs::read(entry.path()).unwrap(),
            )
        })
        .collect();
    files.sort();
    files
}

#[test]
fn the_same_seed_gives_the_same_bytes_and_another_seed_others() {
    let [one, again, other] = ["7", "7", "8"].map(|seed| written(seed, "jsonl"));
    let files = bytes(one.path());
    let names: Vec<&str> = files.iter().map(|(name, _)| name.as_str()).collect();
    assert_eq!(
        names,
        ["holdtrue.toml", "readings.jsonl", "truth.csv", "truth.json"]
    );
    assert_eq!(files, bytes(again.path()));
    for ((name, seven), (_, eight)) in files.iter().zip(bytes(other.path())) {
        assert_eq!(*seven == eight, name == "holdtrue.toml", "{name}");
    }
}

#[test]
fn a_sensor_reads_the_same_alone_as_in_the_whole_plant() {
    let whole = Plant::new(scenario::find("harrow-mere").unwrap(), 5, 2.0);
    let topics = Topics::new(&whole.scenario);
    for name in ["linear", "stuck", "reference-dying"] {
        let alone = Plant::new(scenario::find(name).unwrap(), 5, 2.0);
        let own = Topics::new(&alone.scenario);
        let instrument = alone.scenario.kits[0].instrument;
        let mine = [instrument.topic(), instrument.reference_topic()];
        let among: Vec<Message> = whole
            .clone()
            .map(|sample| topics.message(&sample))
            .filter(|message| mine.contains(&message.topic))
            .collect();
        let alone: Vec<Message> = alone.map(|sample| own.message(&sample)).collect();
        assert!(alone.len() > 150);
        assert_eq!(among, alone, "{name}");
    }
}

#[test]
fn readings_and_truth_tell_the_same_story() {
    let folder = written("3", "csv");
    let mut truths = csv::Reader::from_path(folder.path().join("truth.csv")).unwrap();
    let mut readings = csv::Reader::from_path(folder.path().join("readings.csv")).unwrap();
    let indications: Vec<csv::StringRecord> = readings
        .records()
        .map(Result::unwrap)
        .filter(|row| !row[0].contains("/reference/"))
        .collect();
    let truths: Vec<csv::StringRecord> = truths.records().map(Result::unwrap).collect();
    assert_eq!(indications.len(), truths.len());
    assert!(truths.len() > 2000);
    for (reading, truth) in indications.iter().zip(&truths) {
        assert_eq!(reading[0], format!("harrow-mere/{}", &truth[1]));
        assert_eq!((&reading[1], &reading[2]), (&truth[0], &truth[2]));
        let number = |column: usize| truth[column].parse::<f64>().unwrap();
        // error = indication − true value (VIM 2.16)
        assert!((number(2) - number(3) - number(4)).abs() < 1e-9);
    }
    let json = std::fs::read_to_string(folder.path().join("truth.json")).unwrap();
    let json: serde_json::Value = serde_json::from_str(&json).unwrap();
    assert_eq!(json["seed"], 3);
    assert_eq!(json["sensors"].as_array().unwrap().len(), 13);
}

#[test]
fn what_was_written_can_be_fed_as_it_was() {
    for (format, form) in [
        ("jsonl", FileForm::JsonLines),
        ("csv", FileForm::Csv { separator: b',' }),
    ] {
        let folder = written("4", format);
        let table = Table::open(&folder.path().join(format!("readings.{format}")), form).unwrap();
        let mapping = Mapping {
            topic: "{topic}".to_owned(),
            ..Mapping::default()
        };
        let mut rows = Rows::new(table, mapping).unwrap();
        let fed: Vec<Message> = rows.by_ref().collect();
        assert_eq!(rows.left_out, 0, "{:?}", rows.reasons);
        let plant = Plant::new(scenario::find("harrow-mere").unwrap(), 4, 3.0);
        let topics = Topics::new(&plant.scenario);
        let sent: Vec<Message> = plant.map(|sample| topics.message(&sample)).collect();
        assert_eq!(fed.len(), sent.len());
        for (fed, sent) in fed.iter().zip(&sent) {
            assert_eq!((&fed.topic, fed.at), (&sent.topic, sent.at));
            let json = |text: &str| serde_json::from_str::<serde_json::Value>(text).unwrap();
            assert_eq!(json(&fed.payload), json(&sent.payload), "{}", sent.payload);
        }
    }
}

#[test]
fn every_scenario_comes_with_a_configuration_that_the_daemon_takes() {
    for scenario in scenario::all() {
        let text = holdtrue_simulators::configuration::text(
            &scenario,
            60.0,
            &holdtrue_simulators::configuration::Surroundings::default(),
        );
        let now = Timestamp(1_772_409_600_000_000_000);
        let read = configuration::from_text(&text, "holdtrue.toml", Path::new("."), now);
        let settings = read.unwrap_or_else(|problems| panic!("{}: {problems}", scenario.name));
        // Two sensors that feel no daily cycle have windows too short for one, and are warned of.
        let short = |kit: &&scenario::Kit| kit.instrument.window_days < 3.0;
        let warnings = &settings.warnings;
        assert_eq!(warnings.len(), scenario.kits.iter().filter(short).count());
        assert!(
            warnings
                .iter()
                .all(|it| it.message.contains("fewer than three days"))
        );
        assert_eq!(settings.setup.channels.len(), scenario.kits.len());
        for (channel, kit) in settings.setup.channels.iter().zip(&scenario.kits) {
            assert_eq!(channel.name, kit.instrument.name);
            assert_eq!(
                channel.max_permissible_error,
                Some(kit.instrument.max_permissible_error)
            );
            assert_eq!(channel.max_drift_rate.is_some(), kit.rate_watched);
        }
    }
}

#[test]
fn wrong_words_are_told_what_is_right() {
    let cases: [(&[&str], &str); 7] = [
        (&["write", "nowhere", "--out", "x"], "harrow-mere"),
        (
            &["write", "linear", "--days", "0", "--out", "x"],
            "more than 0",
        ),
        (
            &["write", "linear", "--days", "NaN", "--out", "x"],
            "more than 0",
        ),
        (
            &["publish", "linear", "--broker", "http://x"],
            "mqtt://HOST",
        ),
        (
            &["publish", "linear", "--broker", "mqtt://x", "--speed=-1"],
            "above 0",
        ),
        (
            &["feed", "a.txt", "--broker", "mqtt://x", "--topic", "t"],
            "--format",
        ),
        (
            &[
                "feed", "a.csv", "--broker", "mqtt://x", "--topic", "t", "--field", "v",
            ],
            "COLUMN",
        ),
    ];
    for (words, advice) in cases {
        let told = plant(words).expect_err("must be refused");
        assert!(told.contains(advice), "{words:?}: {told}");
    }
}

#[test]
fn rows_that_can_not_be_read_are_left_out_and_named() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("rows.csv");
    std::fs::write(
        &path,
        "day,ohm\n1980-02-05,1.5\n1980-02-06,\nsoon,2\n1980-02-08,NaN\n1980-02-09,007\n",
    )
    .unwrap();
    let table = Table::open(&path, FileForm::Csv { separator: b',' }).unwrap();
    let mapping = Mapping {
        topic: "bench/r".to_owned(),
        fields: vec!["at=day:time".parse().unwrap(), "value=ohm".parse().unwrap()],
        constants: vec!["reference=0".parse().unwrap()],
        time_form: Some("date".parse().unwrap()),
    };
    let mut rows = Rows::new(table, mapping).unwrap();
    let payloads: Vec<String> = rows.by_ref().map(|message| message.payload).collect();
    assert_eq!(
        payloads,
        [
            r#"{"at":"1980-02-05T00:00:00Z","reference":0,"value":1.5}"#,
            r#"{"at":"1980-02-09T00:00:00Z","reference":0,"value":7}"#,
        ]
    );
    assert_eq!(rows.left_out, 3);
    let reasons = rows.reasons.join("\n");
    for (line, cell) in [(3, r#""""#), (4, r#""soon""#), (5, r#""NaN""#)] {
        assert!(
            reasons.contains(&format!("line {line}: ")) && reasons.contains(cell),
            "{reasons}"
        );
    }
}
