//! Is the record whole and as it was written? Checksums of sealed files, the links within each
//! file, and from file to file.
//!
//! What can't be seen here: that the newest, open file was cut off at its end, or that the newest
//! files were taken away. For that the reader needs a link that was kept elsewhere.

use super::archive::Archive;
use super::batch::Place;
use super::chain::{Digest, Head};
use super::links::ByBatch;
use super::sealing;
use super::{Day, DayName, RecordError};
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeMap;
use std::path::PathBuf;

/// What a verification found.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Verdict {
    /// Files looked at.
    pub files: usize,
    /// Links that agree with what stands in the files.
    pub links: u64,
    /// Position of the last input.
    pub inputs: i64,
    /// The newest link.
    pub head: Head,
    /// Oldest file.
    pub from: Option<DayName>,
    /// Newest file.
    pub to: Option<DayName>,
    /// Files without a seal: the one that is written to, and those that the daemon has not come to
    /// yet.
    pub unsealed: Vec<DayName>,
    /// Files that were removed since they had become too old or the record too large.
    pub removed: usize,
    /// What is wrong, oldest first; of each file its seal, and the first thing in it.
    pub faults: Vec<Fault>,
}

/// Something that is wrong with a record.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum Fault {
    /// A sealed file is not what was sealed.
    #[error(
        "{}: its checksum is {found}, {told_by} says {told}; a byte of the file was changed after \
         it was sealed", file.display()
    )]
    Checksum {
        /// The file.
        file: PathBuf,
        /// Who tells the checksum.
        told_by: String,
        /// What it tells.
        told: String,
        /// What it is.
        found: Digest,
    },
    /// The first link in a file that does not agree.
    #[error(
        "{}: link {batch} is broken: inputs {first} to {last} (committed {committed}), or what \
         followed from them, are not what was recorded", file.display()
    )]
    Link {
        /// The file.
        file: PathBuf,
        /// Number of the batch.
        batch: i64,
        /// Position of its first input.
        first: i64,
        /// Position of its last input.
        last: i64,
        /// When it was committed.
        committed: String,
    },
    /// Links are missing within a file.
    #[error("{}: after link {after} comes link {found}; those between are missing", file.display())]
    LinksMissing {
        /// The file.
        file: PathBuf,
        /// The last that is there.
        after: i64,
        /// The next that is there.
        found: i64,
    },
    /// There are rows behind the last link.
    #[error(
        "{}: {table} has rows behind the last link ({last}); they were added afterwards, or links \
         were cut off", file.display()
    )]
    Beyond {
        /// The file.
        file: PathBuf,
        /// The table.
        table: &'static str,
        /// The last position that belongs to a link.
        last: i64,
    },
    /// The file before is not there, and nothing says that it was removed.
    #[error(
        "{} goes on from {missing}, which is not there, and the record does not say that it was \
         removed", file.display()
    )]
    FileMissing {
        /// The file.
        file: PathBuf,
        /// The file before.
        missing: String,
    },
    /// A file does not go on from the one before.
    #[error(
        "{} does not go on from {before}: its chain begins with another digest",
        file.display()
    )]
    ChainBroken {
        /// The file.
        file: PathBuf,
        /// The file before.
        before: String,
    },
    /// A file can't be read.
    #[error("{text}")]
    Unreadable {
        /// Which and why.
        text: String,
    },
    /// The record does not hold a link that was kept elsewhere.
    #[error("{text}")]
    HeadMissing {
        /// What it holds instead.
        text: String,
    },
}

/// What is known while going through the files.
struct Walk<'a> {
    archive: &'a Archive,
    /// Checksums as later files tell them, with the file that tells.
    noted: BTreeMap<String, (String, String)>,
    /// Files that were removed, as later files tell.
    removed: BTreeMap<String, String>,
    verdict: Verdict,
    /// The link that was kept elsewhere: its digest, and the digest that the record has at its
    /// batch.
    sought: Option<(Digest, bool)>,
}

/// Verifies a record. `kept`: a digest that was kept elsewhere and must be a link of it. `looked`
/// is called after each file.
///
/// # Errors
/// When the folder holds no record. What is wrong with a file is part of the verdict.
pub fn verify(
    archive: &Archive,
    kept: Option<Digest>,
    mut looked: impl FnMut(),
) -> Result<Verdict, RecordError> {
    if archive.days().is_empty() {
        return Err(RecordError::Empty {
            folder: archive.folder().to_path_buf(),
        });
    }
    let mut walk = Walk {
        archive,
        noted: BTreeMap::new(),
        removed: BTreeMap::new(),
        verdict: Verdict {
            from: archive.days().first().copied(),
            to: archive.days().last().copied(),
            ..Verdict::default()
        },
        sought: kept.map(|digest| (digest, false)),
    };
    walk.collect_notes();
    let mut before: Option<(DayName, Head)> = None;
    for name in archive.days() {
        walk.verdict.files += 1;
        let faults = walk.verdict.faults.len();
        match walk.file(*name, before) {
            Ok(head) => before = Some((*name, head)),
            Err(error) => {
                before = None;
                if walk.verdict.faults.len() == faults {
                    let text = error.to_string();
                    walk.verdict.faults.push(Fault::Unreadable { text });
                }
            }
        }
        looked();
    }
    walk.look_for_kept();
    Ok(walk.verdict)
}

impl Walk<'_> {
    /// What files say of others. A file that can't be read says nothing; it is told of later.
    fn collect_notes(&mut self) {
        for name in self.archive.days() {
            let Ok(day) = self.archive.day(*name) else {
                continue;
            };
            for (kind, body) in day.notes().unwrap_or_default() {
                if kind == "sealed" {
                    if let Some((digest, file)) = body.split_once("  ") {
                        let told = (digest.to_owned(), name.to_string());
                        self.noted.insert(file.to_owned(), told);
                    }
                } else if kind == "removed"
                    && let Some((file, why)) = body.split_once(": ")
                {
                    self.removed.insert(file.to_owned(), why.to_owned());
                }
            }
        }
        self.verdict.removed = self.removed.len();
    }

    /// Looks at one file; its last link.
    fn file(
        &mut self,
        name: DayName,
        before: Option<(DayName, Head)>,
    ) -> Result<Head, RecordError> {
        self.checksum(name)?;
        let faults = self.verdict.faults.len();
        let day = self.archive.day(name)?;
        self.beginning(&day, before);
        let place = self.links(&day)?;
        self.beyond(&day, &place)?;
        self.verdict.faults.truncate(faults + 1);
        self.verdict.inputs = place.last_input;
        self.verdict.head = place.head;
        Ok(place.head)
    }

    fn checksum(&mut self, name: DayName) -> Result<(), RecordError> {
        let path = self.archive.path(name);
        let beside = sealing::told_checksum(self.archive.folder(), name)?;
        let noted = self.noted.get(&name.to_string()).cloned();
        if beside.is_none() && noted.is_none() {
            self.verdict.unsealed.push(name);
            return Ok(());
        }
        let found = sealing::checksum(&path)?;
        let beside = beside.map(|text| {
            let told = text.split_whitespace().next().unwrap_or("nothing");
            (told.to_owned(), name.checksum())
        });
        for (told, told_by) in [beside, noted].into_iter().flatten() {
            if told != found.to_string() {
                self.verdict.faults.push(Fault::Checksum {
                    file: path,
                    told_by,
                    told,
                    found,
                });
                return Ok(());
            }
        }
        Ok(())
    }

    /// Whether a file goes on from the one before.
    fn beginning(&mut self, day: &Day, before: Option<(DayName, Head)>) {
        let file = day.path().to_path_buf();
        let preceding = day.opening().preceding;
        let Some(preceding) = preceding else {
            if let Some((name, _)) = before {
                let before = name.to_string();
                self.verdict
                    .faults
                    .push(Fault::ChainBroken { file, before });
            }
            return;
        };
        let is_there = self.archive.days().contains(&preceding);
        if !is_there {
            if !self.removed.contains_key(&preceding.to_string()) {
                let missing = preceding.to_string();
                self.verdict
                    .faults
                    .push(Fault::FileMissing { file, missing });
            }
            return;
        }
        // A file before that can't be read has been told of.
        if let Some((name, head)) = before
            && (name != preceding || head.digest != day.opening().chain)
        {
            let before = name.to_string();
            self.verdict
                .faults
                .push(Fault::ChainBroken { file, before });
        }
    }

    /// Checks the links of a file up to the first that is broken; the place after the last.
    fn links(&mut self, day: &Day) -> Result<Place, RecordError> {
        let mut before = day.opening().place_before();
        let by_batch = day.by_batch()?;
        let mut is_broken = false;
        day.links(|place, committed| {
            if let Some((digest, found)) = &mut self.sought {
                *found |= *digest == place.head.digest;
            }
            if !is_broken {
                match fault_of(day, &by_batch, &before, &place, committed)? {
                    None => self.verdict.links += 1,
                    Some(fault) => {
                        is_broken = true;
                        self.verdict.faults.push(fault);
                    }
                }
            }
            before = place;
            Ok(())
        })?;
        Ok(before)
    }

    /// Whether there are rows that belong to no link.
    fn beyond(&mut self, day: &Day, place: &Place) -> Result<(), RecordError> {
        for (table, last) in [
            ("raw_readings", place.last_input),
            ("inputs", place.last_input),
            ("outputs", place.last_output),
            ("documents", place.last_document),
            ("settled", place.head.batch),
            ("events", place.head.batch),
            ("states", place.head.batch),
            ("sources", place.head.batch),
        ] {
            if day.has_rows_beyond(table, last)? {
                let file = day.path().to_path_buf();
                self.verdict
                    .faults
                    .push(Fault::Beyond { file, table, last });
                return Ok(());
            }
        }
        Ok(())
    }

    /// Whether the link that was kept elsewhere was met.
    fn look_for_kept(&mut self) {
        let Some((digest, false)) = self.sought else {
            return;
        };
        let text = format!(
            "no link of this record is {digest}, which you kept: what came after the last link \
             (number {}, {}) was cut off, or the record was written anew",
            self.verdict.head.batch, self.verdict.head.digest
        );
        self.verdict.faults.push(Fault::HeadMissing { text });
    }
}

/// What is wrong with a link.
fn fault_of(
    day: &Day,
    by_batch: &ByBatch,
    before: &Place,
    place: &Place,
    committed: Timestamp,
) -> Result<Option<Fault>, RecordError> {
    let file = day.path().to_path_buf();
    let (after, found) = (before.head.batch, place.head.batch);
    if found != after + 1 {
        return Ok(Some(Fault::LinksMissing { file, after, found }));
    }
    let digest = day.stored_digest(by_batch, before, place, committed)?;
    Ok((digest != place.head.digest).then(|| Fault::Link {
        file,
        batch: found,
        first: before.last_input + 1,
        last: place.last_input,
        committed: crate::document::time_text(committed),
    }))
}
