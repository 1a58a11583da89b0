//! The engine's state as bytes, part by part, and an engine made of such bytes.
//!
//! The form is postcard's (serde without names; floats as their bits, so that infinities and the
//! last bit survive; the order of fields counts). It is for the program that wrote it: the record
//! says which that was.

use holdtrue_engine::engine::Engine;
use holdtrue_engine::state::{Assembly, PartId, StateError};
use std::collections::BTreeMap;

/// One part of the state; `None` if the engine has none of this name.
#[must_use]
pub fn encode(engine: &Engine, id: PartId) -> Option<Vec<u8>> {
    let part = engine.part(id)?;
    // Writing to memory fails for types that cannot be told in this form only, and no part is.
    postcard::to_stdvec(&part).ok()
}

/// The engine made of these parts. Of several of one name the last counts, so older parts may come
/// first and what changed since after them; parts left by another configuration are passed over.
///
/// # Errors
/// Names the first part that is missing, damaged, or contradicts itself or the configuration.
/// Damage that changes numbers only can't be seen here: the record's checksums are for that.
pub fn decode<'a>(
    parts: impl IntoIterator<Item = (PartId, &'a [u8])>,
) -> Result<Engine, StateError> {
    let newest: BTreeMap<PartId, &[u8]> = parts.into_iter().collect();
    let find = |id| {
        let bytes = newest.get(&id).ok_or_else(|| StateError {
            part: id,
            why: "is missing".to_owned(),
        });
        bytes.map(|bytes| postcard::Deserializer::from_bytes(bytes))
    };
    let mut stored = find(PartId::Setup)?;
    let mut assembly = Assembly::begin(&mut stored)?;
    used_up(PartId::Setup, stored)?;
    for id in assembly.wanted() {
        let mut stored = find(id)?;
        assembly.take(id, &mut stored)?;
        used_up(id, stored)?;
    }
    assembly.finish()
}

/// Nothing may stand behind a part.
fn used_up<'a>(
    part: PartId,
    stored: postcard::Deserializer<'a, impl postcard::de_flavors::Flavor<'a, Remainder = &'a [u8]>>,
) -> Result<(), StateError> {
    match stored.finalize() {
        Ok([]) => Ok(()),
        _ => Err(StateError {
            part,
            why: "is longer than it should be".to_owned(),
        }),
    }
}
