//! What a folder holds at an instant, and what a power cut in the middle of an operation leaves of
//! it.
//!
//! The rules of the game are those that SQLite asks of a disk ("Atomic Commit In SQLite",
//! sqlite.org): what was synchronised stays; of what was written since, any part may be there, may
//! be missing or may be rubbish, but bytes outside what was written stay as they were. An operation
//! of several synchronised stages can stop in each.

use crate::chance::Chance;
use holdtrue::record::Operation;
use std::collections::BTreeMap;
use std::path::Path;

/// A disk writes sectors: parts of one write may last and others not.
const SECTOR: usize = 512;

/// The files of a folder by name, without those that do not outlive a process.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub(crate) struct Image(BTreeMap<String, Vec<u8>>);

impl Image {
    /// What is in `folder` now; nothing if it does not exist.
    pub(crate) fn of(folder: &Path) -> Self {
        let mut files = BTreeMap::new();
        for entry in std::fs::read_dir(folder).into_iter().flatten() {
            let path = entry.expect("the folder can be listed").path();
            let name = path.file_name().and_then(|name| name.to_str());
            let name = name.expect("names are text").to_owned();
            // The index of the write-ahead log is memory shared by processes, not a file of its
            // own.
            if !name.ends_with("-shm") && name != "holdtrue.lock" {
                files.insert(name, std::fs::read(&path).expect("the file can be read"));
            }
        }
        Self(files)
    }

    /// Makes a folder like this.
    pub(crate) fn write(&self, folder: &Path) {
        std::fs::create_dir_all(folder).expect("there is room for another folder");
        for (name, bytes) in &self.0 {
            std::fs::write(folder.join(name), bytes).expect("there is room for another file");
        }
    }

    fn get(&self, name: &str) -> &[u8] {
        self.0.get(name).map_or(&[], Vec::as_slice)
    }

    fn set(&mut self, name: &str, bytes: Vec<u8>) {
        self.0.insert(name.to_owned(), bytes);
    }

    fn copy(&mut self, name: &str, from: &Self) {
        match from.0.get(name) {
            Some(bytes) => self.set(name, bytes.clone()),
            None => {
                self.0.remove(name);
            }
        }
    }
}

/// What is left when the power fails in the middle of `operation` on the file at `path`; `before`
/// and `after` show the folder around it. `scratch` is a folder that does not exist.
pub(crate) fn torn(
    operation: Operation,
    path: &Path,
    before: &Image,
    after: &Image,
    scratch: &Path,
    chance: &mut Chance,
) -> Image {
    let name = path.file_name().and_then(|name| name.to_str());
    let name = name.expect("names are text");
    match operation {
        Operation::Commit => torn_commit(name, before, after, chance),
        Operation::Open => torn_open(name, before, after, chance),
        Operation::Rest => torn_rest(name, before, after, scratch, chance),
        Operation::Checksum => torn_checksum(before, after, chance),
        Operation::Remove => chance.pick(&[before, after]).clone(),
    }
}

/// The log grows and is synchronised; it may then be folded into the file.
fn torn_commit(name: &str, before: &Image, after: &Image, chance: &mut Chance) -> Image {
    let log = format!("{name}-wal");
    let mut left = after.clone();
    if before.get(name) != after.get(name) && chance.one_in(2) {
        left.set(name, mixed(before.get(name), after.get(name), chance));
    } else {
        left.copy(name, before);
        left.set(&log, mixed(before.get(&log), after.get(&log), chance));
    }
    left
}

/// The new file gets its first page, then its contents by way of the log; then the file before is
/// closed, and its log folded into it.
fn torn_open(name: &str, before: &Image, after: &Image, chance: &mut Chance) -> Image {
    let log = format!("{name}-wal");
    let mut left = before.clone();
    match chance.below(5) {
        0 => {
            left.set(name, Vec::new());
            let length = chance.below(SECTOR);
            left.set(&format!("{name}-journal"), vec![0; length]);
        }
        1 => left.copy(name, after),
        2 | 3 => {
            left.copy(name, after);
            left.set(&log, mixed(&[], after.get(&log), chance));
        }
        _ => {
            left.copy(name, after);
            left.copy(&log, after);
            let older: Vec<&String> = before.0.keys().collect();
            for file in older {
                if before.get(file) != after.get(file) && !file.ends_with("-wal") {
                    left.set(file, mixed(before.get(file), after.get(file), chance));
                }
            }
        }
    }
    left
}

/// Indexes are made by way of the log, the log is folded into the file and removed, and the file's
/// header says at last that it has none. The stages between are made anew on a copy.
fn torn_rest(
    name: &str,
    before: &Image,
    after: &Image,
    scratch: &Path,
    chance: &mut Chance,
) -> Image {
    let log = format!("{name}-wal");
    let (indexed, folded) = stages_of_rest(name, before, after, scratch);
    let mut left = before.clone();
    match chance.below(3) {
        0 => {
            left.copy(name, &indexed);
            left.set(&log, mixed(before.get(&log), indexed.get(&log), chance));
        }
        1 => {
            left.copy(&log, &indexed);
            let mixed = mixed(indexed.get(name), folded.get(name), chance);
            left.set(name, mixed);
        }
        _ => {
            left.copy(name, &folded);
            left.0.remove(&log);
        }
    }
    left
}

/// The file with its indexes in the log, and with the log folded in.
fn stages_of_rest(name: &str, before: &Image, after: &Image, scratch: &Path) -> (Image, Image) {
    let indexes = |folder: &str, image: &Image| -> BTreeMap<String, String> {
        let folder = scratch.join(folder);
        image.write(&folder);
        let file = rusqlite::Connection::open(folder.join(name)).expect("the file opens");
        let mut statement = file
            .prepare("SELECT name, sql FROM sqlite_schema WHERE type = 'index' AND sql NOT NULL")
            .expect("it is a database");
        let rows = statement.query_map([], |row| Ok((row.get(0)?, row.get(1)?)));
        let rows = rows.expect("it can be read").collect::<Result<_, _>>();
        rows.expect("it can be read")
    };
    let made = indexes("after", after);
    let there = indexes("before", before);
    let folder = scratch.join("between");
    before.write(&folder);
    let file = rusqlite::Connection::open(folder.join(name)).expect("the file opens");
    file.pragma_update(None, "journal_mode", "WAL")
        .expect("nobody else uses it");
    for (_, sql) in made.iter().filter(|(index, _)| !there.contains_key(*index)) {
        file.execute_batch(sql).expect("the index can be made");
    }
    let indexed = Image::of(&folder);
    file.query_row("PRAGMA wal_checkpoint(PASSIVE)", [], |_| Ok(()))
        .expect("the log can be folded in");
    let folded = Image::of(&folder);
    drop(file);
    std::fs::remove_dir_all(scratch).expect("the scratch folder is ours");
    (indexed, folded)
}

/// A draft is written and synchronised, and then takes the name.
fn torn_checksum(before: &Image, after: &Image, chance: &mut Chance) -> Image {
    let mut left = before.clone();
    let new = after
        .0
        .iter()
        .find(|(name, bytes)| name.ends_with(".sha256") && before.get(name) != bytes.as_slice());
    if let Some((name, bytes)) = new {
        let draft = name.replace(".sha256", ".draft");
        left.set(&draft, bytes[..chance.below(bytes.len() + 1)].to_vec());
    }
    left
}

/// Part of what was written: up to any length, and of each sector the old, the new or rubbish.
fn mixed(old: &[u8], new: &[u8], chance: &mut Chance) -> Vec<u8> {
    // Often the disk is in order and only ends early, or is whole.
    let rubbish_in = chance.pick(&[0, 0, 3, 20]);
    let mut left = Vec::with_capacity(new.len());
    for (number, sector) in new.chunks(SECTOR).enumerate() {
        let start = number * SECTOR;
        let kind = if rubbish_in > 0 && chance.one_in(rubbish_in) {
            1 + chance.below(2)
        } else {
            0
        };
        for (place, byte) in sector.iter().enumerate() {
            let was = old.get(start + place).copied();
            left.push(match kind {
                _ if was == Some(*byte) => *byte,
                0 => *byte,
                1 => was.unwrap_or(0),
                _ => chance.byte(),
            });
        }
    }
    if new.len() > old.len() && !chance.one_in(3) {
        let shorter = chance.below(new.len() - old.len() + 1);
        left.truncate(old.len() + shorter);
    } else if new.len() < old.len() && chance.one_in(2) {
        left.extend_from_slice(&old[new.len()..]);
    }
    left
}
