//! The engine's state as it stands in the record: its parts, each as bytes, and beside them what
//! the engine asked for and was not given.

use super::restore::Wanted;
use crate::record::State;
use crate::state;
use holdtrue_engine::engine::Engine;
use holdtrue_engine::state::PartId;

/// The name beside those of the engine's parts.
const WANTED: &str = "wanted";

/// All of it.
#[must_use]
pub fn whole(engine: &Engine, wanted: &[Wanted]) -> State {
    of(engine, wanted, engine.parts())
}

/// What changed since it was last saved.
pub(super) fn changed(engine: &Engine, wanted: &[Wanted]) -> State {
    of(engine, wanted, engine.changed())
}

fn of(engine: &Engine, wanted: &[Wanted], ids: impl IntoIterator<Item = PartId>) -> State {
    let parts = ids.into_iter();
    let mut state: State = parts
        .filter_map(|id| Some((id.to_string(), state::encode(engine, id)?)))
        .collect();
    state.push((WANTED.to_owned(), wanted_bytes(wanted)));
    state
}

/// One part by its name; `None` if there is none of this name.
#[must_use]
pub fn part_of(engine: &Engine, wanted: &[Wanted], name: &str) -> Option<Vec<u8>> {
    if name == WANTED {
        return Some(wanted_bytes(wanted));
    }
    state::encode(engine, name.parse().ok()?)
}

fn wanted_bytes(wanted: &[Wanted]) -> Vec<u8> {
    postcard::to_stdvec(wanted).expect("a list of numbers can be held in bytes")
}

/// Mean size of a part.
pub(super) fn part_bytes(state: &State) -> u64 {
    let bytes: usize = state.iter().map(|(_, bytes)| bytes.len()).sum();
    (bytes / state.len().max(1)) as u64
}

/// Puts an engine together again, with what it wanted.
///
/// # Errors
/// What is wrong with which part.
pub fn assemble(state: &State) -> Result<(Engine, Vec<Wanted>), String> {
    let mut parts = Vec::with_capacity(state.len());
    let mut wanted = None;
    for (name, bytes) in state {
        if name == WANTED {
            let read = postcard::from_bytes(bytes);
            wanted = Some(read.map_err(|error| format!("part {WANTED} can't be read: {error}"))?);
        } else {
            let id: PartId = name.parse().map_err(|error| format!("{error}"))?;
            parts.push((id, bytes.as_slice()));
        }
    }
    let engine = state::decode(parts).map_err(|error| error.to_string())?;
    Ok((engine, wanted.ok_or(format!("part {WANTED} is missing"))?))
}
