//! A chart of what all channels of a reference have in common: the median over them of their
//! standardised innovations, one score per round. A step of the reference by Δ moves every channel
//! by −Δ at once, and so moves the median far out of its own noise, however small it is beside that
//! of one channel.
//!
//! The scores' scale is their own, robust and about zero, since channels may share weather; never
//! less than that of a median of independent normal values. Where they are correlated from round to
//! round the chart looks at what the last one does not explain. Two cumulative sums (Page 1954)
//! with reference value [`SLACK`] and limit [`LIMIT`], each score counted up to [`CAP`], so that no
//! single one can reach the limit. In white noise that is one false alarm in some 3·10⁶ rounds
//! (Siegmund 1985: (exp(2kb) − 1 − 2kb)/2k², b = h + 1.166, for each side).

use crate::channel::MAD_TO_SD;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Scores that the scale is learned from.
const RECENT: usize = 128;
/// Fewest of them; before, one channel's own standard deviation stands for it, which contains what
/// channels share.
const ENOUGH: usize = 16;
/// Correlation is not taken to be stronger than this.
const MOST_CORRELATED: f64 = 0.95;
/// Standard deviation of the median of m normal values: this over √m (asymptotic; 7 % too large at
/// m = 3).
const MEDIAN_SD: f64 = 1.253_314_137_315_5;
/// What a sum forgives per round, in standard deviations.
const SLACK: f64 = 1.0;
/// From here on the channels' pairs wait …
const DOUBT: f64 = 3.5;
/// … and here the reference is no longer trusted.
const LIMIT: f64 = 7.0;
/// Most that one score counts for.
const CAP: f64 = LIMIT + SLACK - 0.5;
/// The score before a round tells of the next at most this much: an outlier tells nothing.
const TELLING: f64 = 3.0;
/// Rounds of an excursion that are remembered, to tell a step from a drift.
const REMEMBERED: usize = 64;
/// Fewest rounds in which a drift can be told from a step.
const LONG: usize = 6;

/// The state of the chart.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Chart {
    /// Scores of trusted rounds, in order.
    recent: VecDeque<f64>,
    /// The score before; zero before there is one.
    last: f64,
    up: Sum,
    down: Sum,
}

/// A sum of what lies to one side.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Sum {
    size: f64,
    /// The last score counted in full.
    capped: bool,
    /// The number of the round at which it left zero.
    began: u64,
    /// Scores since then, to this side.
    scores: VecDeque<f64>,
}

/// What the chart says of a round.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Said {
    /// Nothing.
    Calm,
    /// There may have been a step.
    Doubt,
    /// There was one, in the round of this number.
    Stepped(u64),
}

impl Chart {
    /// Takes a round's score, the median of `channels` standardised innovations. `may_drift`:
    /// whether growing scores may be a drift of the channels.
    pub(super) fn judge(
        &mut self,
        round: u64,
        score: f64,
        channels: usize,
        may_drift: bool,
    ) -> Said {
        let correlation = self.correlation();
        let rest = (1.0 - correlation * correlation).sqrt();
        let scale = self.scale(channels);
        let last = self.last.clamp(-TELLING * scale, TELLING * scale);
        let news = (score - correlation * last) / (rest * scale);
        self.last = score;
        self.up.take(round, news, score);
        self.down.take(round, 0.0 - news, 0.0 - score);
        let sums = [&mut self.up, &mut self.down];
        let mut said = Said::Calm;
        for sum in sums {
            if sum.size >= LIMIT && may_drift && sum.is_drift() {
                // Its scores are kept: a drift that goes on is measured by how it began.
                sum.size = 0.0;
            } else if sum.size >= LIMIT {
                return Said::Stepped(sum.began);
            } else if sum.size >= DOUBT {
                said = Said::Doubt;
            }
        }
        said
    }

    /// Learns the score of a round that is trusted.
    pub(super) fn learn(&mut self, score: f64) {
        self.recent.push_back(score);
        if self.recent.len() > RECENT {
            self.recent.pop_front();
        }
    }

    /// The sums begin anew.
    pub(super) fn settle(&mut self) {
        self.up = Sum::default();
        self.down = Sum::default();
        self.last = 0.0;
    }

    /// Standard deviation of a trusted score, widened by what is not known about it.
    pub(super) fn scale(&self, channels: usize) -> f64 {
        let least = MEDIAN_SD / (channels.max(1) as f64).sqrt();
        if self.recent.len() < ENOUGH {
            return 1.5 * least.max(1.0);
        }
        let mut sizes: Vec<f64> = self.recent.iter().map(|score| score.abs()).collect();
        let half = sizes.len() / 2;
        let median = *sizes.select_nth_unstable_by(half, f64::total_cmp).1;
        let correlation = self.correlation();
        let independent = self.recent.len() as f64 * (1.0 - correlation) / (1.0 + correlation);
        // Twice the relative standard error of a robust scale, about 1.2/√n.
        let widened = 1.0 + 2.0 / independent.max(1.0).sqrt();
        widened * least.max(MAD_TO_SD * median)
    }

    /// Lag-1 correlation of the scores about zero, not below zero.
    fn correlation(&self) -> f64 {
        if self.recent.len() < ENOUGH {
            return 0.0;
        }
        let squares: f64 = self.recent.iter().map(|score| score * score).sum();
        let after = self.recent.iter().skip(1);
        let lagged: f64 = self.recent.iter().zip(after).map(|(a, b)| a * b).sum();
        if squares > 0.0 {
            (lagged / squares).clamp(0.0, MOST_CORRELATED)
        } else {
            0.0
        }
    }
}

impl Sum {
    fn take(&mut self, round: u64, news: f64, score: f64) {
        // An outlier alone, and back again: nothing remains of it.
        let over = self.capped && self.scores.back().is_some_and(|last| score < 0.5 * last);
        let first = !self.capped;
        self.capped = news >= CAP;
        self.size = (self.size + news.min(CAP) - SLACK).max(0.0);
        if self.capped && first {
            // Whatever was there before, no single score reaches the limit.
            self.size = self.size.min(CAP - SLACK);
        }
        if over || self.size <= 0.0 {
            self.size = 0.0;
            self.scores.clear();
            return;
        }
        if self.scores.is_empty() {
            self.began = round;
        }
        self.scores.push_back(score);
        if self.scores.len() > REMEMBERED {
            self.scores.pop_front();
        }
    }

    /// Whether the scores grow along a line rather than standing on two levels: a drift that all
    /// channels share, which their fits follow, begins small; a step is there at once, maybe after
    /// a few scores that chance had brought to its side.
    fn is_drift(&self) -> bool {
        self.scores.len() >= LONG && about_line(&self.scores) < about_two_levels(&self.scores)
    }
}

/// Sum of squares about the straight line of least squares; infinite where the line falls.
fn about_line(scores: &VecDeque<f64>) -> f64 {
    let n = scores.len() as f64;
    let centre = 0.5 * (n - 1.0);
    let mean = scores.iter().sum::<f64>() / n;
    let mut products = 0.0;
    let mut squares = 0.0;
    for (place, score) in scores.iter().enumerate() {
        let place = place as f64 - centre;
        products += place * (score - mean);
        squares += place * place;
    }
    if products <= 0.0 {
        return f64::INFINITY;
    }
    about_level(scores.iter().copied()) - products * products / squares
}

/// Least sum of squares about one level up to some score and another from there on.
fn about_two_levels(scores: &VecDeque<f64>) -> f64 {
    (0..scores.len())
        .map(|split| {
            let before = about_level(scores.range(..split).copied());
            before + about_level(scores.range(split..).copied())
        })
        .fold(f64::INFINITY, f64::min)
}

/// Sum of squares about the mean.
fn about_level(scores: impl Iterator<Item = f64> + Clone) -> f64 {
    let count = scores.clone().count().max(1) as f64;
    let mean = scores.clone().sum::<f64>() / count;
    scores.map(|score| (score - mean) * (score - mean)).sum()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A chart that has learned scores of ±1 from 20 channels' worth of weather.
    fn seasoned() -> Chart {
        let mut chart = Chart::default();
        for index in 0..RECENT {
            let score = if index % 3 == 0 { 1.0 } else { -0.5 };
            chart.learn(score);
        }
        chart
    }

    #[test]
    fn one_score_is_an_outlier_and_two_are_a_step() {
        let mut chart = seasoned();
        assert_eq!(chart.judge(1, 0.3, 20, true), Said::Calm);
        assert_eq!(chart.judge(2, 40.0, 20, true), Said::Doubt);
        assert_eq!(chart.judge(3, 0.3, 20, true), Said::Calm);
        assert_eq!(chart.judge(4, -40.0, 20, true), Said::Doubt);
        assert_eq!(chart.judge(5, -39.0, 20, true), Said::Stepped(4));
    }

    #[test]
    fn the_scale_is_never_less_than_that_of_a_median_of_independent_values() {
        let mut chart = Chart::default();
        assert!((chart.scale(100) - 1.5).abs() < 1e-12, "nothing learned");
        for _ in 0..RECENT {
            chart.learn(0.0);
        }
        let least = MEDIAN_SD / 10.0;
        let widened = 1.0 + 2.0 / (RECENT as f64).sqrt();
        assert!((chart.scale(100) - least * widened).abs() < 1e-12);
    }

    #[test]
    fn what_grows_is_a_drift_of_all_and_no_step() {
        let mut chart = seasoned();
        let scale = chart.scale(20);
        let mut doubts = 0;
        for round in 1..12_u32 {
            let said = chart.judge(u64::from(round), 0.6 * scale * f64::from(round), 20, true);
            assert!(!matches!(said, Said::Stepped(_)), "round {round}");
            doubts += u32::from(said == Said::Doubt);
        }
        assert!(doubts > 0, "it was looked at");
    }
}
