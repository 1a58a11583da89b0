//! The record keeps inputs, outputs and documents whole, in order, or not at all, for one daemon
//! at a time.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking; the lint does not see helpers as tests"
)]

use super::support::{document, live, notice, open, reading, told};
use holdtrue::record::{FORMAT_VERSION, Record, RecordError, Settled};
use holdtrue_engine::event::{Input, Source, Supplied};
use holdtrue_engine::setup::ChannelId;
use holdtrue_engine::time::Timestamp;

#[test]
fn what_was_committed_comes_back_in_order_with_its_outputs() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = open(folder.path());
    let inputs = [
        reading(1, 0.1),
        reading(2, -1.5),
        Input::Tick { now: Timestamp(3) },
    ];
    let batch = record.batch();
    batch.add(&inputs[0], &[], &[notice("a"), notice("b")]);
    batch.add(&inputs[1], &[], &[]);
    record.commit(Timestamp(4)).unwrap();
    record.batch().add(&inputs[2], &[], &[notice("c")]);
    record.commit(Timestamp(5)).unwrap();
    drop(record);

    let record = Record::open(folder.path()).unwrap();
    let all = told(folder.path());
    let texts: Vec<usize> = all.iter().map(|(_, _, outputs)| outputs.len()).collect();
    assert_eq!(texts, [2, 0, 1]);
    for ((position, input, _), (expected, told)) in all.iter().zip((1..).zip(&inputs)) {
        assert_eq!((position, input), (&expected, told));
    }
    let [(_, _, first), ..] = &all[..] else {
        panic!("nothing came back")
    };
    assert_eq!(first[0], serde_json::to_string(&notice("a")).unwrap());
    assert_eq!(record.last_input(), 3);
}

/// SQLite stores a negative zero as zero; the engine makes no difference between them.
#[test]
fn a_negative_zero_comes_back_as_zero_and_breaks_no_link() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = open(folder.path());
    record.batch().add(&reading(1, -0.0), &[], &[]);
    record.commit(Timestamp(4)).unwrap();
    let Input::Reading(back) = &told(folder.path())[0].1 else {
        panic!("the kind changed")
    };
    assert_eq!(back.value.to_bits(), 0.0_f64.to_bits());
}

#[test]
fn a_commit_that_fails_leaves_nothing_and_the_same_batch_succeeds_later() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = open(folder.path());
    let batch = record.batch();
    batch.add(&reading(1, 1.0), &[], &[notice("a")]);
    batch.add_document(document("t", "x", true));
    let other = live(folder.path());
    other.execute_batch("BEGIN IMMEDIATE").unwrap();
    assert!(
        record.commit(Timestamp(4)).is_err(),
        "another process holds the write lock"
    );
    other.execute_batch("ROLLBACK").unwrap();
    assert!(told(folder.path()).is_empty());
    assert!(record.outbox().unwrap().is_empty());
    record.commit(Timestamp(5)).unwrap();
    assert_eq!(told(folder.path()).len(), 1);
    assert_eq!(record.outbox().unwrap().len(), 1);
}

#[test]
fn the_outbox_holds_what_was_not_taken_and_standing_what_is_retained() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = open(folder.path());
    let documents = [
        document("a", "old", true),
        document("b", "kept", true),
        document("n", "passing", false),
        document("a", "new", true),
    ];
    for document in documents.clone() {
        record.batch().add_document(document);
    }
    record.batch().settle(1, Settled::Taken);
    record.commit(Timestamp(4)).unwrap();
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

    let batch = record.batch();
    let cleared = batch.add_document(holdtrue::document::cleared("a".into()));
    assert_eq!(cleared, 5);
    batch.settle(2, Settled::Taken);
    record.commit(Timestamp(5)).unwrap();
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
fn another_format_is_refused_and_left_untouched() {
    let folder = tempfile::tempdir().unwrap();
    drop(open(folder.path()));
    for other in [FORMAT_VERSION + 1, FORMAT_VERSION - 1] {
        let file = live(folder.path());
        file.pragma_update(None, "user_version", other).unwrap();
        let Err(error) = Record::open(folder.path()) else {
            panic!("opened format {other}")
        };
        assert!(matches!(error, RecordError::OtherFormat { .. }), "{error}");
        let now: i32 = file
            .query_row("PRAGMA user_version", [], |row| row.get(0))
            .unwrap();
        assert_eq!(now, other);
    }
}

#[test]
fn a_file_of_something_else_is_refused_and_left_untouched() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("2026-12-01.0001.sqlite");
    let file = rusqlite::Connection::open(path).unwrap();
    file.execute_batch("CREATE TABLE shopping (item TEXT)")
        .unwrap();
    let Err(error) = Record::open(folder.path()) else {
        panic!("took a foreign file")
    };
    assert!(matches!(error, RecordError::Foreign { .. }), "{error}");
    let tables: i64 = file
        .query_row("SELECT count(*) FROM sqlite_schema", [], |row| row.get(0))
        .unwrap();
    assert_eq!(tables, 1);
}

#[test]
fn a_missing_or_broken_row_is_named() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = open(folder.path());
    record.batch().add(&reading(1, 1.0), &[], &[]);
    for now in 2..=3 {
        let tick = Input::Tick {
            now: Timestamp(now),
        };
        record.batch().add(&tick, &[], &[]);
    }
    record.commit(Timestamp(4)).unwrap();
    let archive = record.archive().unwrap();
    let other = live(folder.path());
    other
        .execute("UPDATE inputs SET body = '{' WHERE position = 3", [])
        .unwrap();
    let error = archive.walk::<RecordError>(|_| Ok(())).unwrap_err();
    assert!(
        matches!(error, RecordError::Unreadable { position: 3, .. }),
        "{error}"
    );
    other
        .execute("DELETE FROM inputs WHERE position = 2", [])
        .unwrap();
    let error = archive.walk::<RecordError>(|_| Ok(())).unwrap_err();
    let missing = matches!(
        error,
        RecordError::Missing {
            expected: 2,
            found: 3,
            ..
        }
    );
    assert!(missing, "{error}");
}

#[test]
fn supplied_rows_come_back_through_their_positions_from_whatever_file() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = open(folder.path());
    for time in 1..=4 {
        let value = f64::from(i32::try_from(time).unwrap()) / 3.0;
        record.batch().add(&reading(time, value), &[], &[]);
    }
    record.commit(Timestamp(5)).unwrap();
    record.finish(Timestamp(5)).unwrap();
    super::support::turn(&mut record, Timestamp(6));
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
    record.batch().add(&supplied, &positions, &[]);
    record.commit(Timestamp(6)).unwrap();
    assert_eq!(told(folder.path())[4].1, supplied);
}

#[test]
fn a_file_whose_making_was_broken_off_is_taken_away() {
    let folder = tempfile::tempdir().unwrap();
    drop(open(folder.path()));
    let unmade = folder.path().join("1970-01-02.0001.sqlite");
    std::fs::write(&unmade, b"").unwrap();
    let record = Record::open(folder.path()).unwrap();
    assert!(!unmade.exists());
    assert!(record.live().is_some(), "the one before goes on");
}

/// The log beside a file is all that a young file's rows stand in. What is lost with it is lost,
/// but the file must not look as if it had never been made.
#[test]
fn a_file_whose_log_is_damaged_is_not_taken_away() {
    let (folder, other) = (tempfile::tempdir().unwrap(), tempfile::tempdir().unwrap());
    let mut record = open(folder.path());
    record.batch().add(&reading(1, 1.0), &[], &[]);
    record.commit(Timestamp(4)).unwrap();
    let name = "1970-01-01.0001.sqlite";
    std::fs::copy(folder.path().join(name), other.path().join(name)).unwrap();
    let log = format!("{name}-wal");
    let mut bytes = std::fs::read(folder.path().join(&log)).unwrap();
    assert!(bytes.len() > 1000, "the reading is in the log");
    bytes[..32].fill(0x5a);
    std::fs::write(other.path().join(&log), bytes).unwrap();
    let record = Record::open(other.path()).unwrap();
    assert!(
        record.live().is_some(),
        "it was taken for one that was never made"
    );
    assert!(other.path().join(name).exists());
}
