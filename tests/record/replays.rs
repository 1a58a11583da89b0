//! A record replayed says the same bit for bit; what was changed in it is named; another
//! configuration is tried beside it.

use super::station::{START, recorded, setup};
use holdtrue::record::Archive;
use holdtrue::replay::{Difference, Range, ReplayError, audit, trial};
use holdtrue_engine::time::Timestamp;
use std::path::{Path, PathBuf};

fn file(folder: &Path, place: usize) -> PathBuf {
    let archive = Archive::open(folder).unwrap();
    archive.path(archive.days()[place])
}

fn alter(file: &Path, change: &str) {
    let connection = rusqlite::Connection::open(file).unwrap();
    assert!(connection.execute(change, []).unwrap() > 0, "{change}");
}

fn replay(folder: &Path, range: Range) -> holdtrue::replay::Audit {
    audit(&Archive::open(folder).unwrap(), range, &mut |_| {}).unwrap()
}

#[test]
fn a_record_of_three_days_is_identical_to_the_last_bit_and_state() {
    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 3);
    let audit = replay(folder.path(), Range::default());
    assert_eq!(audit.difference, None);
    // One file a day; the end of the third day is the beginning of the next.
    assert!(audit.files >= 3, "{audit:?}");
    assert!(audit.outputs > 1000, "{audit:?}");
    assert!(audit.states > 6, "{audit:?}");
    let inputs = 3 * 86_400 / 300 * 4 + 1;
    assert_eq!(audit.inputs, inputs);
}

#[test]
fn a_part_of_a_day_is_replayed_alone() {
    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 3);
    let at = |hours: i64| Timestamp((START + hours * 3600) * 1_000_000_000);
    let range = Range {
        from: at(30),
        to: Timestamp(at(36).0 - 1),
    };
    let part = replay(folder.path(), range);
    assert_eq!((part.difference, part.files), (None, 1));
    assert_eq!(part.inputs, 6 * 3600 / 300 * 4);
    let beyond = Range {
        from: Timestamp(i64::MIN),
        to: Timestamp(0),
    };
    let archive = Archive::open(folder.path()).unwrap();
    let refused = audit(&archive, beyond, &mut |_| {}).unwrap_err();
    assert!(matches!(refused, ReplayError::Nothing { .. }), "{refused}");
}

#[test]
fn what_was_changed_is_named_at_its_input() {
    // Input, output and state of the second day.
    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 2);
    alter(
        &file(folder.path(), 1),
        "UPDATE outputs SET body = replace(body, '\"indication\":1', '\"indication\":2')
         WHERE position = (SELECT min(position) FROM outputs WHERE kind = 'pair')",
    );
    let Some(Difference::Output {
        recorded: told,
        now,
        ..
    }) = replay(folder.path(), Range::default()).difference
    else {
        panic!("a changed output was not seen")
    };
    assert!(told.unwrap().contains("\"indication\":2"));
    assert!(now.unwrap().contains("\"indication\":1"));

    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 2);
    alter(
        &file(folder.path(), 1),
        "UPDATE raw_readings SET value = value + 0.01
         WHERE position = (SELECT min(position) FROM raw_readings)",
    );
    let difference = replay(folder.path(), Range::default()).difference;
    assert!(
        matches!(difference, Some(Difference::Output { .. })),
        "{difference:?}"
    );

    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 2);
    alter(
        &file(folder.path(), 1),
        "UPDATE raw_readings SET value = 1.5 WHERE position =
         (SELECT max(position) FROM raw_readings WHERE source = 1)",
    );
    let difference = replay(folder.path(), Range::default()).difference;
    assert!(difference.is_some(), "the day ends in another state");
}

#[test]
fn another_arithmetic_is_named_and_not_blamed_on_the_record() {
    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 1);
    alter(
        &file(folder.path(), 0),
        "UPDATE day SET arithmetic = arithmetic + 1",
    );
    let archive = Archive::open(folder.path()).unwrap();
    let refused = audit(&archive, Range::default(), &mut |_| {}).unwrap_err();
    assert!(
        matches!(refused, ReplayError::Arithmetic { .. }),
        "{refused}"
    );
}

#[test]
fn a_trial_with_the_same_configuration_agrees_and_with_another_differs() {
    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 3);
    let archive = Archive::open(folder.path()).unwrap();
    let try_with = |window| trial(&archive, Range::default(), &setup(window), &mut |_| {}).unwrap();
    let same = try_with(24);
    let (recorded, tried) = &same.channels["shore/t-1"];
    assert_eq!(recorded.pairs, 3 * 86_400 / 300);
    assert_eq!(
        (recorded.pairs, recorded.kept_out),
        (tried.pairs, tried.kept_out)
    );
    assert_eq!(recorded.degrees, tried.degrees);
    assert_eq!(recorded.last, tried.last, "not one bit");
    let (uncorrected, corrected) = tried.errors().unwrap();
    assert!(corrected < 0.2 * uncorrected, "{uncorrected} {corrected}");
    let other = try_with(6);
    let (recorded, tried) = &other.channels["shore/t-1"];
    assert_eq!(recorded.pairs, tried.pairs);
    assert_ne!(recorded.last, tried.last);
}

#[test]
fn a_trial_without_a_channel_counts_its_readings() {
    let folder = tempfile::tempdir().unwrap();
    recorded(folder.path(), 1);
    let mut less = setup(24);
    less.channels.pop();
    let archive = Archive::open(folder.path()).unwrap();
    let trial = trial(&archive, Range::default(), &less, &mut |_| {}).unwrap();
    assert_eq!(trial.unused, 86_400 / 300);
    assert_eq!(trial.channels["shore/t-2"].1.pairs, 0);
}
