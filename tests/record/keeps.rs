//! The record keeps inputs, outputs and documents whole, in order, or not at all, for one daemon
//! at a time.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking; the lint does not see helpers as tests"
)]

use holdtrue::document::Document;
use holdtrue::record::{FORMAT_VERSION, Numbered, Record, RecordError};
use holdtrue_engine::event::{Input, Notice, Output, Reading, Source, Subject, Supplied};
use holdtrue_engine::setup::ChannelId;
use holdtrue_engine::time::Timestamp;
use std::path::Path;

fn reading(time: i64, value: f64) -> Input {
    Input::Reading(Reading {
        source: Source::Indication(ChannelId(0)),
        received: Timestamp(time + 7),
        phenomenon: Timestamp(time),
        value,
        sequence: None,
        excluded: false,
    })
}

fn notice(text: &str) -> Output {
    Output::Notice(Notice {
        at: Timestamp(1),
        subject: Subject::Node,
        code: "test".to_owned(),
        text: text.to_owned(),
        held_back: 0,
    })
}

fn document(topic: &str, payload: &str, retain: bool) -> Document {
    Document {
        topic: topic.to_owned(),
        payload: payload.as_bytes().to_vec(),
        retain,
        expires: None,
        correlation: None,
    }
}

fn replayed(record: &Record) -> Vec<(i64, Input, Vec<String>)> {
    let mut all = Vec::new();
    record
        .replay::<RecordError>(|row| {
            all.push((row.position, row.input, row.outputs));
            Ok(())
        })
        .unwrap();
    all
}

fn sqlite(folder: &Path) -> rusqlite::Connection {
    rusqlite::Connection::open(folder.join("holdtrue.sqlite")).unwrap()
}

#[test]
fn what_was_committed_comes_back_in_order_with_its_outputs() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    let inputs = [
        reading(1, 0.1),
        reading(2, -0.0),
        Input::Tick { now: Timestamp(3) },
    ];
    let mut batch = record.batch();
    batch.add(&inputs[0], &[], &[notice("a"), notice("b")]);
    batch.add(&inputs[1], &[], &[]);
    record.commit(&batch).unwrap();
    let mut batch = record.batch();
    batch.add(&inputs[2], &[], &[notice("c")]);
    record.commit(&batch).unwrap();
    drop(record);

    let record = Record::open(folder.path()).unwrap();
    let all = replayed(&record);
    let texts: Vec<usize> = all.iter().map(|(_, _, outputs)| outputs.len()).collect();
    assert_eq!(texts, [2, 0, 1]);
    for ((position, input, _), (expected, told)) in all.iter().zip((1..).zip(&inputs)) {
        assert_eq!((position, input), (&expected, told));
    }
    let [(_, _, first), ..] = &all[..] else {
        panic!("nothing came back")
    };
    assert_eq!(first[0], serde_json::to_string(&notice("a")).unwrap());
    assert_eq!(record.next_input(), 4);
}

#[test]
fn a_commit_that_fails_leaves_nothing_and_the_same_batch_succeeds_later() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    let mut batch = record.batch();
    batch.add(&reading(1, 1.0), &[], &[notice("a")]);
    batch.add_document(Numbered {
        number: 1,
        document: document("t", "x", true),
    });
    let other = sqlite(folder.path());
    other.execute_batch("BEGIN IMMEDIATE").unwrap();
    assert!(
        record.commit(&batch).is_err(),
        "another process holds the write lock"
    );
    other.execute_batch("ROLLBACK").unwrap();
    assert!(replayed(&record).is_empty());
    assert!(record.outbox().unwrap().is_empty());
    record.commit(&batch).unwrap();
    assert_eq!(replayed(&record).len(), 1);
    assert_eq!(record.outbox().unwrap().len(), 1);
}

#[test]
fn the_outbox_holds_what_was_not_taken_and_standing_what_is_retained() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    let mut batch = record.batch();
    let documents = [
        document("a", "old", true),
        document("b", "kept", true),
        document("n", "passing", false),
        document("a", "new", true),
    ];
    for (number, document) in (1..).zip(documents.clone()) {
        batch.add_document(Numbered { number, document });
    }
    batch.remove_document(1);
    record.commit(&batch).unwrap();
    drop(record);

    let mut record = Record::open(folder.path()).unwrap();
    let numbers: Vec<i64> = record
        .outbox()
        .unwrap()
        .iter()
        .map(|it| it.number)
        .collect();
    assert_eq!(numbers, [2, 3, 4]);
    assert_eq!(record.outbox().unwrap()[0].document, documents[1]);
    assert_eq!(
        record.standing().unwrap(),
        [documents[3].clone(), documents[1].clone()]
    );

    let mut batch = record.batch();
    batch.add_document(Numbered {
        number: 5,
        document: holdtrue::document::cleared("a".into()),
    });
    batch.remove_document(2);
    record.commit(&batch).unwrap();
    assert_eq!(record.standing().unwrap(), [documents[1].clone()]);
}

#[test]
fn a_second_daemon_is_refused_and_told_who_holds_the_record() {
    let folder = tempfile::tempdir().unwrap();
    let first = Record::open(folder.path()).unwrap();
    let Err(error) = Record::open(folder.path()) else {
        panic!("two daemons on one record")
    };
    assert!(
        error.to_string().contains(&std::process::id().to_string()),
        "{error}"
    );
    drop(first);
    Record::open(folder.path()).unwrap();
}

#[test]
fn a_newer_format_is_refused_and_left_untouched() {
    let folder = tempfile::tempdir().unwrap();
    drop(Record::open(folder.path()).unwrap());
    let newer = FORMAT_VERSION + 1;
    sqlite(folder.path())
        .pragma_update(None, "user_version", newer)
        .unwrap();
    let Err(error) = Record::open(folder.path()) else {
        panic!("opened a newer format")
    };
    assert!(matches!(error, RecordError::NewerFormat { .. }), "{error}");
    let now: i32 = sqlite(folder.path())
        .query_row("PRAGMA user_version", [], |row| row.get(0))
        .unwrap();
    assert_eq!(now, newer);
}

#[test]
fn a_file_of_something_else_is_refused_and_left_untouched() {
    let folder = tempfile::tempdir().unwrap();
    sqlite(folder.path())
        .execute_batch("CREATE TABLE shopping (item TEXT)")
        .unwrap();
    let Err(error) = Record::open(folder.path()) else {
        panic!("took a foreign file")
    };
    assert!(matches!(error, RecordError::Foreign { .. }), "{error}");
    let tables: i64 = sqlite(folder.path())
        .query_row("SELECT count(*) FROM sqlite_schema", [], |row| row.get(0))
        .unwrap();
    assert_eq!(tables, 1);
}

#[test]
fn a_missing_or_broken_row_is_named() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    let mut batch = record.batch();
    for time in 1..=3 {
        batch.add(&reading(time, 1.0), &[], &[]);
    }
    record.commit(&batch).unwrap();
    let other = sqlite(folder.path());
    other
        .execute("UPDATE inputs SET body = '{' WHERE position = 3", [])
        .unwrap();
    let error = record.replay::<RecordError>(|_| Ok(())).unwrap_err();
    assert!(
        matches!(error, RecordError::Unreadable { position: 3, .. }),
        "{error}"
    );
    other
        .execute("DELETE FROM inputs WHERE position = 2", [])
        .unwrap();
    let error = record.replay::<RecordError>(|_| Ok(())).unwrap_err();
    assert!(
        matches!(
            error,
            RecordError::Missing {
                expected: 2,
                found: 3
            }
        ),
        "{error}"
    );
}

#[test]
fn supplied_rows_come_back_through_their_positions() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    let mut batch = record.batch();
    for time in 1..=4 {
        batch.add(
            &reading(time, f64::from(i32::try_from(time).unwrap()) / 3.0),
            &[],
            &[],
        );
    }
    record.commit(&batch).unwrap();
    let found = record
        .readings(
            &[Source::Indication(ChannelId(0))],
            Timestamp(2),
            Timestamp(4),
            10,
        )
        .unwrap();
    let positions: Vec<i64> = found.iter().map(|(position, _)| *position).collect();
    assert_eq!(positions, [2, 3]);
    let none = record.readings(
        &[Source::Indication(ChannelId(1))],
        Timestamp(0),
        Timestamp(9),
        10,
    );
    assert!(none.unwrap().is_empty());

    let supplied = Input::Supplied(Supplied {
        channel: ChannelId(0),
        from: Timestamp(2),
        to: Timestamp(4),
        readings: found.into_iter().map(|(_, reading)| reading).collect(),
    });
    let mut batch = record.batch();
    batch.add(&supplied, &positions, &[]);
    record.commit(&batch).unwrap();
    assert_eq!(replayed(&record)[4].1, supplied);
}

#[test]
fn the_program_that_wrote_a_row_is_known() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    assert_eq!(record.program_at(1).unwrap(), None);
    record.begin_session(Timestamp(1), "0.1.0").unwrap();
    let mut batch = record.batch();
    batch.add(&reading(1, 1.0), &[], &[]);
    record.commit(&batch).unwrap();
    record.begin_session(Timestamp(2), "0.2.0").unwrap();
    assert_eq!(record.program_at(1).unwrap().as_deref(), Some("0.1.0"));
    assert_eq!(record.program_at(2).unwrap().as_deref(), Some("0.2.0"));
}

/// Earlier builds wrote an outbox without the answers' correlation data.
#[test]
fn an_outbox_of_an_earlier_build_is_read_and_takes_answers() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = Record::open(folder.path()).unwrap();
    let mut batch = record.batch();
    let waiting = Numbered {
        number: 1,
        document: document("a", "1", true),
    };
    batch.add_document(waiting.clone());
    record.commit(&batch).unwrap();
    drop(record);
    let file = folder.path().join("holdtrue.sqlite");
    let connection = rusqlite::Connection::open(file).unwrap();
    connection
        .execute_batch("ALTER TABLE outbox DROP COLUMN correlation")
        .unwrap();
    drop(connection);
    let mut record = Record::open(folder.path()).unwrap();
    let mut batch = record.batch();
    let mut answer = Numbered {
        number: 2,
        document: document("tool/answers", "2", false),
    };
    answer.document.correlation = Some(vec![0, 255]);
    batch.add_document(answer.clone());
    record.commit(&batch).unwrap();
    assert_eq!(record.outbox().unwrap(), [waiting, answer]);
}
