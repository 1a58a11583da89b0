//! What the closed segments of a window say, found when first asked for and kept until they change:
//! between two closings only the open segment brings news, and what it changes in the published
//! mean takes one merge.

use crate::event::CriterionValues;
use crate::fit::Fit;
use crate::fit::between::{Between, Groups};
use crate::fit::factor::Factor;
use crate::fit::gain::Contest;
use crate::fit::mean::{Scatter, closed_rows};
use crate::fit::seen::Seen;
use crate::fit::turn::Turn;
use crate::fit::weights::{Rival, Weights};

/// What the closed segments say of the degree.
#[derive(Debug)]
pub(crate) struct Settled {
    /// The between-segments problem; `None` where there is none yet.
    pub(crate) between: Option<Between>,
    /// Groups of closed segments.
    pub(crate) segments: usize,
    /// How many a full window would hold, see [`Groups::when_full`].
    pub(crate) when_full: f64,
    /// The levels and influence quantities of their rows.
    pub(crate) seen: Seen,
}

/// Their part in the mean over degrees.
#[derive(Debug)]
pub(crate) struct ClosedMean {
    /// Their rows, each group weighted, with the level of the errors.
    pub(super) rows: Option<(Factor, f64)>,
    /// `None`: they say nothing of it yet.
    pub(super) scatter: Option<Scatter>,
    /// Of the degrees that they bear; `None` while that is none, or with a forced one.
    pub(super) weights: Option<Weights>,
    /// Drifts that turned within the window.
    pub(super) turns: Vec<Turn>,
    /// The criterion per degree.
    pub(super) criterion: CriterionValues,
}

impl Fit {
    pub(crate) fn settled(&self) -> &Settled {
        self.settled.get_or_find(|| {
            let groups = Groups::of(&self.window);
            let forced = self.setup.forced_degree.is_some();
            Settled {
                between: Between::of(&groups.closed, self.highest_degree(), forced),
                segments: groups.closed.len(),
                when_full: groups.when_full,
                seen: self.window.seen_closed(),
            }
        })
    }

    pub(super) fn closed_mean(&self) -> &ClosedMean {
        self.closed_mean.get_or_find(|| {
            let between = self.settled().between.as_ref();
            let mut found = ClosedMean {
                rows: closed_rows(&Groups::of(&self.window).closed, between),
                scatter: between.and_then(Scatter::of),
                weights: None,
                turns: Vec::new(),
                criterion: CriterionValues::default(),
            };
            if let (Some(between), None) = (between, self.setup.forced_degree) {
                found.weigh(between);
                found.criterion = Contest::of(between).criterion_values(self.setup.criterion);
            }
            found
        })
    }

    /// The closed segments have changed, or what is asked of them.
    pub(crate) fn unsettle(&mut self) {
        self.settled.forget();
        self.closed_mean.forget();
    }
}

impl ClosedMean {
    /// Weighs degrees and turns, as far as the scatter is known.
    fn weigh(&mut self, between: &Between) {
        let Some(scatter) = self.scatter else { return };
        let rival = |degree| Rival {
            rss: between.grades.known(degree),
            coefficients: degree + 1,
        };
        let rivals: Vec<Rival> = (0..=between.largest).map(rival).collect();
        let weights = Weights::of(&rivals, scatter.effective);
        self.turns = between.turns(scatter.effective, &weights.logarithms);
        self.weights = Some(weights);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::Row;
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};
    use crate::time::{Duration, Timestamp};
    use rand_chacha::ChaCha8Rng;
    use rand_chacha::rand_core::SeedableRng as _;
    use rand_distr::{Distribution as _, StandardNormal};

    fn fit(window: WindowLength, segments: u32, forced: Option<u8>, terms: bool) -> Fit {
        Fit::new(FitSetup {
            window,
            segments,
            max_degree: 2,
            forced_degree: forced,
            criterion: Criterion::Bic,
            max_span_degree: terms.then_some(1),
            influences: u8::from(terms),
            noise: PairNoise {
                reference: 0.05,
                indication: 1.0,
            },
        })
    }

    /// All that is said of the window, to the last digit.
    fn said(fit: &Fit) -> String {
        let (published, line) = (fit.published_at_least(1e-4), fit.recent_line(1e-4, 20.0));
        format!("{published:?} {line:?}")
    }

    /// Rows a minute apart on a drift that bends, with gaps, late rows and a jump.
    fn rows(seed: u64, count: i64) -> Vec<Row> {
        let mut source = ChaCha8Rng::seed_from_u64(seed);
        let mut normal = || -> f64 { StandardNormal.sample(&mut source) };
        let mut minute = 0;
        (0..count)
            .map(|place| {
                minute += match place % 157 {
                    91 => 90,
                    92 => 1,
                    _ => 1 + i64::from(normal() > 1.0),
                };
                let late = if place % 23 == 7 { 5 + place % 41 } else { 0 };
                let t = minute as f64 / 100.0;
                let (x, warmth) = (20.0 + 3.0 * normal(), 15.0 + normal());
                let jump = if place > 700 { 1e4 } else { 0.0 };
                Row {
                    time: Timestamp(60_000_000_000 * (minute - late)),
                    error: normal() + t * t - 0.2 * x + 0.3 * warmth + jump,
                    weight: 1.0 + 0.5 * normal().abs(),
                    x,
                    influences: [warmth, 0.0],
                }
            })
            .collect()
    }

    /// What is kept changes no bit: at every row a fit that keeps says what its copy says, which
    /// finds everything anew, and so does the fit as it was before some instant.
    #[test]
    fn what_is_kept_is_what_would_be_found_anew() {
        let hour = |count: i64| WindowLength::Time(Duration::from_seconds(3600 * count));
        let cases = [
            (hour(4), 16, None, false),
            (hour(4), 100, None, false),
            (hour(6), 24, Some(1), false),
            (WindowLength::Pairs(128), 32, None, false),
            (WindowLength::Pairs(100), 100, None, false),
            (hour(8), 32, None, true),
            (WindowLength::Pairs(128), 32, None, true),
        ];
        for (seed, (window, segments, forced, terms)) in (7000..).zip(cases) {
            let mut kept = fit(window, segments, forced, terms);
            let (mut changes, mut claimed) = (0, false);
            for (place, row) in rows(seed, 900).into_iter().enumerate() {
                if kept.insert(row).closed {
                    changes += u32::from(kept.decide(true).is_some());
                }
                claimed |= !kept.model().is_zero_only();
                assert_eq!(said(&kept), said(&kept.clone()), "case {seed}, row {place}");
                if place == 450 {
                    let instant = row.time.minus(Duration::from_seconds(3000));
                    kept = kept.before(instant).0;
                    assert_eq!(said(&kept), said(&kept.clone()), "case {seed}, gone back");
                }
            }
            assert!(
                changes > 0 || forced.is_some(),
                "case {seed}: a model changed"
            );
            assert_eq!(claimed, terms, "case {seed}");
        }
    }

    /// What noise the level has counts where a span is claimed.
    #[test]
    fn an_edit_is_heeded_at_once() {
        let mut edited = fit(WindowLength::Pairs(256), 32, None, true);
        for row in rows(7100, 700) {
            if edited.insert(row).closed {
                edited.decide(true);
            }
        }
        assert!(edited.model().span.is_some());
        let before = said(&edited);
        let mut setup = edited.setup;
        setup.noise.reference = 0.5;
        edited.edit(setup);
        assert_ne!(said(&edited), before);
        assert_eq!(said(&edited), said(&edited.clone()));
    }
}
