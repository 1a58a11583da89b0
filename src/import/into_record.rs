//! A surveyed recording into a record. Nothing here reads a clock: every instant is the recording's
//! own, so that the same recordings make the same record, link by link.

use super::ImportError;
use super::mapping::Mapping;
use super::merge::Merge;
use super::survey::Survey;
use crate::keeper::Keeper;
use crate::record::{Archive, RecordError, Settled};
use holdtrue_engine::counters::Count;
use holdtrue_engine::setup::{Clock, Setup};
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeMap;
use std::path::Path;
use std::sync::atomic::AtomicBool;

/// Inputs between two commits: few enough to wait in memory, many enough that the disk is not what
/// an import waits for.
const COMMIT_INPUTS: usize = 10_000;
/// At midnight, where the record may begin a new file, fewer suffice.
const COMMIT_AT_MIDNIGHT: usize = 1000;
const NANOS_PER_DAY: i64 = 86_400_000_000_000;

/// What became of a recording.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Imported {
    /// What the engine was told.
    pub inputs: u64,
    /// How often the engine said what, by kind.
    pub outputs: BTreeMap<String, u64>,
    /// What the engine refused since the record began, by subject and reason.
    pub refused: Vec<Count>,
}

/// Makes a record from a recording, or goes on with one. The engine runs by the readings' own time,
/// whatever clock `setup` names. `progress` is told how many more inputs were taken.
///
/// # Errors
/// When the folder has a record and is not to be gone on with, when the recording begins before the
/// record ends, or when files or record fail. What was committed by then stays in the record.
pub fn into_record(
    survey: &Survey,
    mapping: &Mapping,
    setup: &Setup,
    place: Place<'_>,
    progress: &mut dyn FnMut(u64),
) -> Result<Imported, ImportError> {
    let extent = survey.extent();
    let (Some(first), Some(last)) = (extent.first, extent.last) else {
        let nothing = "none of the files has a value that could be imported";
        return Err(ImportError::Misfit(nothing.to_owned()));
    };
    place.check()?;
    let mut keeper = open(place, first)?;
    let before = keeper.inputs();
    let setup = Setup {
        clock: Clock::Readings,
        ..setup.clone()
    };
    if *keeper.setup() != setup {
        keeper.adopt(&setup)?;
    }
    commit(&mut keeper, first)?;
    let mut merge = Merge::new(survey, mapping);
    let mut imported = Imported::default();
    let mut day = day_of(first);
    while let Some(entry) = merge.advance()? {
        keeper.take(&entry.input());
        imported.inputs += 1;
        progress(1);
        let is_midnight = day_of(entry.at) != day;
        let enough = if is_midnight {
            COMMIT_AT_MIDNIGHT
        } else {
            COMMIT_INPUTS
        };
        if keeper.uncommitted() >= enough {
            commit(&mut keeper, entry.at)?;
        }
        day = day_of(entry.at);
    }
    commit(&mut keeper, last)?;
    keeper.finish(last)?;
    imported.refused = keeper.engine().standing().counters.all().to_vec();
    drop(keeper);
    imported.outputs = outputs_after(place.folder, before)?;
    Ok(imported)
}

/// Where a recording goes.
#[derive(Clone, Copy, Debug)]
pub struct Place<'a> {
    /// Folder of the record.
    pub folder: &'a Path,
    /// A record that is there already is gone on with.
    pub append: bool,
}

impl Place<'_> {
    /// Refuses a folder that has a record, unless that is to be gone on with.
    ///
    /// # Errors
    /// That it has one, or that it can't be read.
    pub fn check(self) -> Result<(), ImportError> {
        let has_record = self.folder.exists() && !Archive::open(self.folder)?.days().is_empty();
        if has_record && !self.append {
            return Err(ImportError::Misfit(format!(
                "{} has a record already; name another folder, or go on with that record by \
                 --append",
                self.folder.display()
            )));
        }
        Ok(())
    }
}

/// Opens the record; what would be behind its end is refused, since it could not count any more.
fn open(place: Place<'_>, first: Timestamp) -> Result<Keeper, ImportError> {
    let never = AtomicBool::new(false);
    let opened = Keeper::open(place.folder, first, &never)?;
    let Some(keeper) = opened else {
        // Only a flag that somebody sets leads here.
        return Err(ImportError::Misfit("stopped".to_owned()));
    };
    match keeper.engine().now() {
        Some(end) if first < end => Err(ImportError::Misfit(format!(
            "the recording begins at {first}, before the record {} ends, at {end}; import all of \
             it into a new record",
            place.folder.display()
        ))),
        _ => Ok(keeper),
    }
}

/// Writes what was taken, hands back what the engine asks for, and sets aside what would be
/// published: nobody waits for documents of the past. What should stand at the broker is kept.
fn commit(keeper: &mut Keeper, now: Timestamp) -> Result<(), RecordError> {
    keeper.commit(now)?;
    keeper.answer_wanted()?;
    while let Some((number, _)) = keeper.outbox().next_to_hand() {
        keeper.settle(number, Settled::NotSent);
    }
    Ok(())
}

fn day_of(instant: Timestamp) -> i64 {
    instant.0.div_euclid(NANOS_PER_DAY)
}

/// How often the engine said what after an input.
fn outputs_after(folder: &Path, input: i64) -> Result<BTreeMap<String, u64>, RecordError> {
    let archive = Archive::open(folder)?;
    let mut counts = BTreeMap::new();
    for name in archive.days() {
        for (kind, count) in archive.day(*name)?.outputs_after(input)? {
            *counts.entry(kind).or_insert(0) += count;
        }
    }
    Ok(counts)
}
