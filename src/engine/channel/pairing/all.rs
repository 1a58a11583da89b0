//! All pairs of a stretch of time at once, for a fit that is made anew.

use super::{Found, Pair, Pairing, Scene, Sight, own};
use crate::setup::ReferenceKind;

/// All pairs that the readings in a scene make once nothing more can come, in order of their time.
/// Those without their influence quantities are left out.
pub(crate) fn all_pairs(scene: &Scene<'_>) -> Vec<Pair> {
    let mut pairing = Pairing::default();
    let sight = Sight {
        own: own(scene),
        values: scene.values,
        now: scene.now,
    };
    let mut found = Vec::new();
    let makers = match scene.reference.kind {
        ReferenceKind::Measured => scene.values,
        _ => own(scene),
    };
    for sample in makers.all() {
        if let ReferenceKind::Constant {
            value,
            gated: false,
        } = scene.reference.kind
        {
            found.push(Found::Pair(Pair::at(sample.time, sample.value, value)));
        } else {
            pairing.resolve(sample, &sight, scene, &mut found);
        }
    }
    let mut pairs = Vec::with_capacity(found.len());
    for found in found {
        let mut one = vec![found];
        pairing.attach(&mut one, scene);
        pairs.extend(one.into_iter().filter_map(|found| match found {
            Found::Pair(pair) if !scene.bars(&pair) => Some(pair),
            _ => None,
        }));
    }
    pairs.sort_by_key(|pair| pair.time);
    pairs
}
