//! Old files go when they are too old or the record too large, never without a note, and nothing
//! else changes by it.

use super::station::{START, open, setup, work};
use holdtrue::keeper::whole;
use holdtrue::record::{Archive, Retention, verify};
use holdtrue_engine::time::{Duration, Timestamp};
use std::path::Path;

const DAY: i64 = 86_400;

/// Works for six days with windows of so many hours; the state at the end.
fn run(folder: &Path, window: i64, retention: Retention) -> holdtrue::record::State {
    let mut keeper = open(folder, START);
    keeper.retain(retention);
    keeper.adopt(&setup(window)).unwrap();
    work(&mut keeper, START, 6 * DAY);
    keeper
        .finish(Timestamp((START + 6 * DAY) * 1_000_000_000))
        .unwrap();
    whole(keeper.engine(), &[])
}

fn files(folder: &Path) -> Vec<String> {
    let archive = Archive::open(folder).unwrap();
    archive.days().iter().map(ToString::to_string).collect()
}

#[test]
fn what_is_too_old_goes_and_the_record_says_so() {
    let folder = tempfile::tempdir().unwrap();
    let (all, few) = (folder.path().join("all"), folder.path().join("few"));
    let kept = run(&all, 24, Retention::default());
    let retention = Retention {
        age: Some(Duration::from_seconds(2 * DAY)),
        bytes: None,
    };
    assert!(
        run(&few, 24, retention) == kept,
        "the engine knows nothing of it"
    );
    let (all, left) = (files(&all), files(&few));
    assert!(left.len() < all.len(), "{left:?}");
    assert!(
        left.contains(&"2026-12-05.0001.sqlite".to_owned()),
        "{left:?}"
    );
    assert!(
        !left.contains(&"2026-12-02.0001.sqlite".to_owned()),
        "{left:?}"
    );
    let verdict = verify(&Archive::open(&few).unwrap(), None, || {}).unwrap();
    assert_eq!(verdict.faults, [], "a removal that was noted is no fault");
    assert_eq!(verdict.removed, all.len() - left.len());
    // No checksum is left behind alone.
    for entry in std::fs::read_dir(&few).unwrap() {
        let name = entry.unwrap().file_name().into_string().unwrap();
        assert!(!name.starts_with("2026-12-02"), "{name}");
    }
    // A file that is missing without a note is one.
    let gone = Archive::open(&few).unwrap();
    std::fs::remove_file(gone.path(gone.days()[0])).unwrap();
    let verdict = verify(&Archive::open(&few).unwrap(), None, || {}).unwrap();
    assert_eq!(verdict.faults.len(), 1, "{:?}", verdict.faults);
}

#[test]
fn size_wins_over_windows_and_says_so() {
    let folder = tempfile::tempdir().unwrap();
    let retention = Retention {
        age: None,
        bytes: Some(1),
    };
    run(folder.path(), 72, retention);
    let left = files(folder.path());
    // The file that is written to and the one before it always stay.
    assert!((2..=3).contains(&left.len()), "{left:?}");
    let archive = Archive::open(folder.path()).unwrap();
    let told = archive.days().iter().map(|name| {
        let connection = rusqlite::Connection::open(archive.path(*name)).unwrap();
        let count: i64 = connection
            .query_row(
                "SELECT count(*) FROM published WHERE payload LIKE '%record-file-removed%'
                 AND payload LIKE '%and 1 may be kept; windows of channels reach into it%'",
                [],
                |row| row.get(0),
            )
            .unwrap();
        count
    });
    assert!(told.sum::<i64>() > 0);
}
