//! Finished files are sealed beside the writing, and that is noted in the record.

use super::batch::Event;
use super::disk::RealDisk;
use super::writing::Record;
use super::{Day, DayName, Digest, RecordError, sealing};
use holdtrue_engine::time::Timestamp;
use std::collections::VecDeque;
use std::thread::JoinHandle;

/// A file that is larger than this is not sealed at a clean stop, which would take long; the next
/// start goes on in it.
const SEAL_AT_STOP_MAX: u64 = 1 << 30;

/// Sealing goes on beside the writing: a large file takes its time.
#[derive(Default)]
pub(super) struct Sealer {
    pub(super) due: VecDeque<DayName>,
    /// At work on this file.
    worker: Option<(DayName, JoinHandle<Result<Digest, RecordError>>)>,
}

impl Record {
    /// Files before the newest whose sealing was broken off, or is not noted in it.
    pub(super) fn find_unsealed(&mut self, newest: &Day) -> Result<(), RecordError> {
        for name in self.days.iter().copied().filter(|it| *it < newest.name()) {
            let is_preceding = newest.opening().preceding == Some(name);
            let due = match sealing::told_checksum(&self.folder, name)? {
                None => true,
                Some(_) => is_preceding && !is_noted(newest, name)?,
            };
            if due {
                self.sealer.due.push_back(name);
            }
        }
        Ok(())
    }

    /// Notes seals that are finished, and begins the next.
    pub(super) fn look_after_seals(&mut self) -> Result<(), RecordError> {
        if self.disk.is_some() {
            return self.seal_all();
        }
        if let Some((_, worker)) = &self.sealer.worker
            && !worker.is_finished()
        {
            return Ok(());
        }
        self.join_sealer();
        if let Some(name) = self.sealer.due.front().copied() {
            let folder = self.folder.clone();
            let worker = std::thread::Builder::new()
                .name("seal".to_owned())
                .spawn(move || sealing::seal(&folder, name, &mut RealDisk));
            if let Ok(worker) = worker {
                self.sealer.due.pop_front();
                self.sealer.worker = Some((name, worker));
            }
        }
        Ok(())
    }

    /// Waits for the worker, if there is one.
    fn join_sealer(&mut self) {
        let Some((name, worker)) = self.sealer.worker.take() else {
            return;
        };
        match worker.join() {
            Ok(Ok(digest)) => self.batch.note(Event::Sealed(name.to_string(), digest)),
            Ok(Err(error)) => {
                tracing::warn!(%error, file = %name, "a finished file can't be sealed now");
                self.sealer.due.push_back(name);
            }
            Err(panic) => std::panic::resume_unwind(panic),
        }
    }

    /// Seals every finished file now.
    fn seal_all(&mut self) -> Result<(), RecordError> {
        self.join_sealer();
        while let Some(name) = self.sealer.due.front().copied() {
            let digest = self.seal(name)?;
            self.sealer.due.pop_front();
            self.batch.note(Event::Sealed(name.to_string(), digest));
        }
        Ok(())
    }

    /// Ends the writing: commits, and seals the newest file as well unless it is very large.
    ///
    /// # Errors
    /// When the disk refuses; what was committed is there all the same.
    pub fn finish(&mut self, now: Timestamp) -> Result<(), RecordError> {
        self.seal_all()?;
        self.commit(now)?;
        let Some(live) = self.live.take() else {
            return Ok(());
        };
        let size = std::fs::metadata(&live.path).map_or(0, |it| it.len());
        drop(live.connection);
        if size > SEAL_AT_STOP_MAX {
            return Ok(());
        }
        self.seal(live.name)?;
        Ok(())
    }

    fn seal(&mut self, name: DayName) -> Result<Digest, RecordError> {
        match &mut self.disk {
            Some(disk) => sealing::seal(&self.folder, name, disk.as_mut()),
            None => sealing::seal(&self.folder, name, &mut RealDisk),
        }
    }
}

/// Whether a file's checksum is noted in this one.
fn is_noted(day: &Day, sealed: DayName) -> Result<bool, RecordError> {
    day.connection
        .query_row(
            "SELECT count(*) > 0 FROM events WHERE kind = 'sealed' AND body LIKE ?1",
            [format!("%  {sealed}")],
            |row| row.get(0),
        )
        .map_err(|error| RecordError::from(error).of(day.path()))
}
