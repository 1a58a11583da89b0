//! A record whose bytes were damaged, anywhere and in any way, never ends the program: it opens, or
//! it says what is wrong with which file. A damaged state is not used; an older one is.
//!
//!     DAMAGES=100000 cargo test --test record damaged -- --nocapture
//!
//! tries more, `SEED` others; each failure names its own.

use holdtrue::configuration;
use holdtrue::keeper::Keeper;
use holdtrue::record::{Archive, RealDisk, verify};
use holdtrue::replay::{Range, audit};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::{ChannelId, Setup};
use holdtrue_engine::time::{Duration, Timestamp};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use std::path::Path;
use tempfile::TempDir;

/// 2026-03-01T12:00:00Z.
const BEGIN: Timestamp = Timestamp(1_772_366_400_000_000_000);
const READINGS: i64 = 100;
/// Seconds from reading to reading.
const STEP: i64 = 10;

const CONFIGURATION: &str = r#"
[node]
name = "n"
[broker]
url = "mqtt://127.0.0.1"
[[channel]]
name = "a"
unit = "m"
indication = { topic = "a" }
reference = { constant = 1.0 }
window = "16 pairs"
segments = 4
max_degree = 0
[[channel]]
name = "b"
unit = "m"
indication = { topic = "b" }
reference = { constant = 2.0 }
window = "16 pairs"
segments = 4
max_degree = 0
"#;

fn setup() -> Setup {
    configuration::from_text(CONFIGURATION, "", Path::new(""), BEGIN)
        .unwrap_or_else(|problems| panic!("{problems}"))
        .setup
}

fn instant(number: i64) -> Timestamp {
    BEGIN.plus(Duration::from_seconds(STEP * number))
}

fn open(folder: &Path) -> Result<Keeper, String> {
    Keeper::open_on(folder, Box::new(RealDisk), instant(5 * READINGS))
        .map_err(|error| error.to_string())
}

/// Takes readings of both channels, and commits now and then.
fn feed(keeper: &mut Keeper, from: i64) {
    for number in from..from + READINGS {
        for channel in 0..2 {
            let turn = f64::from(i32::try_from(number).unwrap());
            keeper.take(&Input::Reading(Reading {
                source: Source::Indication(ChannelId(channel)),
                received: instant(number),
                phenomenon: instant(number),
                value: 1.1 + f64::from(channel) + 0.01 * (7.0 * turn).sin(),
                sequence: Some(number),
                excluded: false,
            }));
        }
        if number % 20 == 19 {
            keeper.commit(instant(number)).unwrap();
        }
    }
}

/// A record as it lies on the disk, and what it leads to.
struct Sound {
    files: Vec<(String, Vec<u8>)>,
    engine: Engine,
    inputs: i64,
}

/// One sealed file, and one that was being written to when the daemon was killed; the engine's
/// state is saved in it twice.
fn sound() -> Sound {
    let folder = tempfile::tempdir().unwrap();
    let begin = |now| Keeper::<()>::open_on(folder.path(), Box::new(RealDisk), now).unwrap();
    let mut keeper = begin(BEGIN);
    keeper.adopt(&setup()).unwrap();
    feed(&mut keeper, 0);
    keeper.finish(instant(READINGS)).unwrap();
    drop(keeper);
    let mut keeper = begin(instant(READINGS));
    feed(&mut keeper, READINGS);
    // What came so far is in the file, what follows in its log.
    let archive = Archive::open(folder.path()).unwrap();
    let newest = archive.path(*archive.days().last().unwrap());
    rusqlite::Connection::open(newest)
        .unwrap()
        .query_row("PRAGMA wal_checkpoint(TRUNCATE)", [], |_| Ok(()))
        .unwrap();
    // The state is saved every ten minutes.
    feed(&mut keeper, 2 * READINGS);
    let archive = Archive::open(folder.path()).unwrap();
    let newest = archive.day(*archive.days().last().unwrap()).unwrap();
    assert_eq!(archive.days().len(), 2);
    assert_eq!(newest.saved_states().unwrap().len(), 2);
    let mut files = Vec::new();
    for entry in std::fs::read_dir(folder.path()).unwrap() {
        let path = entry.unwrap().path();
        let name = path.file_name().unwrap().to_str().unwrap().to_owned();
        // The lock is the living daemon's, and SQLite makes the index of its log itself.
        if name.contains(".sqlite") && !name.ends_with("-shm") {
            files.push((name, std::fs::read(path).unwrap()));
        }
    }
    files.sort();
    assert_eq!(files.len(), 4, "two files, a checksum and a log");
    Sound {
        files,
        engine: keeper.engine().clone(),
        inputs: keeper.inputs(),
    }
}

impl Sound {
    /// Lays it out in memory where the system has a file system there.
    fn lay_out(&self, changed: Option<(usize, &[u8])>) -> TempDir {
        let memory = Path::new("/dev/shm");
        let folder = if memory.is_dir() {
            tempfile::tempdir_in(memory).unwrap()
        } else {
            tempfile::tempdir().unwrap()
        };
        for (place, (name, bytes)) in self.files.iter().enumerate() {
            let bytes = match changed {
                Some((at, changed)) if at == place => changed,
                _ => bytes,
            };
            std::fs::write(folder.path().join(name), bytes).unwrap();
        }
        folder
    }
}

/// Damages bytes in one of the ways in which disks and people do it; says how.
fn damage(bytes: &mut Vec<u8>, random: &mut ChaCha8Rng) -> String {
    let mut below =
        |limit: usize| usize::try_from(random.next_u64() % limit.max(1) as u64).unwrap();
    let at = below(bytes.len());
    let kind = below(6);
    match kind {
        0 | 1 => {
            bytes[at] ^= 1 << below(8);
            format!("a bit of byte {at} flipped")
        }
        2 => {
            let end = (at + 1 + below(64)).min(bytes.len());
            for byte in &mut bytes[at..end] {
                *byte = u8::try_from(below(256)).unwrap();
            }
            format!("bytes {at} to {end} overwritten")
        }
        3 => {
            bytes.truncate(at);
            format!("cut off at {at}")
        }
        4 => {
            let end = (at + 512).min(bytes.len());
            bytes[at..end].fill(0);
            format!("bytes {at} to {end} zeroed")
        }
        _ => {
            let (from, to) = (at / 4096 * 4096, below(bytes.len()) / 4096 * 4096);
            let length = 4096.min(bytes.len() - from).min(bytes.len() - to);
            let page = bytes[from..from + length].to_vec();
            bytes[to..to + length].copy_from_slice(&page);
            format!("{length} bytes at {from} written to {to}")
        }
    }
}

/// What reading a folder in every way there is came to.
struct Outcome {
    /// Everything that was said to be wrong.
    said: Vec<String>,
    faults: usize,
    opened: Option<Keeper>,
}

fn read_in_every_way(folder: &Path) -> Outcome {
    let archive = Archive::open(folder).unwrap();
    let mut said = Vec::new();
    let faults = match verify(&archive, None, || {}) {
        Ok(verdict) => {
            said.extend(verdict.faults.iter().map(ToString::to_string));
            verdict.faults.len()
        }
        Err(error) => {
            said.push(error.to_string());
            1
        }
    };
    let audited = audit(&archive, Range::default(), &mut |_| {});
    said.extend(audited.err().map(|error| error.to_string()));
    let opened = open(folder);
    said.extend(opened.as_ref().err().cloned());
    Outcome {
        said,
        faults,
        opened: opened.ok(),
    }
}

#[test]
fn a_damaged_record_opens_or_says_what_is_wrong_and_never_ends_the_program() {
    let number = |name: &str, usual| {
        std::env::var(name).map_or(usual, |text| text.parse().expect("a number"))
    };
    let (damages, seed) = (number("DAMAGES", 300), number("SEED", 1));
    let sound = sound();
    let (mut opened, mut unnoticed) = (0, 0);
    for count in 0..damages {
        let mut random = ChaCha8Rng::seed_from_u64(seed + count);
        let place = usize::try_from(random.next_u64()).unwrap() % sound.files.len();
        let (name, mut bytes) = sound.files[place].clone();
        let how = damage(&mut bytes, &mut random);
        let what = format!("SEED={} DAMAGES=1: {name}: {how}", seed + count);
        let folder = sound.lay_out(Some((place, &bytes)));
        let read = || read_in_every_way(folder.path());
        let outcome = std::panic::catch_unwind(read).unwrap_or_else(|_| panic!("{what}"));
        for said in &outcome.said {
            let is_named =
                said.contains(folder.path().to_str().unwrap()) || said.contains("input ");
            assert!(is_named, "{what}: {said:?} does not say where");
        }
        let Some(keeper) = outcome.opened else {
            continue;
        };
        opened += 1;
        // What the links vouch for leads where it led. (A log that was cut off shows only against a
        // link that was kept elsewhere.)
        if outcome.faults == 0 {
            unnoticed += 1;
            assert!(keeper.inputs() <= sound.inputs, "{what}");
            let is_same = *keeper.engine() == sound.engine;
            assert!(is_same || keeper.inputs() < sound.inputs, "{what}");
        }
    }
    eprintln!("{damages} damages: {opened} opened all the same, {unnoticed} without a fault");
    assert!(0 < opened && opened < damages, "the damages do not differ");
}

/// Spoils the bytes of every state saved by batches from `from` on, in every file; how many.
fn spoil_states(folder: &Path, from: i64) -> usize {
    let archive = Archive::open(folder).unwrap();
    let mut spoilt = 0;
    for day in archive.days() {
        let file = rusqlite::Connection::open(archive.path(*day)).unwrap();
        spoilt += file
            .execute(
                "UPDATE states SET bytes = zeroblob(length(bytes)) WHERE batch >= ?1",
                [from],
            )
            .unwrap();
    }
    spoilt
}

#[test]
fn in_place_of_a_damaged_state_an_older_one_is_used_and_leads_to_the_same() {
    let sound = sound();
    let folder = sound.lay_out(None);
    let mut saved = Vec::new();
    let archive = Archive::open(folder.path()).unwrap();
    for day in archive.days() {
        let states = archive.day(*day).unwrap().saved_states().unwrap();
        saved.extend(states.into_iter().map(|(batch, _)| batch));
    }
    saved.sort_unstable();
    assert!(saved.len() >= 3, "{saved:?}");
    let keeper = open(folder.path()).unwrap();
    assert_eq!(keeper.inputs(), sound.inputs);
    assert!(*keeper.engine() == sound.engine, "undamaged");
    drop(keeper);
    // The newest, then also the one before it, then all: from the readings alone.
    for batch in saved.into_iter().rev() {
        let folder = sound.lay_out(None);
        assert!(spoil_states(folder.path(), batch) > 0);
        let keeper = open(folder.path()).unwrap();
        assert!(
            *keeper.engine() == sound.engine,
            "spoilt from batch {batch} on"
        );
    }
}
