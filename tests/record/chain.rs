//! Whatever is changed in a record afterwards, `verify` finds it and names where.

use super::support::{document, live, notice, open, reading, turn};
use holdtrue::record::{Archive, Digest, Fault, RealDisk, Record, Settled, Verdict, verify};
use holdtrue_engine::event::Input;
use holdtrue_engine::time::Timestamp;
use std::path::{Path, PathBuf};

/// A record of three files with a few batches each; the newest is open.
fn made(folder: &Path) -> Record {
    let mut record = open(folder);
    for file in 1..=3_i64 {
        if file > 1 {
            turn(&mut record, Timestamp(file));
        }
        for time in 1..=4 {
            let time = 100 * file + time;
            record.batch().add(&reading(time, 0.5), &[], &[notice("a")]);
            let now = Timestamp(time);
            record.batch().add(&Input::Tick { now }, &[], &[]);
            let number = record
                .batch()
                .add_document(document("topic", "payload", true));
            record.batch().settle(number, Settled::Taken);
            record.commit(now).unwrap();
        }
    }
    record
}

/// The same, cleanly ended: all files are sealed.
fn sealed(folder: &Path) {
    made(folder).finish(Timestamp(999)).unwrap();
}

fn check(folder: &Path) -> Verdict {
    verify(&Archive::open(folder).unwrap(), None, || {}).unwrap()
}

fn files(folder: &Path) -> Vec<PathBuf> {
    let archive = Archive::open(folder).unwrap();
    archive
        .days()
        .iter()
        .map(|day| archive.path(*day))
        .collect()
}

/// Changes a file behind the back of its seal: as somebody would who has the right to write.
fn alter(file: &Path, change: &str) {
    let connection = rusqlite::Connection::open(file).unwrap();
    assert!(connection.execute(change, []).unwrap() > 0, "{change}");
    drop(connection);
}

/// Takes the seals away, so that only the links speak.
fn unseal(folder: &Path) {
    for file in files(folder) {
        let mut name = file.into_os_string();
        name.push(".sha256");
        std::fs::remove_file(name).unwrap();
    }
}

#[test]
fn an_untouched_record_is_whole_open_or_sealed() {
    let folder = tempfile::tempdir().unwrap();
    let record = made(folder.path());
    let verdict = check(folder.path());
    assert_eq!(verdict.faults, []);
    let open: Vec<String> = verdict.unsealed.iter().map(ToString::to_string).collect();
    assert_eq!(open, ["1970-01-01.0003.sqlite"]);
    assert_eq!(
        (verdict.files, verdict.inputs, verdict.head),
        (3, record.last_input(), record.head())
    );
    drop(record);

    let folder = tempfile::tempdir().unwrap();
    sealed(folder.path());
    let verdict = check(folder.path());
    assert_eq!(verdict.faults, []);
    assert_eq!(verdict.unsealed, []);
    let text = std::fs::read_to_string(folder.path().join("1970-01-01.0001.sqlite.sha256"));
    assert!(
        text.unwrap().ends_with("  1970-01-01.0001.sqlite\n"),
        "as sha256sum --check reads it"
    );
}

/// Its checksum was told to the world.
#[test]
fn a_sealed_file_keeps_its_bytes_when_the_next_one_notes_its_seal() {
    let folder = tempfile::tempdir().unwrap();
    sealed(folder.path());
    let newest = files(folder.path()).pop().unwrap();
    let before = std::fs::read(&newest).unwrap();
    let mut record = Record::open_on(folder.path(), Box::new(RealDisk)).unwrap();
    turn(&mut record, Timestamp(1000));
    record.note_start();
    record.commit(Timestamp(1001)).unwrap();
    let notes = live(folder.path()).query_row(
        "SELECT count(*) FROM events WHERE kind = 'sealed'",
        [],
        |row| row.get::<_, i64>(0),
    );
    assert_eq!(notes.unwrap(), 1);
    assert!(std::fs::read(&newest).unwrap() == before);
}

#[test]
fn a_newest_file_whose_making_was_broken_off_is_no_fault() {
    let folder = tempfile::tempdir().unwrap();
    sealed(folder.path());
    let whole = check(folder.path());
    std::fs::write(folder.path().join("1970-01-02.0001.sqlite"), b"").unwrap();
    assert_eq!(check(folder.path()), whole);
    assert!(whole.faults.is_empty());
}

/// Check value V50: alter one byte of record i, and verification fails at i and names i.
#[test]
fn a_changed_row_breaks_its_own_link_and_no_earlier_one() {
    let changes = [
        ("UPDATE raw_readings SET value = 0.6 WHERE position = 11", 8),
        (
            "UPDATE raw_readings SET received = 1 WHERE position = 13",
            9,
        ),
        ("UPDATE inputs SET body = '{}' WHERE position = 12", 8),
        ("DELETE FROM outputs WHERE input = 13", 9),
        ("UPDATE outputs SET subject = 1 WHERE input = 15", 10),
        ("UPDATE documents SET payload = x'00' WHERE number = 5", 7),
        ("UPDATE settled SET how = 'refused' WHERE number = 6", 8),
        (
            "UPDATE batches SET committed = committed + 1 WHERE number = 9",
            9,
        ),
        ("UPDATE sources SET name = 'other'", 6),
        (
            "UPDATE day SET setup = replace(setup, 'Live', 'Readings')",
            6,
        ),
    ];
    for (change, link) in changes {
        let folder = tempfile::tempdir().unwrap();
        sealed(folder.path());
        unseal(folder.path());
        let second = &files(folder.path())[1];
        alter(second, change);
        let verdict = check(folder.path());
        let broken = verdict.faults.iter().find_map(|fault| match fault {
            Fault::Link { file, batch, .. } if file == second => Some(*batch),
            _ => None,
        });
        assert_eq!(broken, Some(link), "{change}: {:?}", verdict.faults);
    }
}

#[test]
fn a_seal_sees_what_no_link_covers() {
    let folder = tempfile::tempdir().unwrap();
    sealed(folder.path());
    let second = &files(folder.path())[1];
    let connection = rusqlite::Connection::open(second).unwrap();
    connection
        .execute_batch("CREATE TABLE harmless (a TEXT)")
        .unwrap();
    drop(connection);
    let verdict = check(folder.path());
    assert!(
        matches!(&verdict.faults[..], [Fault::Checksum { file, .. }] if file == second),
        "{:?}",
        verdict.faults
    );
    // Whoever writes a new checksum beside it is told of by the file that follows.
    let changed = std::fs::read(second).unwrap();
    let mut beside = second.clone().into_os_string();
    beside.push(".sha256");
    let text = format!("{}  1970-01-01.0002.sqlite\n", Digest::of(&changed));
    std::fs::write(beside, text).unwrap();
    let verdict = check(folder.path());
    let told_by = verdict.faults.iter().find_map(|fault| match fault {
        Fault::Checksum { told_by, .. } => Some(told_by.clone()),
        _ => None,
    });
    assert_eq!(told_by.as_deref(), Some("1970-01-01.0003.sqlite"));
}

#[test]
fn rows_that_were_added_and_links_that_were_taken_out_are_found() {
    for (change, expected) in [
        (
            "INSERT INTO raw_readings VALUES (99, 1, 0, 0, 0.0, NULL, NULL)",
            "rows behind the last link",
        ),
        (
            "DELETE FROM batches WHERE number = 8",
            "after link 7 comes link 9",
        ),
        (
            "DELETE FROM batches WHERE number = 10",
            "rows behind the last link",
        ),
    ] {
        let folder = tempfile::tempdir().unwrap();
        sealed(folder.path());
        unseal(folder.path());
        alter(&files(folder.path())[1], change);
        let verdict = check(folder.path());
        let text = verdict.faults.iter().map(ToString::to_string);
        assert!(
            text.clone().any(|text| text.contains(expected)),
            "{change}: {:?}",
            text.collect::<Vec<_>>()
        );
    }
}

#[test]
fn a_file_that_is_missing_is_named() {
    let folder = tempfile::tempdir().unwrap();
    sealed(folder.path());
    let second = files(folder.path())[1].clone();
    std::fs::remove_file(&second).unwrap();
    let verdict = check(folder.path());
    let [Fault::FileMissing { missing, .. }] = &verdict.faults[..] else {
        panic!("{:?}", verdict.faults)
    };
    assert_eq!(missing, "1970-01-01.0002.sqlite");
    // The oldest as well: nothing says that it was removed for its age.
    std::fs::remove_file(&files(folder.path())[0]).unwrap();
    assert_eq!(check(folder.path()).faults.len(), 1);
}

#[test]
fn a_tail_that_was_cut_off_shows_against_a_link_that_was_kept_elsewhere() {
    let folder = tempfile::tempdir().unwrap();
    let mut record = made(folder.path());
    let kept = record.head().digest;
    record.batch().add(&reading(999, 0.5), &[], &[]);
    record.commit(Timestamp(999)).unwrap();
    let newest = record.head().digest;
    drop(record);
    let with = |kept| {
        let archive = Archive::open(folder.path()).unwrap();
        verify(&archive, Some(kept), || {}).unwrap().faults
    };
    assert_eq!(with(kept), [], "an older link is in the chain");
    assert_eq!(with(newest), []);
    // As if the last second had never been.
    let file = live(folder.path());
    file.execute_batch(
        "DELETE FROM raw_readings WHERE position = 25;
         DELETE FROM batches WHERE number = (SELECT max(number) FROM batches)",
    )
    .unwrap();
    assert_eq!(check(folder.path()).faults, [], "by itself it looks whole");
    let faults = with(newest);
    assert!(
        matches!(&faults[..], [Fault::HeadMissing { .. }]),
        "{faults:?}"
    );
    assert_eq!(with(kept), []);
}

/// Random bytes anywhere in a sealed file: every flipped bit is found.
#[test]
fn every_flipped_bit_of_a_sealed_file_is_found() {
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::{Rng, SeedableRng};
    let folder = tempfile::tempdir().unwrap();
    sealed(folder.path());
    let second = files(folder.path())[1].clone();
    let sound = std::fs::read(&second).unwrap();
    let mut random = ChaCha8Rng::seed_from_u64(50);
    for _ in 0..200 {
        let mut bytes = sound.clone();
        let at = usize::try_from(random.next_u64() % bytes.len() as u64).unwrap();
        bytes[at] ^= 1 << (random.next_u32() % 8);
        std::fs::write(&second, bytes).unwrap();
        assert!(!check(folder.path()).faults.is_empty(), "byte {at}");
    }
    std::fs::write(&second, sound).unwrap();
    assert_eq!(check(folder.path()).faults, []);
}
