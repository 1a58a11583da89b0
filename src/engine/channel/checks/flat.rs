//! One value again and again: how many repeats cannot be chance.
//!
//! Counting rule (the manual of QARTOD's flat-line test compares a value with its predecessors; the
//! counting is ours to state): a value with n equal predecessors in a row is suspect from n =
//! `suspect` on and fails from n = `fail` on. With 3 and 5, six equal values carry the flags 1, 1,
//! 1, 3, 3, 4 (check value V39).
//!
//! Without counts in the configuration they follow from the declared noise σ and resolution q: two
//! neighbours of a sensor that is alive are equal with probability `p(q/σ)`, and n repeats with pⁿ
//! (correlated noise repeats more often, a moving measurand less; the counts are never below 3 and
//! 5). From q ≥ 2σ on equality is normal, and only a moving reference can tell (see `still`).

use super::Stuck;
use crate::event::Flag;
use crate::math;
use crate::quantile::normal_below;
use crate::setup::{ChannelSetup, Repeats};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Chance that so many repeats happen to a sensor that is alive, for suspect and for fail. A
/// thousand sensors with a reading a second meet the second about once a year.
const CHANCE: (f64, f64) = (1e-4, 1e-10);
/// No fewer repeats than these, whatever the noise says.
const LEAST: Repeats = Repeats {
    suspect: 3,
    fail: 5,
};
/// More repeats than this are not waited for: then equality is too common to tell.
const MOST: f64 = 200.0;

/// The run of equal values that the newest indication ends.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Flat {
    /// Value and time of the newest indication.
    newest: Option<(f64, Timestamp)>,
    /// Equal predecessors of it; counted no further than to failing.
    repeats: u32,
    /// The repeats with which it failed, if it has.
    failed: Option<u32>,
}

impl Flat {
    /// Takes an indication. One that is not newer than the newest counts for nothing: it ends no
    /// run and lengthens none. Told again, the newest has the flag that it had.
    pub(super) fn take(&mut self, time: Timestamp, value: f64, setup: &ChannelSetup) -> Flag {
        let equals = |held: f64| held.total_cmp(&value).is_eq();
        match self.newest {
            Some((held, newest)) if time == newest && equals(held) => return self.flag(setup),
            Some((_, newest)) if time <= newest => return Flag::Pass,
            Some((held, _)) if equals(held) => self.repeats = self.repeats.saturating_add(1),
            _ => self.repeats = 0,
        }
        self.newest = Some((value, time));
        let flag = self.flag(setup);
        self.failed = (flag == Flag::Fail).then(|| {
            let fail = limits(setup).map_or(self.repeats, |limits| limits.fail);
            self.repeats = self.repeats.min(fail);
            fail
        });
        flag
    }

    /// What has failed, if the newest indication has.
    pub(super) fn failed(&self) -> Option<Stuck> {
        let (value, _) = self.newest?;
        self.failed.map(|limit| Stuck::Repeats {
            value,
            times: self.repeats + 1,
            limit: limit + 1,
        })
    }

    /// The flag of the newest. The counts that hold cost hundreds of times what a comparison does,
    /// and few values repeat their predecessor often enough to ask for them.
    fn flag(&self, setup: &ChannelSetup) -> Flag {
        let told = setup.screening.stuck.unwrap_or(LEAST);
        if self.repeats < told.suspect.min(told.fail) {
            return Flag::Pass;
        }
        limits(setup).map_or(Flag::Pass, |limits| flag(self.repeats, limits))
    }
}

fn flag(repeats: u32, limits: Repeats) -> Flag {
    if repeats >= limits.fail {
        Flag::Fail
    } else if repeats >= limits.suspect {
        Flag::Suspect
    } else {
        Flag::Pass
    }
}

/// The counts that hold for a channel; `None` where equality says nothing.
fn limits(setup: &ChannelSetup) -> Option<Repeats> {
    if setup.screening.stuck.is_some() {
        return setup.screening.stuck;
    }
    let (noise, resolution) = (setup.noise, setup.resolution);
    if noise <= 0.0 || resolution <= 0.0 || resolution >= 2.0 * noise {
        return None;
    }
    let chance = equal_neighbours(resolution / noise);
    let needed = |of: f64| math::ln(of) / math::ln(chance);
    let (suspect, fail) = (needed(CHANCE.0), needed(CHANCE.1));
    (fail <= MOST).then(|| Repeats {
        suspect: whole(suspect).max(LEAST.suspect),
        fail: whole(fail).max(LEAST.fail),
    })
}

fn whole(count: f64) -> u32 {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "from 0 to MOST"
    )]
    let whole = count.ceil() as u32;
    whole
}

/// The probability that two neighbouring readings of white normal noise are equal, `step` being
/// the resolution in standard deviations: the sum over cells of their squared probabilities, the
/// mean in the middle of a cell. For small steps it is q/(2σ√π) (check value V49).
fn equal_neighbours(step: f64) -> f64 {
    let mut sum = 0.0;
    let mut cell = 0.0;
    // Beyond nine standard deviations no cell adds anything that a float could hold; the smallest
    // step of note is bounded, so that a careless one can't make this loop long.
    let step = step.max(1e-3);
    while cell * step < 9.0 {
        let probability = normal_below((cell + 0.5) * step) - normal_below((cell - 0.5) * step);
        let sides = if cell > 0.0 { 2.0 } else { 1.0 };
        sum += sides * probability * probability;
        cell += 1.0;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::testing::channel_setup;
    use Flag::{Fail, Pass, Suspect};

    fn setup(noise: f64, resolution: f64) -> ChannelSetup {
        ChannelSetup {
            resolution,
            noise,
            ..channel_setup()
        }
    }

    fn flags(setup: &ChannelSetup, values: &[f64]) -> Vec<Flag> {
        let mut flat = Flat::default();
        let times = (0..).map(Timestamp);
        let flags = times
            .zip(values)
            .map(|(time, &value)| flat.take(time, value, setup));
        flags.collect()
    }

    /// Check value V39, flat line: flag 3 from the 4th equal value, flag 4 from the 6th.
    #[test]
    fn six_equal_values() {
        let mut setup = channel_setup();
        setup.screening.stuck = Some(Repeats {
            suspect: 3,
            fail: 5,
        });
        let values = [7.0, 7.0, 7.0, 7.0, 7.0, 7.0, 7.0, 7.1];
        assert_eq!(
            flags(&setup, &values),
            [Pass, Pass, Pass, Suspect, Suspect, Fail, Fail, Pass]
        );
    }

    /// Check value V49: q = 0.1σ 0.0282, q = 2σ 0.5156.
    #[test]
    fn the_chance_of_equal_neighbours() {
        assert!((equal_neighbours(0.1) - 0.0282).abs() < 5e-5);
        assert!((equal_neighbours(2.0) - 0.5156).abs() < 5e-5);
        let small = 0.01 / (2.0 * std::f64::consts::PI.sqrt());
        assert!((equal_neighbours(0.01) / small - 1.0).abs() < 1e-4);
    }

    #[test]
    fn the_counts_follow_from_noise_and_resolution() {
        assert_eq!(limits(&setup(0.0, 0.1)), None, "no noise declared");
        assert_eq!(limits(&setup(1.0, 2.0)), None, "equality is normal");
        let fine = limits(&setup(1.0, 0.1)).expect("0.0282 per repeat");
        assert_eq!((fine.suspect, fine.fail), (3, 7));
        let coarse = limits(&setup(1.0, 1.0)).expect("about 0.27 per repeat");
        assert_eq!((coarse.suspect, coarse.fail), (8, 18));
    }

    #[test]
    fn what_failed_is_named_and_another_value_ends_it() {
        let setup = setup(1.0, 0.1);
        let mut flat = Flat::default();
        for time in 0..8 {
            assert!(flat.failed().is_none());
            flat.take(Timestamp(time), 5.0, &setup);
        }
        let times = 8;
        let limit = 8;
        let value = 5.0;
        assert_eq!(
            flat.failed(),
            Some(Stuck::Repeats {
                value,
                times,
                limit
            })
        );
        flat.take(Timestamp(8), 5.1, &setup);
        assert!(flat.failed().is_none());
    }

    #[test]
    fn a_late_reading_counts_for_nothing() {
        let setup = setup(1.0, 0.1);
        let mut flat = Flat::default();
        for time in 10..16 {
            flat.take(Timestamp(time), 5.0, &setup);
        }
        let before = flat.clone();
        assert_eq!(flat.take(Timestamp(3), 9.0, &setup), Flag::Pass);
        assert_eq!(flat, before);
    }

    /// The broker delivers again what was not acknowledged: one reading is one repeat.
    #[test]
    fn a_reading_told_again_counts_once() {
        let setup = setup(1.0, 0.1);
        let mut flat = Flat::default();
        for time in 0..4 {
            flat.take(Timestamp(time), 5.0, &setup);
        }
        let before = flat.clone();
        for _ in 0..10 {
            assert_eq!(flat.take(Timestamp(3), 5.0, &setup), Suspect);
        }
        assert_eq!(flat, before);
    }
}
