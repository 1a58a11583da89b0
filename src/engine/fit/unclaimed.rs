//! What terms that are not claimed yet add to the uncertainty.
//!
//! A span or an influence quantity is announced only once its gain has lasted, and until then the
//! correction leaves it out, as it must. But it may be there all the same: the models that have it
//! compete for u², as degrees that are not announced do, by the same weights (see `weights`). Since
//! a correction without the term can't say where it matters, what counts is the end of what the
//! window has seen at which they disagree most with ê. A span that is refused does not compete:
//! what nothing tells from noise says nothing about u either.
//!
//! It is found as segments close, like the claims themselves, and stands until the next one does.

use crate::fit::Fit;
use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::between::Groups;
use crate::fit::blend::{models, weighted};
use crate::fit::factor::Factor;
use crate::fit::joint::Joint;
use crate::fit::mean::PUBLISHING;
use crate::fit::model::Model;
use crate::fit::weights::{Rival, Weights};

/// A level and influence quantities.
type End = (f64, [f64; MAX_INFLUENCES]);

impl Fit {
    /// `Σ v_m (ê_m − ê)²` over the models with a term that is not claimed, ê the published mean, at
    /// the newest pair and the worst end of what was seen; in the unit of the errors squared. Zero
    /// with a forced degree, which is taken at its word.
    pub(crate) fn unclaimed_variance(&self, joint: &Joint) -> f64 {
        let found = self.disagreement(joint);
        found.filter(|found| found.is_finite()).unwrap_or(0.0) + 0.0
    }

    fn disagreement(&self, joint: &Joint) -> Option<f64> {
        let columns = self.window.columns();
        if self.setup.forced_degree.is_some() || !self.has_unclaimed(self.richest()) {
            return None;
        }
        let groups = Groups::of(&self.window);
        let published = self.mean(0.0)?;
        let spans = match self.announced.claims.refused {
            None => joint.span_columns(),
            Some(_) => 0,
        };
        let models = models(0, joint, spans, [true; MAX_INFLUENCES]);
        let worth = joint.worth(PUBLISHING);
        let known = joint.known_rss(&models, worth);
        let rival = |(model, rss): (&Model, f64)| Rival {
            rss,
            coefficients: model.places(columns).len(),
        };
        let rivals: Vec<Rival> = models.iter().zip(known).map(rival).collect();
        let weights = Weights::of(&rivals, worth.effective);
        let (mut factor, level) = weighted(&groups, joint, columns, worth)?;
        self.count_days_from(published.origin, &mut factor);
        let unclaimed: Vec<(Model, f64)> = models
            .into_iter()
            .zip(weights.spread)
            .filter(|(model, _)| self.has_unclaimed(*model))
            .collect();
        let at_end = |end: End| {
            let mean = published.evaluate(published.origin, end.0, end.1).0;
            let squares = unclaimed.iter().filter_map(|(model, share)| {
                let apart = level + self.expected(*model, &factor, end)? - mean;
                Some(share * apart * apart)
            });
            squares.sum::<f64>()
        };
        self.ends().into_iter().map(at_end).reduce(f64::max)
    }

    /// Whether a model has a term that is not announced.
    fn has_unclaimed(&self, model: Model) -> bool {
        let announced = self.model();
        let influences = model.influences.iter().zip(announced.influences);
        (model.span.is_some() && announced.span.is_none())
            || influences
                .into_iter()
                .any(|(used, announced)| *used && !announced)
    }

    /// What a model expects at the factor's origin of time; `None` where it can't be solved.
    fn expected(&self, model: Model, factor: &Factor, (x, influences): End) -> Option<f64> {
        let columns = self.window.columns();
        let centre = self.window.centre();
        let places = model.places(columns);
        let solved = factor.choose(&places).solve(places.len())?;
        let regressor = |place: usize| {
            let influence = |j: &usize| columns.influence_place(*j) == place;
            if place == 0 {
                1.0
            } else if model.span.is_some() && place == columns.span_place(0) {
                x - centre.x
            } else if let Some(j) = (0..columns.influence_columns()).find(influence) {
                influences[j] - centre.influences[j]
            } else {
                0.0
            }
        };
        let terms = places.iter().zip(&solved);
        Some(terms.map(|(place, value)| regressor(*place) * value).sum())
    }

    /// All ends of what was seen of the level and of the influence quantities.
    fn ends(&self) -> Vec<End> {
        let seen = self.seen();
        let centre = self.window.centre();
        let mut ends = vec![(centre.x, centre.influences)];
        if let Some((lowest, highest)) = seen.x {
            ends = [lowest, highest].map(|x| (x, centre.influences)).to_vec();
        }
        for (j, range) in seen.influences.into_iter().enumerate() {
            let Some((lowest, highest)) = range else {
                continue;
            };
            let moved = |value: f64| {
                ends.iter().map(move |&(x, mut influences)| {
                    influences[j] = value;
                    (x, influences)
                })
            };
            ends = moved(lowest).chain(moved(highest)).collect();
        }
        ends
    }
}

#[cfg(test)]
mod tests {
    use crate::fit::{Fit, Row};
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};
    use crate::time::Timestamp;

    /// √ of what is added after so many rows, one a minute, of a span of `slope` per unit of a
    /// level that swings by ±1 fourteen times in a window; noise without a generator, of standard
    /// deviation 0.29. And whether a span is claimed.
    fn added(rows: u32, slope: f64, setup: FitSetup) -> (f64, bool) {
        let mut fit = Fit::new(setup);
        for i in 0..rows {
            let noise = (f64::from(i) * 0.618_033_988_749_895).fract() - 0.5;
            let x = 4.0 * ((f64::from(i) * 0.0546).fract() - 0.5).abs() - 1.0;
            fit.insert(Row {
                time: Timestamp(i64::from(i) * 60_000_000_000),
                error: slope * x + noise,
                weight: 1.0,
                x,
                influences: [0.0; 2],
            });
        }
        let published = fit.published().expect("rows");
        let claimed = fit.model().span.is_some();
        (published.unclaimed_variance.sqrt(), claimed)
    }

    fn configured() -> FitSetup {
        FitSetup {
            window: WindowLength::Pairs(256),
            segments: 64,
            max_degree: 2,
            forced_degree: None,
            criterion: Criterion::Bic,
            max_span_degree: Some(1),
            influences: 0,
            noise: PairNoise::default(),
        }
    }

    /// A slope that is there is worth its size at the ends of the level until it is claimed, and
    /// nothing afterwards: then ê has it.
    #[test]
    fn a_span_that_waits_for_its_claim_is_in_u() {
        let (before, claimed) = added(48, 0.5, configured());
        assert!(!claimed && (0.4..0.6).contains(&before), "{before}");
        let (after, claimed) = added(512, 0.5, configured());
        assert!(claimed && after <= 0.0, "{after}");
    }

    /// Without a slope what is added is no more than a fifth of the noise, and nothing where no
    /// span is configured or where the degree is forced.
    #[test]
    fn where_there_is_nothing_to_claim_little_is_added() {
        let (quiet, claimed) = added(512, 0.0, configured());
        assert!(!claimed && quiet > 0.0 && quiet < 0.06, "{quiet}");
        for setup in [
            FitSetup {
                max_span_degree: None,
                ..configured()
            },
            FitSetup {
                forced_degree: Some(0),
                ..configured()
            },
        ] {
            assert!(added(48, 0.5, setup).0 <= 0.0, "{setup:?}");
        }
    }
}
