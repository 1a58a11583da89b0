//! A restart cannot be told from no restart; a damaged state falls back to an older one.

use super::station::{START, open, setup, work};
use holdtrue::keeper::whole;
use holdtrue::record::{Archive, State};
use std::path::Path;

const HOUR: i64 = 3600;

/// The state at the end of a run over two days that was broken off at these hours.
fn run(folder: &Path, broken_off: &[i64]) -> State {
    let mut keeper = open(folder, START);
    keeper.adopt(&setup(24)).unwrap();
    let mut from = START;
    for hour in broken_off {
        work(&mut keeper, from, START + hour * HOUR - from);
        from = START + hour * HOUR;
        // Without a word, as a kill would.
        drop(keeper);
        keeper = open(folder, from);
    }
    work(&mut keeper, from, START + 48 * HOUR - from);
    whole(keeper.engine(), &[])
}

#[test]
fn the_state_after_restarts_is_that_of_an_uninterrupted_run_bit_for_bit() {
    let folder = tempfile::tempdir().unwrap();
    let uninterrupted = run(&folder.path().join("a"), &[]);
    for (place, broken_off) in [vec![1], vec![20, 23, 25], vec![24], vec![13, 26, 39]]
        .iter()
        .enumerate()
    {
        let other = run(&folder.path().join(place.to_string()), broken_off);
        assert!(other == uninterrupted, "broken off at {broken_off:?}");
    }
}

#[test]
fn a_damaged_state_falls_back_to_an_older_one_with_the_same_result() {
    let folder = tempfile::tempdir().unwrap();
    let sound = run(&folder.path().join("a"), &[]);
    let damaged = folder.path().join("b");
    drop(run(&damaged, &[]));
    let archive = Archive::open(&damaged).unwrap();
    let newest = *archive.days().last().unwrap();
    let states = archive.day(newest).unwrap().saved_states().unwrap().len();
    let connection = rusqlite::Connection::open(archive.path(newest)).unwrap();
    connection
        .execute(
            "UPDATE states SET bytes = zeroblob(length(bytes)) WHERE part = 'channel/0'",
            [],
        )
        .unwrap();
    drop(connection);
    let keeper = open(&damaged, START + 48 * HOUR);
    assert!(states > 0);
    assert!(whole(keeper.engine(), &[]) == sound);
}

#[test]
fn without_any_sound_state_it_is_built_anew_from_the_readings() {
    let folder = tempfile::tempdir().unwrap();
    drop(run(folder.path(), &[]));
    let archive = Archive::open(folder.path()).unwrap();
    for name in archive.days() {
        let connection = rusqlite::Connection::open(archive.path(*name)).unwrap();
        connection
            .execute("UPDATE states SET bytes = x'00'", [])
            .unwrap();
    }
    let keeper = open(folder.path(), START + 48 * HOUR);
    let standing = keeper.engine().standing();
    assert_eq!(standing.channels.len(), 2);
    assert_eq!(standing.channels[0].pairs, 48 * 3600 / 300);
}
