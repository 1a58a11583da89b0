//! Pairs with the median of a group: each indication of the channel against the median of at least
//! three *other* members at its instant. The median tells which one drifts against the rest; what
//! all share stays invisible.

use super::look::{Look, look};
use super::{Fate, Found, Pair, Scene, settles};
use crate::event::RefusedReason;
use crate::median::median;
use crate::setup::ChannelId;
use crate::time::Timestamp;
use crate::track::Sample;

/// Fewest other members whose median can stand against one bad member.
const MEMBERS_MIN: usize = 3;

/// Variance of the median of n normal values in units of one value's variance over n, for large n:
/// π/2 (Kenney & Keeping, *Mathematics of Statistics*, from memory).
const MEDIAN_PRICE: f64 = std::f64::consts::FRAC_PI_2;

pub(super) fn resolve(
    sample: &Sample,
    members: &[ChannelId],
    scene: &Scene<'_>,
    found: &mut Vec<Found>,
) -> Fate {
    let instant = sample.time.minus(scene.setup.lag);
    let others = members.iter().filter(|&&member| member != scene.id);
    let asked = others.clone().count();
    let mut values = Vec::with_capacity(asked);
    // Past this, any neighbour still to come would be too far away.
    let deadline = settles(sample, scene).plus(scene.setup.max_gap);
    let mut ready: Option<Timestamp> = None;
    let mut open = false;
    for member in others {
        let track = &scene.indications[member.0 as usize];
        match look(track, instant, scene.setup.max_gap) {
            Look::Exact(value) => values.push(value),
            Look::Between { value, after } => {
                values.push(value);
                ready = ready.max(Some(settles(&after, scene)));
            }
            Look::Apart { after } => ready = ready.max(Some(settles(&after, scene))),
            Look::Open => open = true,
        }
    }
    let ready = match ready {
        _ if open => deadline,
        Some(ready) => ready.min(deadline),
        None => scene.now,
    };
    if scene.now < ready {
        return Fate::Waits(Some(ready));
    }
    found.push(if values.len() < MEMBERS_MIN {
        Found::Missed {
            time: sample.time,
            reason: RefusedReason::GroupTooSmall,
        }
    } else {
        let weight = weight(values.len(), asked);
        let pair = Pair::at(sample.time, sample.value, median(&mut values));
        Found::Pair(pair.weighing(weight))
    });
    Fate::Done
}

/// Relative weight of a pair against the median of `present` of `asked` members, all members as
/// noisy as the channel.
fn weight(present: usize, asked: usize) -> f64 {
    (1.0 + MEDIAN_PRICE / asked as f64) / (1.0 + MEDIAN_PRICE / present as f64)
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    #[test]
    fn fewer_members_weigh_less() {
        assert_eq!(weight(5, 5), 1.0);
        assert!(weight(3, 5) < 1.0);
    }
}
