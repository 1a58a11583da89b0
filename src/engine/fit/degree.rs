//! When the announced degree is raised or lowered.
//!
//! Each time a segment closes, the between-segments problem (see `between`) is judged by the
//! channel's criterion on its effective sample size. A higher degree must be better by a gain that
//! lasts: the smaller the gain, the longer. A lower one must be as good for half a window. So noise
//! that looks like a drift for a while is waited out, and a plain drift is announced soon.
//!
//! The constants were chosen by simulation, on other seeds than those of the tests:
//! `tests/false_raises.rs` states what they achieve, DEVELOPERS.md how far they are from the next
//! best ones.

use crate::event::{CriterionValues, Evidence};
use crate::fit::between::{Between, Groups, newest_group};
use crate::fit::correlation::{Caution, cautious, effective_sample_size};
use crate::fit::criterion::{aicc, bic};
use crate::fit::{Change, Fit};
use crate::math;
use crate::setup::{Criterion, FitSetup};
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// A gain of less counts for nothing. (2 ln of a Bayes factor of 2–6 is "positive" evidence, Kass &
/// Raftery, *Journal of the American Statistical Association* 90 (1995) 777; how long it lasts
/// makes up for the rest.)
const LEAST_GAIN: f64 = 4.0;
/// A gain g must last for this over g of a full window: half a window at the least gain.
const GAIN_TIMES_HOLD: f64 = 2.0;
/// However large the gain, it must last for this part of a full window.
const SHORTEST_HOLD: f64 = 0.2;
/// A lower degree is as good when the higher ones gain no more than this.
const AS_GOOD: f64 = 2.0;
/// A lower degree must be as good for this part of a full window.
const HOLD_TO_LOWER: f64 = 0.5;
/// Below this effective sample size a raise must convince both criteria.
const SMALL_SAMPLE: f64 = 40.0;
/// The most that a coefficient costs by `AICc`: where its correction has no meaning any more, a
/// degree must explain this much more than a gain needs.
const HIGHEST_PRICE: f64 = 8.0;
/// How cautiously r₁ is taken when a degree is judged.
pub(crate) const JUDGING: Caution = Caution {
    bias: 3.0,
    spread: 0.4,
};

/// A criterion of n, RSS and the number of parameters.
type Formula = fn(f64, f64, usize) -> Option<f64>;

/// The announced degree and what is on its way to change it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct DegreeState {
    /// The announced degree.
    pub(crate) announced: u8,
    /// Newest group of segments that was judged; `None` before the first.
    judged: Option<i64>,
    /// Gains of higher degrees over the announced one, group by group, newest last: an unbroken run
    /// of at least [`LEAST_GAIN`] each. No longer than a window.
    gains: VecDeque<f64>,
    /// For how many groups in a row the next lower degree has been as good.
    idle: u32,
}

/// A between-segments problem with the sample size that it is judged on.
pub(crate) struct Judged {
    pub(crate) between: Between,
    /// n_eff.
    pub(crate) effective: f64,
}

impl DegreeState {
    pub(crate) fn new(announced: u8) -> Self {
        Self {
            announced,
            judged: None,
            gains: VecDeque::new(),
            idle: 0,
        }
    }
}

impl Judged {
    pub(crate) fn of(between: Between) -> Self {
        let coefficients = between.largest + 1;
        let r = cautious(between.lag_one, coefficients, between.segments, JUDGING);
        let effective = effective_sample_size(between.segments as f64, r);
        Self { between, effective }
    }

    /// By how much degree `to` is better than `from`: n_eff ln(RSS/RSS′) less the price of the
    /// coefficients; on a small sample, by the more sceptical of both criteria. `None` where no
    /// residuals are left to compare.
    fn gain(&self, criterion: Criterion, from: usize, to: usize) -> Option<f64> {
        let (before, after) = (self.between.known_rss(from), self.between.known_rss(to));
        if after <= 0.0 || !before.is_finite() {
            return None;
        }
        let explained = self.effective * math::ln(before / after);
        let bic = (to - from) as f64 * math::ln(self.effective.max(1.0));
        let aicc = aicc_price(self.effective, from, to);
        let price = match criterion {
            _ if self.effective < SMALL_SAMPLE => f64::max(bic, aicc),
            Criterion::Bic => bic,
            Criterion::Aicc => aicc,
        };
        Some(explained - price)
    }

    /// The largest gain of any degree above `from`; `None` if there is none that can be judged.
    fn best_gain(&self, criterion: Criterion, from: usize) -> Option<f64> {
        (from + 1..=self.between.largest)
            .filter_map(|to| self.gain(criterion, from, to))
            .reduce(f64::max)
    }

    /// The criterion of degrees 0, 1, … as far as it is defined.
    pub(crate) fn criterion_values(&self, criterion: Criterion) -> CriterionValues {
        let (name, formula): (_, Formula) = match criterion {
            Criterion::Bic => ("BIC", bic),
            Criterion::Aicc => ("AICc", aicc),
        };
        CriterionValues {
            name: name.to_owned(),
            values: (0..=self.between.largest)
                .map_while(|degree| {
                    formula(self.effective, self.between.known_rss(degree), degree + 2)
                })
                .map(|value| value + 0.0)
                .collect(),
        }
    }

    fn evidence(&self, setup: &FitSetup, verdict: Verdict) -> Evidence {
        Evidence {
            criterion: self.criterion_values(setup.criterion),
            gain: verdict.gain + 0.0,
            needed: verdict.needed,
            held_segments: verdict.held,
            needed_segments: verdict.needed_held,
            segments: u32::try_from(self.between.segments).unwrap_or(u32::MAX),
            effective_sample_size: self.effective,
            lag_one: self.between.lag_one,
            rss: self.between.rss.iter().map(|rss| rss + 0.0).collect(),
        }
    }
}

/// By how much the `AICc`'s penalty of degree `to` exceeds that of `from`, at most
/// [`HIGHEST_PRICE`] per coefficient. The criterion has a pole at n = K + 1, and
/// means nothing below; a fit whose residuals are strongly correlated, such as a parabola through
/// an exponential, lies there however much it explains.
fn aicc_price(n: f64, from: usize, to: usize) -> f64 {
    let penalty = |degree: usize| {
        let k = (degree + 2) as f64;
        (n > k + 1.0).then(|| 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0))
    };
    let most = (to - from) as f64 * HIGHEST_PRICE;
    match (penalty(from), penalty(to)) {
        (Some(from), Some(to)) => (to - from).min(most),
        _ => most,
    }
}

/// What a change rests on.
#[derive(Clone, Copy, Debug)]
struct Verdict {
    gain: f64,
    needed: f64,
    held: u32,
    needed_held: u32,
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

impl Fit {
    /// The announced degree.
    #[must_use]
    pub fn degree(&self) -> u8 {
        self.degree.announced
    }

    /// Judges the degree after a segment closed. `may_raise` is false while the screen is locked
    /// out or the reference is suspect; what was gained until then is forgotten. At most one step
    /// up or down. With a forced degree nothing is judged.
    ///
    /// Calls between two closings change nothing: every segment (group of segments, where a window
    /// is cut finer than 64) counts once.
    pub fn decide(&mut self, may_raise: bool) -> Option<Change> {
        if self.setup.forced_degree.is_some() {
            return None;
        }
        let newest = newest_group(&self.window)?;
        if self.degree.judged.is_some_and(|judged| judged >= newest) {
            return None;
        }
        self.degree.judged = Some(newest);
        let groups = Groups::of(&self.window);
        let highest = usize::from(self.setup.max_degree).min(self.window.columns().time_degree());
        let when_full = groups.when_full;
        let judged = Judged::of(Between::of(&groups.closed, highest, false)?);
        drop(groups);
        if let Some(verdict) = self.rising(&judged, when_full, may_raise) {
            return Some(self.change(self.degree.announced + 1, &judged, verdict));
        }
        let verdict = self.falling(&judged, when_full)?;
        Some(self.change(self.degree.announced - 1, &judged, verdict))
    }

    /// Takes note of the gain of higher degrees; tells when it has lasted.
    fn rising(&mut self, judged: &Judged, when_full: f64, may_raise: bool) -> Option<Verdict> {
        let from = usize::from(self.degree.announced);
        let gain = judged
            .best_gain(self.setup.criterion, from)
            .filter(|&gain| may_raise && gain >= LEAST_GAIN);
        let gains = &mut self.degree.gains;
        let Some(gain) = gain else {
            gains.clear();
            return None;
        };
        gains.push_back(gain);
        // No longer than half a window is ever looked at.
        if gains.len() as f64 > when_full {
            gains.pop_front();
        }
        lasting(gains, when_full)
    }

    /// Takes note of whether the next lower degree is as good; tells when it has been so for long
    /// enough. A degree that the window's segments can no longer bear counts as not needed.
    fn falling(&mut self, judged: &Judged, when_full: f64) -> Option<Verdict> {
        let lower = usize::from(self.degree.announced).checked_sub(1)?;
        let gain = judged
            .best_gain(self.setup.criterion, lower)
            .unwrap_or_default();
        if gain > AS_GOOD {
            self.degree.idle = 0;
            return None;
        }
        self.degree.idle = self.degree.idle.saturating_add(1);
        let needed_held = HOLD_TO_LOWER * when_full;
        (f64::from(self.degree.idle) >= needed_held).then(|| Verdict {
            gain,
            needed: AS_GOOD,
            held: self.degree.idle,
            needed_held: whole_segments(needed_held),
        })
    }

    fn change(&mut self, to: u8, judged: &Judged, verdict: Verdict) -> Change {
        let from = self.degree.announced;
        self.degree.announced = to;
        self.degree.gains.clear();
        self.degree.idle = 0;
        Change {
            from,
            to,
            evidence: judged.evidence(&self.setup, verdict),
        }
    }
}
