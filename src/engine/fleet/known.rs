//! The known values that a reference stands for while their gates are open.

use super::Reference;
use crate::channel::Check;
use crate::kept::Kept;
use crate::setup::{ReferenceId, ReferenceKind, Setup};

/// Those of one reference; none if it is no gated constant and names none.
pub(super) fn known_values<'a>(
    setup: &Setup,
    references: &'a [Kept<Reference>],
    id: ReferenceId,
) -> Vec<Check<'a>> {
    let of = |id: ReferenceId| {
        let index = id.0 as usize;
        match setup.references[index].kind {
            ReferenceKind::Constant { value, gated: true } => Some(Check {
                value,
                gate: &references[index].gate,
            }),
            _ => None,
        }
    };
    match &setup.references[id.0 as usize].kind {
        ReferenceKind::Checks { points } => points.iter().filter_map(|&id| of(id)).collect(),
        _ => Vec::from_iter(of(id)),
    }
}
