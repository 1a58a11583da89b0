//! When the announced model changes.
//!
//! Each time a segment closes, the between-segments problem (see `between`) is judged by the
//! channel's criterion on its effective sample size, and each term climbs or descends (see
//! `climb`): the degree of the zero, and where they are configured the span terms and influence
//! quantities (see `claim`).

use crate::fit::basis::Columns;
use crate::fit::between::newest_group;
use crate::fit::claim::{self, Claims};
use crate::fit::climb::{Climb, Verdict};
use crate::fit::gain::Contest;
use crate::fit::{Change, Fit, Term};
use serde::{Deserialize, Serialize};

/// The announced model and what is on its way to change it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Announced {
    /// The degree of the zero.
    pub(crate) zero: Climb,
    /// Span terms and influence quantities.
    pub(crate) claims: Claims,
    /// Newest group of segments that was judged; `None` before the first.
    judged: Option<i64>,
}

impl Announced {
    pub(crate) fn new(degree: u8, columns: Columns) -> Self {
        Self {
            zero: Climb::at(degree),
            claims: Claims::new(columns),
            judged: None,
        }
    }

    /// Rows were taken out of the window, whose newest complete group now is `newest`. If groups
    /// that were judged went with them, what was gained by them is forgotten, and those that take
    /// their place are judged in turn.
    pub(crate) fn go_back(&mut self, newest: Option<i64>) {
        if newest < self.judged {
            self.judged = newest;
            self.zero.forget_runs();
            self.claims.forget_runs();
        }
    }
}

impl Fit {
    /// The announced degree.
    #[must_use]
    pub fn degree(&self) -> u8 {
        self.announced.zero.announced
    }

    /// Number of the newest group of closed segments that degrees are judged on; grows as groups
    /// are completed.
    #[must_use]
    pub fn newest_group(&self) -> Option<i64> {
        newest_group(&self.window)
    }

    /// Judges the announced model after a segment closed. `may_raise` is false while the screen is
    /// locked out or the reference is suspect; what was gained until then is forgotten. At most one
    /// term changes, by one grade. A forced degree is not judged.
    ///
    /// Calls between two closings change nothing: every segment (group of segments, where a window
    /// is cut finer than 64) counts once.
    pub fn decide(&mut self, may_raise: bool) -> Option<Change> {
        let is_time_only = self.window.columns().is_time_only();
        if self.setup.forced_degree.is_some() && is_time_only {
            return None;
        }
        let newest = newest_group(&self.window)?;
        if self.announced.judged.is_some_and(|judged| judged >= newest) {
            return None;
        }
        self.announced.judged = Some(newest);
        if !is_time_only {
            return claim::decide(self, may_raise);
        }
        let settled = self.settled();
        let when_full = settled.when_full;
        let contest = Contest::of(settled.between.as_ref()?);
        let verdict =
            self.announced
                .zero
                .note(&contest, self.setup.criterion, when_full, may_raise)?;
        Some(self.change_degree(&contest, verdict))
    }

    /// Carries a verdict on the degree of the zero out.
    pub(crate) fn change_degree(&mut self, contest: &Contest, verdict: Verdict) -> Change {
        let announced = self.announced.zero.announced;
        let to = if verdict.raises {
            announced + 1
        } else {
            announced.saturating_sub(1)
        };
        Change {
            term: Term::Zero,
            from: self.announced.zero.move_to(to),
            to,
            evidence: contest.evidence(self.setup.criterion, verdict),
            refused: None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::Row;
    use crate::fit::gain::SMALL_SAMPLE;
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};
    use crate::time::Timestamp;

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
