//! When the announced degree is raised or lowered.
//!
//! Each time a segment closes, the between-segments problem (see `between`) is judged by the
//! channel's criterion on its effective sample size. A higher degree must be better by a gain that
//! lasts: the smaller the gain, the longer. A lower one must be as good for half a window. So noise
//! that looks like a drift for a while is waited out, and a plain drift is announced soon. Doubts
//! about the sample always count for the announced degree.
//!
//! The constants were chosen by simulation, on other seeds than those of the tests:
//! `tests/false_raises.rs` and `tests/degree_power.rs` state what they achieve.

use crate::event::{CriterionValues, Evidence};
use crate::fit::between::{Between, Groups, newest_group};
use crate::fit::correlation::{Caution, cautious, effective_sample_size};
use crate::fit::criterion::{aicc, bic};
use crate::fit::{Change, Fit};
use crate::math;
use crate::setup::{Criterion, FitSetup};
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
/// A lower degree is as good when the higher ones gain no more than this.
const AS_GOOD: f64 = 2.0;
/// A lower degree must be as good for this part of a full window.
const HOLD_TO_LOWER: f64 = 0.5;
/// Below this effective sample size a raise must convince both criteria.
const SMALL_SAMPLE: f64 = 40.0;
/// The most that a coefficient costs by `AICc`: where its correction has no meaning any more, a
/// degree must explain this much more than a gain needs.
const HIGHEST_PRICE: f64 = 5.0;
/// How cautiously r₁ is taken when a degree is judged.
pub(crate) const JUDGING: Caution = Caution {
    bias: 4.0,
    spread: 0.5,
};
/// How r₁ is taken when a degree is to be lowered.
const PLAIN: Caution = Caution {
    bias: 0.0,
    spread: 0.0,
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

    /// By how much degree `to` is better than `from` on a sample of `size`: n ln(RSS/RSS′) less the
    /// price of the coefficients. `None` where no residuals are left to compare.
    fn gain(&self, size: f64, from: usize, to: usize, price: impl Fn(f64) -> f64) -> Option<f64> {
        let (before, after) = (self.between.known_rss(from), self.between.known_rss(to));
        (after > 0.0 && before.is_finite())
            .then(|| size * math::ln(before / after) - price(size.max(1.0)))
    }

    /// The largest gain of any degree above `from`, with all doubts: on a cautious sample size, and
    /// while that is small, by the more sceptical of both criteria.
    fn cautious_gain(&self, criterion: Criterion, from: usize) -> Option<f64> {
        (from + 1..=self.between.largest)
            .filter_map(|to| {
                self.gain(self.effective, from, to, |n| match criterion {
                    _ if n < SMALL_SAMPLE => {
                        f64::max(bic_price(n, from, to), aicc_price(n, from, to))
                    }
                    Criterion::Bic => bic_price(n, from, to),
                    Criterion::Aicc => aicc_price(n, from, to),
                })
            })
            .reduce(f64::max)
    }

    /// The largest gain of any degree above `from`, without doubts: on the sample size by r₁ as it
    /// was found.
    fn plain_gain(&self, criterion: Criterion, from: usize) -> Option<f64> {
        let (segments, coefficients) = (self.between.segments, self.between.largest + 1);
        let r = cautious(self.between.lag_one, coefficients, segments, PLAIN);
        let size = effective_sample_size(segments as f64, r);
        (from + 1..=self.between.largest)
            .filter_map(|to| {
                self.gain(size, from, to, |n| match criterion {
                    Criterion::Bic => bic_price(n, from, to),
                    Criterion::Aicc => aicc_price(n, from, to),
                })
            })
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

    /// What a gain is judged by, in words: see [`Judged::cautious_gain`] and [`aicc_price`].
    fn judged_by(&self, criterion: Criterion, raises: bool) -> String {
        if raises && self.effective < SMALL_SAMPLE {
            return format!(
                "the smaller gain by BIC and by AICc, whose price is at most {HIGHEST_PRICE} per \
                 coefficient"
            );
        }
        let name = match criterion {
            Criterion::Bic => "BIC",
            Criterion::Aicc => "AICc",
        };
        name.to_owned()
    }

    fn evidence(&self, setup: &FitSetup, verdict: Verdict) -> Evidence {
        Evidence {
            criterion: self.criterion_values(setup.criterion),
            gain: verdict.gain + 0.0,
            judged_by: self.judged_by(setup.criterion, verdict.raises),
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

/// By how much BIC's penalty of degree `to` exceeds that of `from`.
fn bic_price(n: f64, from: usize, to: usize) -> f64 {
    (to - from) as f64 * math::ln(n)
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
    /// Up, not down.
    raises: bool,
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

impl Fit {
    /// The announced degree.
    #[must_use]
    pub fn degree(&self) -> u8 {
        self.degree.announced
    }

    /// Number of the newest group of closed segments that degrees are judged on; grows as groups
    /// are completed.
    #[must_use]
    pub fn newest_group(&self) -> Option<i64> {
        newest_group(&self.window)
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
            .cautious_gain(self.setup.criterion, from)
            .filter(|&gain| may_raise && gain >= LEAST_GAIN);
        let gains = &mut self.degree.gains;
        let Some(gain) = gain else {
            gains.clear();
            return None;
        };
        gains.push_back(gain);
        // No more than a window is ever looked at.
        if gains.len() as f64 > when_full {
            gains.pop_front();
        }
        lasting(gains, when_full)
    }

    /// Takes note of whether the next lower degree is as good; tells when it has been so for long
    /// enough. Doubts about the sample count for the announced degree here: a drift that has been
    /// seen is not taken back because its noise became harder to judge. A degree that the window's
    /// segments can no longer bear counts as not needed.
    fn falling(&mut self, judged: &Judged, when_full: f64) -> Option<Verdict> {
        let lower = usize::from(self.degree.announced).checked_sub(1)?;
        let gain = judged
            .plain_gain(self.setup.criterion, lower)
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
            raises: false,
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

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::Row;
    use crate::setup::{PairNoise, WindowLength};
    use crate::time::Timestamp;
    use approx::assert_relative_eq;

    const DAY: i64 = 86_400_000_000_000;

    fn fit(max_degree: u8, forced_degree: Option<u8>) -> Fit {
        Fit::new(FitSetup {
            window: WindowLength::Pairs(256),
            segments: 64,
            max_degree,
            forced_degree,
            criterion: Criterion::Bic,
            max_span_degree: None,
            influences: 0,
            noise: PairNoise::default(),
        })
    }

    /// Feeds rows first … last of an error and returns the changes with the row they came at.
    fn feed(
        fit: &mut Fit,
        rows: std::ops::Range<u32>,
        may_raise: bool,
        error: impl Fn(f64) -> f64,
    ) -> Vec<(u32, Change)> {
        let mut changes = Vec::new();
        for i in rows {
            // Fractional parts of multiples of an irrational number: noise without a generator.
            let noise = (f64::from(i) * 0.618_033_988_749_895).fract() - 0.5;
            let inserted = fit.insert(Row {
                time: Timestamp(i64::from(i) * DAY),
                error: error(f64::from(i)) + noise,
                weight: 1.0,
                x: 0.0,
                influences: [0.0; 2],
            });
            if inserted.closed {
                changes.extend(fit.decide(may_raise).map(|change| (i, change)));
                assert!(fit.decide(may_raise).is_none(), "a segment counts once");
            }
        }
        changes
    }

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

    #[test]
    fn a_curve_raises_step_by_step_and_a_quiet_time_lowers_again() {
        let mut fit = fit(2, None);
        let raised = feed(&mut fit, 0..512, true, |i| 2e-4 * i * i);
        let steps: Vec<_> = raised.iter().map(|(_, c)| (c.from, c.to)).collect();
        assert_eq!(steps, [(0, 1), (1, 2)]);
        for (_, change) in &raised {
            let evidence = &change.evidence;
            assert!(evidence.gain >= evidence.needed);
            assert!(evidence.held_segments >= evidence.needed_segments);
            assert_eq!(evidence.rss.len(), 3);
            assert_eq!(evidence.criterion.name, "BIC");
            // The evidence names what decided, which in a small sample is not BIC alone.
            assert_eq!(
                evidence.judged_by == "BIC",
                evidence.effective_sample_size >= SMALL_SAMPLE
            );
            assert!(evidence.effective_sample_size <= f64::from(evidence.segments));
        }
        let last = 2e-4 * 511.0 * 511.0;
        let lowered = feed(&mut fit, 512..1536, true, |_| last);
        assert!(lowered.iter().all(|(_, c)| c.to < c.from), "{lowered:?}");
        assert_eq!(fit.degree(), 0);
    }

    #[test]
    fn nothing_is_raised_where_it_may_not_be() {
        let steep = |i: f64| 0.1 * i;
        let mut locked = fit(2, None);
        assert!(feed(&mut locked, 0..256, false, steep).is_empty());
        // What was gained meanwhile doesn't count: a quarter of a window must pass.
        let raised = feed(&mut locked, 256..512, true, steep);
        assert!(raised[0].0 >= 256 + 60, "{}", raised[0].0);
        assert!(
            feed(&mut fit(0, None), 0..512, true, steep).is_empty(),
            "maximum 0"
        );
        let mut forced = fit(2, Some(1));
        assert!(feed(&mut forced, 0..512, true, |_| 0.0).is_empty());
        assert_eq!(forced.degree(), 1);
    }

    /// Rounding is not noise: a drift without any is one line, whatever the last digits do.
    #[test]
    fn a_line_without_noise_stays_a_line() {
        for (level, slope) in [(0.0, 0.1), (1e6, 0.3), (20.0, 0.0)] {
            let mut fit = fit(2, None);
            for i in 0..1024_u32 {
                let error = level + slope * f64::from(i);
                let time = Timestamp(i64::from(i) * DAY);
                let row = Row {
                    time,
                    error,
                    weight: 1.0,
                    x: 0.0,
                    influences: [0.0; 2],
                };
                if fit.insert(row).closed {
                    fit.decide(true);
                }
            }
            assert_eq!(fit.degree(), u8::from(slope > 0.0), "{level} + {slope}t");
        }
    }

    /// A window cut finer than 64 is judged on 64 groups: one row per segment is an exact sliding
    /// window and decides like 16 rows per segment.
    #[test]
    fn finer_segments_decide_alike() {
        let raised_at = |segments| {
            let mut fit = Fit::new(FitSetup {
                window: WindowLength::Pairs(1024),
                segments,
                max_degree: 2,
                forced_degree: None,
                criterion: Criterion::Bic,
                max_span_degree: None,
                influences: 0,
                noise: PairNoise::default(),
            });
            let changes = feed(&mut fit, 0..2048, true, |i| 1e-6 * i * i);
            changes
                .into_iter()
                .map(|(i, change)| (i, change.to))
                .collect::<Vec<_>>()
        };
        let coarse = raised_at(64);
        assert_eq!(coarse.len(), 2, "{coarse:?}");
        assert_eq!(raised_at(1024), coarse);
    }
}
