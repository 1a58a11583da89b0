//! How much better the richer of nested models is: the gain that changes of the announced model are
//! judged by.
//!
//! Nested models of one term are its *grades*: degrees 0, 1, 2 of the zero; no span terms, one,
//! two; without and with an influence quantity. A gain is what a criterion says for a higher grade
//! on the effective sample size: with all doubts when it is to be announced, without them when a
//! lower grade is to be as good.

use crate::event::{CriterionValues, Evidence};
use crate::fit::between::Between;
use crate::fit::climb::Verdict;
use crate::fit::correlation::{Caution, cautious, effective_sample_size};
use crate::fit::criterion::{aicc, bic};
use crate::math;
use crate::setup::Criterion;

/// Below this effective sample size a raise must convince both criteria.
pub(crate) const SMALL_SAMPLE: f64 = 40.0;
/// The most that a coefficient costs by `AICc`: where its correction has no meaning any more, a
/// degree must explain this much more than a gain needs.
const HIGHEST_PRICE: f64 = 5.0;
/// How cautiously r₁ is taken when a degree is judged.
pub(crate) const JUDGING: Caution = Caution {
    bias: 4.0,
    growth: 0.0,
    spread: 0.5,
};
/// How r₁ is taken when a degree is to be lowered.
pub(crate) const PLAIN: Caution = Caution {
    bias: 0.0,
    growth: 0.0,
    spread: 0.0,
};

/// A criterion of n, RSS and the number of parameters.
type Formula = fn(f64, f64, usize) -> Option<f64>;

/// Residual sums of squares of nested models, one coefficient apart, from the plainest up.
#[derive(Clone, Debug)]
pub(crate) struct Grades {
    /// Residual sums of squares.
    pub(crate) rss: Vec<f64>,
    /// What of each may be rounding.
    pub(crate) rounding: f64,
    /// Coefficients of the plainest model.
    pub(crate) least: usize,
}

impl Grades {
    /// Residual sum of squares with its possible rounding: never says that less is left than can be
    /// known.
    pub(crate) fn known(&self, grade: usize) -> f64 {
        self.rss[grade] + self.rounding
    }

    /// The richest model's place.
    pub(crate) fn highest(&self) -> usize {
        self.rss.len().saturating_sub(1)
    }

    /// By how much grade `to` is better than `from` on a sample of `size`: n ln(RSS/RSS′) less the
    /// price of the coefficients. `None` where no residuals are left to compare.
    fn gain(&self, size: f64, from: usize, to: usize, price: impl Fn(f64) -> f64) -> Option<f64> {
        let (before, after) = (self.known(from), self.known(to));
        (after > 0.0 && before.is_finite())
            .then(|| size * math::ln(before / after) - price(size.max(1.0)))
    }

    /// By how much BIC's penalty of grade `to` exceeds that of `from`.
    fn bic_price(n: f64, from: usize, to: usize) -> f64 {
        (to - from) as f64 * math::ln(n)
    }

    /// By how much the `AICc`'s penalty of grade `to` exceeds that of `from`, at most
    /// [`HIGHEST_PRICE`] per coefficient. The criterion has a pole at n = K + 1, and
    /// means nothing below; a fit whose residuals are strongly correlated, such as a parabola
    /// through an exponential, lies there however much it explains.
    fn aicc_price(&self, n: f64, from: usize, to: usize) -> f64 {
        let penalty = |grade: usize| {
            // The coefficients and the residual variance.
            let k = (grade + self.least + 1) as f64;
            (n > k + 1.0).then(|| 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0))
        };
        let most = (to - from) as f64 * HIGHEST_PRICE;
        match (penalty(from), penalty(to)) {
            (Some(from), Some(to)) => (to - from).min(most),
            _ => most,
        }
    }
}

/// The grades of one term with the sample sizes that they are judged on.
#[derive(Clone, Debug)]
pub(crate) struct Contest {
    /// n_eff with caution, and the grades as it weighs them.
    pub(crate) cautious: (f64, Grades),
    /// n_eff by r₁ as it was found, likewise.
    pub(crate) plain: (f64, Grades),
    /// Closed segments.
    pub(crate) segments: usize,
    /// r₁.
    pub(crate) lag_one: f64,
}

impl Contest {
    /// The degrees of the zero, where there is nothing else.
    pub(crate) fn of(between: &Between) -> Self {
        let size = |caution| {
            let coefficients = between.largest + 1;
            let r = cautious(between.lag_one, coefficients, between.segments, caution);
            effective_sample_size(between.segments as f64, r)
        };
        Self {
            cautious: (size(JUDGING), between.grades.clone()),
            plain: (size(PLAIN), between.grades.clone()),
            segments: between.segments,
            lag_one: between.lag_one,
        }
    }

    /// The largest gain of any grade above `from`, with all doubts: on a cautious sample size, and
    /// while that is small, by the more sceptical of both criteria.
    pub(crate) fn cautious_gain(&self, criterion: Criterion, from: usize) -> Option<f64> {
        let (size, grades) = &self.cautious;
        (from + 1..=grades.highest())
            .filter_map(|to| {
                grades.gain(*size, from, to, |n| match criterion {
                    _ if n < SMALL_SAMPLE => f64::max(
                        Grades::bic_price(n, from, to),
                        grades.aicc_price(n, from, to),
                    ),
                    Criterion::Bic => Grades::bic_price(n, from, to),
                    Criterion::Aicc => grades.aicc_price(n, from, to),
                })
            })
            .reduce(f64::max)
    }

    /// The largest gain of any grade above `from`, without doubts: on the sample size by r₁ as it
    /// was found.
    pub(crate) fn plain_gain(&self, criterion: Criterion, from: usize) -> Option<f64> {
        let (size, grades) = &self.plain;
        (from + 1..=grades.highest())
            .filter_map(|to| {
                grades.gain(*size, from, to, |n| match criterion {
                    Criterion::Bic => Grades::bic_price(n, from, to),
                    Criterion::Aicc => grades.aicc_price(n, from, to),
                })
            })
            .reduce(f64::max)
    }

    /// The criterion of each grade as far as it is defined.
    pub(crate) fn criterion_values(&self, criterion: Criterion) -> CriterionValues {
        let (name, formula): (_, Formula) = match criterion {
            Criterion::Bic => ("BIC", bic),
            Criterion::Aicc => ("AICc", aicc),
        };
        let (size, grades) = &self.cautious;
        CriterionValues {
            name: name.to_owned(),
            values: (0..=grades.highest())
                .map_while(|grade| formula(*size, grades.known(grade), grade + grades.least + 1))
                .map(|value| value + 0.0)
                .collect(),
        }
    }

    /// What a gain is judged by, in words: see [`Contest::cautious_gain`] and
    /// [`Grades::aicc_price`].
    fn judged_by(&self, criterion: Criterion, raises: bool) -> String {
        if raises && self.cautious.0 < SMALL_SAMPLE {
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

    /// The numbers behind a verdict.
    pub(crate) fn evidence(&self, criterion: Criterion, verdict: Verdict) -> Evidence {
        let (size, grades) = &self.cautious;
        Evidence {
            criterion: self.criterion_values(criterion),
            gain: verdict.gain + 0.0,
            judged_by: self.judged_by(criterion, verdict.raises),
            needed: verdict.needed,
            held_segments: verdict.held,
            needed_segments: verdict.needed_held,
            segments: u32::try_from(self.segments).unwrap_or(u32::MAX),
            effective_sample_size: *size,
            lag_one: self.lag_one,
            rss: grades.rss.iter().map(|rss| rss + 0.0).collect(),
        }
    }
}
