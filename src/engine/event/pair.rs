//! A pair and its fate.

use crate::event::RefusedReason;
use crate::setup::ChannelId;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// A pair and its fate.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PairFate {
    /// Which channel.
    pub channel: ChannelId,
    /// The pair's phenomenon time.
    pub phenomenon: Timestamp,
    /// Mean or interpolated indication.
    pub indication: f64,
    /// Reference value.
    pub reference: f64,
    /// What the tests say of it.
    pub flag: Flag,
    /// `None`: entered the fit. Otherwise what kept it out.
    pub rejected: Option<Rejection>,
}

/// What a quality test says of a value, with the numbers that ocean observing uses for it (QARTOD:
/// 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing; from memory).
///
/// Only what passes enters a fit. How the tests count:
/// - *Spike*: the deviation from what the fit expects is suspect above the gate's threshold and
///   fails above [`SPIKE_FAILS`] times it.
/// - *Flat line*: the n-th repeat of one value is suspect from n = `suspect` on and fails from n =
///   `fail` on; the value itself counts as none.
/// - A pair without its influence quantities is suspect: nothing tells what it means.
/// - *Reference*: a value that all channels of its reference disagree with is suspect.
/// - Every other test knows pass and fail only.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(into = "u8", try_from = "u8")]
pub enum Flag {
    /// 1: it may enter a fit.
    Pass,
    /// 3: it is kept out, and may be right.
    Suspect,
    /// 4: it is kept out.
    Fail,
}

/// A spike fails from so many times the threshold on at which it is suspect.
pub const SPIKE_FAILS: f64 = 2.0;

impl Flag {
    /// The flag of a deviation: suspect above `low`, fail above `high`.
    #[must_use]
    pub fn of_deviation(deviation: f64, low: f64, high: f64) -> Self {
        if deviation > high {
            Self::Fail
        } else if deviation > low {
            Self::Suspect
        } else {
            Self::Pass
        }
    }

    /// The flag that a pair's fate amounts to.
    #[must_use]
    pub fn of_fate(rejected: Option<Rejection>) -> Self {
        match rejected {
            None => Self::Pass,
            Some(Rejection {
                reason: RefusedReason::InnovationGate,
                value,
                threshold,
            }) => Self::of_deviation(value, threshold, SPIKE_FAILS * threshold),
            Some(Rejection {
                reason: RefusedReason::NoInfluence | RefusedReason::ReferenceDoubted,
                ..
            }) => Self::Suspect,
            Some(_) => Self::Fail,
        }
    }
}

impl From<Flag> for u8 {
    fn from(flag: Flag) -> Self {
        match flag {
            Flag::Pass => 1,
            Flag::Suspect => 3,
            Flag::Fail => 4,
        }
    }
}

impl TryFrom<u8> for Flag {
    type Error = String;

    fn try_from(number: u8) -> Result<Self, String> {
        match number {
            1 => Ok(Self::Pass),
            3 => Ok(Self::Suspect),
            4 => Ok(Self::Fail),
            _ => Err(format!("{number} is no flag; 1, 3 and 4 are")),
        }
    }
}

/// What kept a pair out of the fit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Rejection {
    /// The test.
    pub reason: RefusedReason,
    /// The value it looked at.
    pub value: f64,
    /// The threshold it failed.
    pub threshold: f64,
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Check value V39, spike: 10, 14, 10 deviates by 4 from the mean of its neighbours; with 3 and
    /// 8 that is suspect.
    #[test]
    fn a_spike_of_four_between_three_and_eight_is_suspect() {
        let series: [f64; 3] = [10.0, 14.0, 10.0];
        let deviation = (series[1] - 0.5 * (series[0] + series[2])).abs();
        let flag = |deviation| u8::from(Flag::of_deviation(deviation, 3.0, 8.0));
        assert_eq!(flag(deviation), 3);
        assert_eq!((flag(3.0), flag(8.0), flag(8.1)), (1, 3, 4));
    }

    #[test]
    fn a_flag_is_stored_as_its_number() {
        for flag in [Flag::Pass, Flag::Suspect, Flag::Fail] {
            let text = serde_json::to_string(&flag).unwrap();
            assert_eq!(serde_json::from_str::<Flag>(&text).unwrap(), flag);
        }
        assert_eq!(serde_json::to_string(&Flag::Fail).unwrap(), "4");
        assert!(serde_json::from_str::<Flag>("2").is_err());
    }
}
