//! Old files are removed when they are older than is wanted, or when the record is larger than it
//! may be; whole files only, the oldest first, and never without a note in the record.

use super::batch::Event;
use super::disk::Operation;
use super::turning::remove_files;
use super::writing::Record;
use super::{DayName, RecordError, sealing};
use holdtrue_engine::time::{Duration, Timestamp};

/// How much is kept.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Retention {
    /// Files whose day ended longer ago than this may go; `None`: none for their age.
    pub age: Option<Duration>,
    /// Largest size of the record, bytes; `None`: any.
    pub bytes: Option<u64>,
}

/// A file that is to be removed.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Removal {
    /// Which.
    pub name: DayName,
    /// Why, for people.
    pub why: String,
    /// A window still reaches into it: a refit can't go back as far as it should.
    pub within_window: bool,
}

impl Record {
    /// The files that are to be removed now. What is younger than `needed_from` is not removed for
    /// its age, but for size if it must be. The file that is written to and the one before it
    /// always stay.
    ///
    /// # Errors
    /// When the folder can't be read.
    pub fn removals(
        &self,
        retention: Retention,
        now: Timestamp,
        needed_from: Timestamp,
    ) -> Result<Vec<Removal>, RecordError> {
        if retention == Retention::default() {
            return Ok(Vec::new());
        }
        let mut sizes = Vec::with_capacity(self.days.len());
        for name in &self.days {
            sizes.push((*name, size(&self.path(*name))));
        }
        let mut total: u64 = sizes.iter().map(|(_, size)| size).sum();
        let mut removals = Vec::new();
        for (name, size) in sizes.iter().take(self.days.len().saturating_sub(2)) {
            if sealing::told_checksum(&self.folder, *name)?.is_none() {
                break;
            }
            let is_needed = name.day_end() > needed_from;
            let is_old = retention
                .age
                .is_some_and(|age| name.day_end() < now.minus(age));
            let why = if is_old && !is_needed {
                "older than is kept".to_owned()
            } else if let Some(most) = retention.bytes.filter(|most| total > *most) {
                format!("the record had {total} bytes, and {most} may be kept")
            } else {
                break;
            };
            total -= size;
            removals.push(Removal {
                name: *name,
                why,
                within_window: is_needed,
            });
        }
        Ok(removals)
    }

    /// Notes a removal; the file goes once the note is on the disk.
    pub fn remove(&mut self, removal: &Removal) {
        let why = removal.why.clone();
        self.batch
            .note(Event::Removed(removal.name.to_string(), why));
        self.removing.push(removal.name);
    }

    /// Removes what was noted to be removed. What can't be removed now is noted again later.
    pub(super) fn remove_noted(&mut self) {
        for name in std::mem::take(&mut self.removing) {
            let path = self.path(name);
            if let Err(error) = self.before(Operation::Remove, &path) {
                tracing::warn!(%error, "an old file can't be removed now");
                return;
            }
            remove_files(&path);
            // Best effort, as for the file itself: a checksum without a file is no harm.
            let _ = std::fs::remove_file(self.folder.join(name.checksum()));
            self.days.retain(|day| *day != name);
            if self.after(Operation::Remove, &path).is_err() {
                return;
            }
        }
    }
}

fn size(path: &std::path::Path) -> u64 {
    std::fs::metadata(path).map_or(0, |it| it.len())
}
