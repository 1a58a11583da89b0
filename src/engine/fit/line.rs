//! The straight line of recent pairs that forecasts rest on.
//!
//! u² of a polynomial grows ahead of its window as `(1/n) Σ (2j+1) P_j(1+2f)²`, f in windows: one
//! window ahead 7-fold for a line, 97-fold for a parabola. So a forecast takes degree 1 whatever is
//! published: over the whole window where at most a line is announced, over its newest quarter
//! where a curve is. The covariance is made as that of the published mean: from the scatter of
//! segment means about the line, inflated by their correlation. A curve that the line does not
//! follow widens both.

use crate::fit::Fit;
use crate::fit::between::{Between, Groups};
use crate::fit::forecast::Line;
use crate::fit::mean::{Scatter, reweighted};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// Where a curve is announced, the line takes the newest 1/this of the segments: a parabola departs
/// from its tangent by 1/16 there of what it does over the window …
const NEWEST_PART: usize = 4;
/// … but no fewer than a line needs (4 segments per coefficient, as for the announced degree).
const LEAST_SEGMENTS: usize = 8;

/// Which pairs a line rests on.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Basis {
    /// All of the window: at most a line is announced.
    Window,
    /// The newest part of it: a curve is announced.
    NewestPart,
}

/// The line of recent pairs, its covariance, and what it rests on.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct RecentLine {
    /// Zero of its time: the newest pair.
    pub origin: Timestamp,
    /// The oldest pair that it rests on.
    pub from: Timestamp,
    /// The line, t in days from `origin`.
    pub line: Line,
    /// Degrees of freedom behind its covariance.
    pub degrees_of_freedom: f64,
    /// Which pairs it rests on.
    pub basis: Basis,
    /// Segments that it rests on.
    pub segments: u32,
    /// How many segments the whole window would hold when full, at this cadence.
    pub segments_when_full: f64,
    /// Standard deviation of a segment's mean about the line, in the unit of the error.
    pub segment_sd: f64,
    /// The lag-1 correlation of segments that is counted with, 0 … 0.9.
    pub correlation: f64,
}

impl RecentLine {
    /// How far back the line reaches, and so how far ahead it is followed: there u of the line
    /// alone is √7 = 2.6 times that at the newest pair.
    #[must_use]
    pub fn length(&self) -> Duration {
        self.origin.since(self.from)
    }

    /// Whether every number in it can be held.
    #[must_use]
    pub fn is_finite(&self) -> bool {
        let Line {
            level,
            slope,
            level_variance,
            covariance,
            slope_variance,
        } = self.line;
        let numbers = [
            level,
            slope,
            level_variance,
            covariance,
            slope_variance,
            self.segment_sd,
        ];
        numbers.iter().all(|number| number.is_finite())
    }
}

impl Fit {
    /// The line of recent pairs, with the variance of a row of weight 1 taken as at least
    /// `row_variance` (what was declared of noise and reference). `None` before there are 8 closed
    /// segments, where the configuration permits no line, or if the pairs stand at one time.
    #[must_use]
    pub fn recent_line(&self, row_variance: f64) -> Option<RecentLine> {
        if self.window.columns().time_degree() == 0 {
            return None;
        }
        let origin = self.window.newest()?;
        let mut groups = Groups::of(&self.window);
        let when_full = groups.when_full;
        let basis = if self.degree() < 2 {
            Basis::Window
        } else {
            let count = groups.closed.len();
            let taken = (count / NEWEST_PART).max(LEAST_SEGMENTS);
            groups.closed.drain(..count.saturating_sub(taken));
            Basis::NewestPart
        };
        let between = Between::of(&groups.closed, 1, false).filter(|it| it.largest == 1)?;
        let scatter = Scatter::of(&between)?.at_least(row_variance);
        let from = groups.closed.iter().map(|group| group.first).min()?;
        let weight: f64 = groups.closed.iter().map(|it| it.factor.weight_sum()).sum();
        let (mut factor, level) = reweighted(&groups, Some(&between))?;
        self.count_days_from(origin, &mut factor);
        let mut line = Line::through(&factor, scatter.variance * scatter.inflation)?;
        line.level += level;
        let segments = between.segments;
        Some(RecentLine {
            origin,
            from,
            line,
            degrees_of_freedom: scatter.degrees_of_freedom,
            basis,
            segments: u32::try_from(segments).unwrap_or(u32::MAX),
            segments_when_full: when_full,
            segment_sd: (scatter.variance * segments as f64 / weight).sqrt(),
            correlation: (scatter.inflation - 1.0) / (scatter.inflation + 1.0),
        })
    }
}
