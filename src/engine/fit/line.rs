//! The straight line of recent pairs that forecasts rest on.
//!
//! u² of a polynomial grows ahead of its window as `(1/n) Σ (2j+1) P_j(1+2f)²`, f in windows: one
//! window ahead 7-fold for a line, 97-fold for a parabola. So a forecast takes degree 1 whatever is
//! published: over the whole window where at most a line is announced, over its newest quarter
//! where a curve is. The covariance is made as that of the published mean: from the scatter of
//! segment means about the line, inflated by their correlation. A curve that the line does not
//! follow widens both.
//!
//! Where span terms or influence quantities are claimed, they are fitted beside the line, which is
//! then that of the level judged, with influence quantities at their centres: what a season's
//! temperature explains is no drift.

use crate::fit::between::{Between, Groups};
use crate::fit::blend::weighted;
use crate::fit::forecast::Line;
use crate::fit::joint::Joint;
use crate::fit::mean::{PUBLISHING, Scatter, reweighted};
use crate::fit::{Centre, Fit, Model};
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

/// A line with what it was found by.
struct Found {
    line: Line,
    scatter: Scatter,
    segments: usize,
}

impl Fit {
    /// The line of recent pairs at `level` (where a span is claimed), with the variance of a row of
    /// weight 1 taken as at least `row_variance` (what was declared of noise and reference). `None`
    /// before there are 8 closed segments, where the configuration permits no line (a highest or
    /// forced degree of 0), if the pairs stand at one time, or if the pairs that it would rest on
    /// can't tell the claimed terms.
    #[must_use]
    pub fn recent_line(&self, row_variance: f64, level: f64) -> Option<RecentLine> {
        if self.highest_degree() == 0 {
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
        let Found {
            line,
            scatter,
            segments,
        } = if self.model().is_zero_only() {
            self.plain_line(&groups, origin, row_variance)?
        } else {
            self.line_beside_terms(&groups, origin, row_variance, level)?
        };
        let from = groups.closed.iter().map(|group| group.first).min()?;
        let weight: f64 = groups.closed.iter().map(|it| it.factor.weight_sum()).sum();
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

    /// The line alone.
    fn plain_line(
        &self,
        groups: &Groups<'_>,
        origin: Timestamp,
        row_variance: f64,
    ) -> Option<Found> {
        let between = Between::of(&groups.closed, 1, false).filter(|it| it.largest == 1)?;
        let scatter = Scatter::of(&between)?.at_least(row_variance);
        let (mut factor, level) = reweighted(groups, Some(&between))?;
        self.count_days_from(origin, &mut factor);
        let mut line = Line::through(&factor, scatter.variance * scatter.inflation)?;
        line.level += level;
        Some(Found {
            line,
            scatter,
            segments: between.segments,
        })
    }

    /// The line beside the claimed terms, x counted from `level`. A claimed span moves along a line
    /// as well.
    fn line_beside_terms(
        &self,
        groups: &Groups<'_>,
        origin: Timestamp,
        row_variance: f64,
        level: f64,
    ) -> Option<Found> {
        let columns = self.window.columns();
        let announced = self.model();
        let model = Model {
            degree: 1,
            span: announced.span.map(|degree| degree.min(1)),
            ..announced
        };
        let joint =
            Joint::of(&groups.closed, columns, model, false).filter(|it| holds(it, model))?;
        let worth = joint.worth(PUBLISHING);
        let scatter = Scatter::of_joint(&joint, worth).at_least(row_variance);
        let (mut factor, errors_from) = weighted(groups, &joint, columns, worth)?;
        self.count_days_from(origin, &mut factor);
        let shift = Centre {
            x: level - self.window.centre().x,
            ..Centre::default()
        };
        columns.move_centre(&mut factor, shift);
        let chosen = factor.choose(&model.places(columns));
        let variance = scatter.variance * scatter.inflation;
        let mut line = Line::among(&chosen, chosen.columns(), variance)?;
        line.level += errors_from;
        if model.span.is_some() {
            // Noise in the level turns the span about the mean level.
            let mean = factor
                .mean_row()
                .map_or(0.0, |row| row[columns.span_place(0)]);
            let doubt = self.noise_share(&joint, worth) * mean;
            line = line.with_common(doubt * doubt);
        }
        Some(Found {
            line,
            scatter,
            segments: joint.segments(),
        })
    }
}

/// Whether a problem has all terms of a model.
fn holds(joint: &Joint, model: Model) -> bool {
    let mut influences = model.influences.into_iter().enumerate();
    usize::from(model.degree) <= joint.largest
        && model.span_terms() <= joint.span_columns()
        && influences.all(|(j, is_used)| !is_used || joint.has_influence(j))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::Row;
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};

    const DAY: i64 = 86_400_000_000_000;

    fn fit(forced_degree: Option<u8>) -> Fit {
        Fit::new(FitSetup {
            window: WindowLength::Pairs(512),
            segments: 64,
            max_degree: 2,
            forced_degree,
            criterion: Criterion::Bic,
            max_span_degree: Some(1),
            influences: 1,
            noise: PairNoise {
                reference: 0.001,
                indication: 0.1,
            },
        })
    }

    /// A number between −½ and ½: fractional parts of multiples of irrational numbers.
    fn scatter(day: u32, ratio: f64) -> f64 {
        (f64::from(day) * ratio).fract() - 0.5
    }

    /// Days, level and temperature to error.
    type Plant = fn(f64, f64, f64) -> f64;

    /// The fit after 512 days at levels of 15 to 25, the temperature rising all the while.
    fn observed(forced_degree: Option<u8>, plant: Plant) -> Fit {
        let mut fit = fit(forced_degree);
        for day in 0..512_u32 {
            let level = 20.0 + 10.0 * scatter(day, 0.754_877_666_246_693);
            let warmth = 0.02 * f64::from(day) + 4.0 * scatter(day, 0.569_840_290_998_053);
            let noise = 0.3 * scatter(day, 0.618_033_988_749_895);
            fit.insert(Row {
                time: Timestamp(i64::from(day) * DAY),
                error: plant(f64::from(day), level, warmth) + noise,
                weight: 1.0,
                x: level,
                influences: [warmth, 0.0],
            });
            fit.decide(true);
        }
        fit
    }

    #[test]
    fn what_the_temperature_explains_is_no_drift() {
        let fit = observed(None, |_, _, warmth| 0.5 * warmth);
        assert!(fit.model().influences[0], "claimed");
        let line = fit.recent_line(0.0, 20.0).expect("64 segments").line;
        // The temperature alone would make it drift by 0.01 a day.
        assert!(line.slope.abs() < 4.0 * line.slope_variance.sqrt());
        assert!(line.slope_variance.sqrt() < 1e-3, "{line:?}");
        // At the centre of the temperature, wherever that is.
        let centre = fit.window().centre().influences[0];
        let u = line.uncertainty_at(0.0);
        assert!(
            (line.level - 0.5 * centre).abs() < 4.0 * u && u < 0.2,
            "{line:?}"
        );
    }

    #[test]
    fn a_fading_span_drifts_by_the_level_judged() {
        let fit = observed(None, |day, level, _| -1e-4 * day * (level - 20.0));
        assert_eq!(fit.model().span, Some(1), "claimed with its drift");
        for (level, rate) in [(15.0, 5e-4), (20.0, 0.0), (25.0, -5e-4)] {
            let line = fit.recent_line(0.0, level).expect("64 segments").line;
            let u = line.slope_variance.sqrt();
            assert!(
                (line.slope - rate).abs() < 4.0 * u && u < 2e-4,
                "{level}: {line:?}"
            );
            let now = rate * 511.0;
            let u = line.uncertainty_at(0.0);
            assert!(
                (line.level - now).abs() < 4.0 * u && u < 0.05,
                "{level}: {line:?}"
            );
        }
    }

    #[test]
    fn a_forced_degree_of_zero_permits_no_line() {
        let plant: Plant = |day, _, _| 0.01 * day;
        assert!(observed(Some(0), plant).recent_line(0.0, 20.0).is_none());
        assert!(observed(Some(1), plant).recent_line(0.0, 20.0).is_some());
    }
}
