//! How one term of the announced model climbs from grade to grade, and comes down again.
//!
//! A higher grade must be better by a gain that lasts: the smaller the gain, the longer. A lower
//! one must be as good for half a window. So noise that looks like a drift for a while is waited
//! out, and a plain drift is announced soon. Doubts about the sample always count for what is
//! announced.
//!
//! The constants were chosen by simulation, on other seeds than those of the tests:
//! `tests/statistics/` (`false_raises`, `degree_power`) state what they achieve.

use crate::fit::gain::Contest;
use crate::setup::Criterion;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// A gain of less counts for nothing: as 2 ln of a Bayes factor it is "not worth more than a bare
/// mention" (Kass & Raftery, *Journal of the American Statistical Association* 90 (1995) 777).
const LEAST_GAIN: f64 = 2.0;
/// A gain g must last for this over g of a full window: 0.85 of it at the least gain, a quarter
/// from 6.8 ("strong evidence", same source) on.
const GAIN_TIMES_HOLD: f64 = 1.7;
/// However large the gain, it must last for this part of a full window.
const SHORTEST_HOLD: f64 = 0.25;
/// A lower grade is as good when the higher ones gain no more than this.
const AS_GOOD: f64 = 2.0;
/// A lower grade must be as good for this part of a full window.
const HOLD_TO_LOWER: f64 = 0.5;

/// The announced grade of one term and what is on its way to change it.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Climb {
    /// The announced grade.
    pub(crate) announced: u8,
    /// Gains of higher grades over the announced one, group by group, newest last: an unbroken run
    /// of at least [`LEAST_GAIN`] each. No longer than a window.
    gains: VecDeque<f64>,
    /// For how many groups in a row the next lower grade has been as good.
    idle: u32,
}

/// What a change rests on.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Verdict {
    pub(crate) gain: f64,
    pub(crate) needed: f64,
    pub(crate) held: u32,
    pub(crate) needed_held: u32,
    /// Up, not down.
    pub(crate) raises: bool,
}

impl Climb {
    pub(crate) fn at(announced: u8) -> Self {
        Self {
            announced,
            ..Self::default()
        }
    }

    /// Takes note of a contest, once for every group of segments; tells when a change is due.
    pub(crate) fn note(
        &mut self,
        contest: &Contest,
        criterion: Criterion,
        when_full: f64,
        may_raise: bool,
    ) -> Option<Verdict> {
        self.rising(contest, criterion, when_full, may_raise)
            .or_else(|| self.falling(contest, criterion, when_full))
    }

    /// Whether it can be that of a term with grades up to `highest`.
    pub(crate) fn is_possible(&self, highest: usize) -> bool {
        usize::from(self.announced) <= highest
    }

    /// Forgets the runs that a change was on its way by.
    pub(crate) fn forget_runs(&mut self) {
        *self = Self::at(self.announced);
    }

    /// Moves to another grade and begins to count anew; the grade before.
    pub(crate) fn move_to(&mut self, to: u8) -> u8 {
        let from = self.announced;
        *self = Self::at(to);
        from
    }

    /// Takes note of the gain of higher grades; tells when it has lasted.
    fn rising(
        &mut self,
        contest: &Contest,
        criterion: Criterion,
        when_full: f64,
        may_raise: bool,
    ) -> Option<Verdict> {
        let gain = contest
            .cautious_gain(criterion, usize::from(self.announced))
            .filter(|&gain| may_raise && gain >= LEAST_GAIN);
        let Some(gain) = gain else {
            self.gains.clear();
            return None;
        };
        self.gains.push_back(gain);
        // No more than a window is ever looked at.
        if self.gains.len() as f64 > when_full {
            self.gains.pop_front();
        }
        lasting(&self.gains, when_full)
    }

    /// Takes note of whether the next lower grade is as good; tells when it has been so for long
    /// enough. Doubts about the sample count for the announced grade here: a drift that has been
    /// seen is not taken back because its noise became harder to judge. A grade that the window's
    /// segments can no longer bear counts as not needed.
    fn falling(
        &mut self,
        contest: &Contest,
        criterion: Criterion,
        when_full: f64,
    ) -> Option<Verdict> {
        let lower = usize::from(self.announced).checked_sub(1)?;
        let gain = contest.plain_gain(criterion, lower).unwrap_or_default();
        if gain > AS_GOOD {
            self.idle = 0;
            return None;
        }
        self.idle = self.idle.saturating_add(1);
        let needed_held = HOLD_TO_LOWER * when_full;
        (f64::from(self.idle) >= needed_held).then(|| Verdict {
            gain,
            needed: AS_GOOD,
            held: self.idle,
            needed_held: whole_segments(needed_held),
            raises: false,
        })
    }
}

impl Verdict {
    /// A term that can no longer be told from others: it is withdrawn whatever it gained.
    pub(crate) fn withdrawn(gain: f64) -> Self {
        Self {
            gain,
            needed: AS_GOOD,
            held: 0,
            needed_held: 0,
            raises: false,
        }
    }
}

/// Whether the run of gains, newest last, has lasted long enough: for some length m of its newest
/// part, with g the least gain in it, m·g reaches [`GAIN_TIMES_HOLD`] full windows.
fn lasting(gains: &VecDeque<f64>, when_full: f64) -> Option<Verdict> {
    let shortest = SHORTEST_HOLD * when_full;
    let mut least = f64::INFINITY;
    let mut held = 0_u32;
    for &gain in gains.iter().rev() {
        held += 1;
        least = least.min(gain);
        let needed_held = (GAIN_TIMES_HOLD / least * when_full).max(shortest);
        if f64::from(held) >= needed_held {
            return Some(Verdict {
                gain: least,
                needed: LEAST_GAIN,
                held,
                needed_held: whole_segments(needed_held),
                raises: true,
            });
        }
    }
    None
}

/// The number of segments that is at least `count`.
fn whole_segments(count: f64) -> u32 {
    // The cast saturates and the count is that of a window's segments.
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a small number ≥ 0"
    )]
    let whole = count.ceil() as u32;
    whole
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    #[test]
    fn a_gain_must_last_the_longer_the_smaller_it_is() {
        let run = |gain, length| VecDeque::from(vec![gain; length]);
        for (gain, needed) in [(2.0, 55), (4.0, 28), (1000.0, 16)] {
            assert!(lasting(&run(gain, needed - 1), 64.0).is_none());
            let verdict = lasting(&run(gain, needed), 64.0).expect("long enough");
            assert_relative_eq!(verdict.gain, gain);
            assert_eq!(
                (verdict.held as usize, verdict.needed_held as usize),
                (needed, needed)
            );
        }
        let mut broken = run(100.0, 30);
        broken[20] = 2.1;
        assert!(
            lasting(&broken, 64.0).is_none(),
            "the least gain of the run counts"
        );
    }
}
