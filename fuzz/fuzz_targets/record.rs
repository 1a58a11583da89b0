//! Any damage to a record: it opens, or says what is wrong; it never ends the program.
//!
//! The input is a list of damages, six bytes each: which file, where, and what is written there. An
//! odd number of bytes cuts the file of the first damage off instead.

#![no_main]

use holdtrue::configuration;
use holdtrue::keeper::Keeper;
use holdtrue::record::{Archive, RealDisk, RecordError, verify};
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::setup::ChannelId;
use holdtrue_engine::time::{Duration, Timestamp};
use libfuzzer_sys::fuzz_target;
use std::path::{Path, PathBuf};
use std::sync::OnceLock;

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
"#;

/// 2026-03-01T12:00:00Z.
const BEGIN: Timestamp = Timestamp(1_772_366_400_000_000_000);

fn folder() -> PathBuf {
    let memory = Path::new("/dev/shm");
    let place = if memory.is_dir() {
        memory.to_owned()
    } else {
        std::env::temp_dir()
    };
    place.join(format!("holdtrue-fuzz-{}", std::process::id()))
}

fn open(now: Timestamp) -> Option<Keeper> {
    Keeper::open_on(&folder(), Box::new(RealDisk), now).ok()
}

/// The files of a sound record: one sealed, one that was being written to.
fn sound() -> &'static [(PathBuf, Vec<u8>)] {
    static SOUND: OnceLock<Vec<(PathBuf, Vec<u8>)>> = OnceLock::new();
    SOUND.get_or_init(|| {
        let setup = match configuration::from_text(CONFIGURATION, "", Path::new(""), BEGIN) {
            Ok(read) => read.setup,
            Err(problems) => panic!("{problems}"),
        };
        let mut second = 0;
        let mut feed = |keeper: &mut Keeper| {
            for _ in 0..100 {
                second += 1;
                let now = BEGIN.plus(Duration::from_seconds(second));
                keeper.take(&Input::Reading(Reading {
                    source: Source::Indication(ChannelId(0)),
                    received: now,
                    phenomenon: now,
                    value: 1.0 + 1e-3 * (second % 7) as f64,
                    sequence: None,
                    excluded: false,
                }));
                if second % 10 == 0 {
                    keeper.commit(now).expect("the folder can be written");
                }
            }
        };
        let mut keeper = open(BEGIN).expect("an empty folder");
        keeper.adopt(&setup).expect("an empty record");
        feed(&mut keeper);
        keeper.finish(BEGIN).expect("the folder can be written");
        let mut keeper = open(BEGIN).expect("a sound record");
        feed(&mut keeper);
        // Read before the keeper ends, which would fold the log in.
        let mut files = Vec::new();
        for entry in std::fs::read_dir(folder()).expect("a folder") {
            let path = entry.expect("an entry").path();
            let name = path.to_string_lossy();
            if name.contains(".sqlite") && !name.ends_with("-shm") {
                files.push((path.clone(), std::fs::read(&path).expect("a file")));
            }
        }
        files.sort();
        files
    })
}

fuzz_target!(|damages: &[u8]| {
    let mut files = sound().to_vec();
    let cut = damages.len() % 2 == 1;
    for damage in damages.chunks_exact(6) {
        let place = usize::from(damage[0]) % files.len();
        let bytes = &mut files[place].1;
        let at = u32::from_le_bytes([damage[1], damage[2], damage[3], 0]) as usize;
        let at = at % bytes.len().max(1);
        if cut {
            bytes.truncate(at);
            break;
        }
        for (byte, written) in bytes[at..].iter_mut().zip(&damage[4..]) {
            *byte = *written;
        }
    }
    let folder = folder();
    let _ = std::fs::remove_dir_all(&folder);
    std::fs::create_dir_all(&folder).expect("a folder");
    for (path, bytes) in &files {
        std::fs::write(path, bytes).expect("the folder can be written");
    }
    let archive = Archive::open(&folder).expect("the folder is there");
    let _ = verify(&archive, None, || {});
    for name in archive.days() {
        let Ok(day) = archive.day(*name) else {
            continue;
        };
        let _ = day.saved_states();
        let after = day.opening().first_input.saturating_sub(1);
        let _ = day.walk::<RecordError>(&archive, after, i64::MAX, |_| Ok(()));
    }
    let _ = open(BEGIN);
});
