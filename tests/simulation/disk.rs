//! A disk that fails when the plan says so: it refuses for a while, or everything ends at one
//! operation and what is left then is what the next life begins with.

use crate::chance::Chance;
use crate::image::{self, Image};
use holdtrue::record::{Disk, Operation};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, MutexGuard};

/// Where in an operation everything ends.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Moment {
    Before,
    /// The power fails while it is done.
    During,
    /// It was done, and nobody came to know.
    After,
}

/// What a disk does in one life; operations count from 1.
#[derive(Clone, Debug, Default)]
pub(crate) struct Plan {
    /// At which operation everything ends.
    pub(crate) end: Option<(u64, Moment)>,
    /// Only those count for the end that are no commits; most are.
    pub(crate) end_is_rare: bool,
    /// It refuses from the first up to the second of these.
    pub(crate) refuses: Option<(u64, u64)>,
}

/// What happened.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub(crate) struct Happened {
    pub(crate) operations: u64,
    pub(crate) refused: u64,
    pub(crate) ended: Option<(&'static str, Moment)>,
}

/// The disk of one life; copies of it are the same disk.
#[derive(Clone)]
pub(crate) struct SimulatedDisk(Arc<Mutex<State>>);

struct State {
    folder: PathBuf,
    /// What is left at the end goes here.
    next: PathBuf,
    plan: Plan,
    chance: Chance,
    happened: Happened,
    /// Operations that count for the end.
    counted: u64,
    /// The folder as it was before the operation at hand, if everything ends in it.
    earlier: Option<Image>,
}

impl SimulatedDisk {
    pub(crate) fn new(folder: &Path, next: &Path, plan: Plan, chance: Chance) -> Self {
        Self(Arc::new(Mutex::new(State {
            folder: folder.to_path_buf(),
            next: next.to_path_buf(),
            plan,
            chance,
            happened: Happened::default(),
            counted: 0,
            earlier: None,
        })))
    }

    fn state(&self) -> MutexGuard<'_, State> {
        self.0.lock().expect("nobody panics holding it")
    }

    /// Whether everything has ended.
    pub(crate) fn is_dead(&self) -> bool {
        self.state().happened.ended.is_some()
    }

    /// Whether it refuses operations just now.
    pub(crate) fn is_refusing(&self) -> bool {
        let state = self.state();
        state.plan.refuses_at(state.happened.operations)
    }

    pub(crate) fn happened(&self) -> Happened {
        self.state().happened.clone()
    }
}

impl Plan {
    fn refuses_at(&self, operation: u64) -> bool {
        self.refuses
            .is_some_and(|(from, to)| (from..to).contains(&operation))
    }
}

impl State {
    fn end(&mut self, operation: Operation, moment: Moment, left: &Image) -> io::Error {
        left.write(&self.next);
        self.happened.ended = Some((word(operation), moment));
        gone()
    }
}

impl Disk for SimulatedDisk {
    fn before(&mut self, operation: Operation, _path: &Path) -> io::Result<()> {
        let state = &mut *self.state();
        if state.happened.ended.is_some() {
            return Err(gone());
        }
        state.happened.operations += 1;
        let number = state.happened.operations;
        if state.plan.refuses_at(number) {
            state.happened.refused += 1;
            let kind = state.chance.pick(&[
                io::ErrorKind::StorageFull,
                io::ErrorKind::ReadOnlyFilesystem,
            ]);
            return Err(kind.into());
        }
        let counts = !state.plan.end_is_rare || operation != Operation::Commit;
        state.counted += u64::from(counts);
        if let Some((at, moment)) = state.plan.end
            && counts
            && at == state.counted
        {
            let now = Image::of(&state.folder);
            if moment == Moment::Before {
                return Err(state.end(operation, moment, &now));
            }
            state.earlier = Some(now);
        }
        Ok(())
    }

    fn after(&mut self, operation: Operation, path: &Path) -> io::Result<()> {
        let state = &mut *self.state();
        let Some(before) = state.earlier.take() else {
            return Ok(());
        };
        let after = Image::of(&state.folder);
        let moment = state.plan.end.map_or(Moment::After, |(_, moment)| moment);
        let left = if moment == Moment::During {
            let scratch = state.next.with_extension("scratch");
            image::torn(
                operation,
                path,
                &before,
                &after,
                &scratch,
                &mut state.chance,
            )
        } else {
            after
        };
        Err(state.end(operation, moment, &left))
    }
}

fn gone() -> io::Error {
    io::Error::other("the power is off")
}

/// A word for an operation.
fn word(operation: Operation) -> &'static str {
    match operation {
        Operation::Open => "open",
        Operation::Commit => "commit",
        Operation::Rest => "rest",
        Operation::Checksum => "checksum",
        Operation::Remove => "remove",
    }
}
