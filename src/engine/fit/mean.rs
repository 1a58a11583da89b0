//! What is published: not one degree's curve but the mean over degrees, with its uncertainty.
//!
//! While a slow drift waits to be recognised, the curve of the announced degree is wrong and its
//! band does not say so; and at a change of degree it jumps. The mean over degrees 0 … maximum
//! moves over gradually, and the disagreement of the degrees enters its uncertainty (Buckland,
//! Burnham & Augustin, *Biometrics* 53 (1997) 603; from memory).
//!
//! ê and u² weigh degrees at two prices (see `weights`). What no degree can follow, a drift that
//! turned within the window, is looked for besides (see `turn`).
//!
//! All rows count, those of the open segment too: the newest say most about now. Segments weigh as
//! in the between-segments problem, so with equal counts this *is* the plain fit of all rows. The
//! variance comes from the scatter of the segments' means about the largest model, which holds the
//! correlation inside segments, inflated by the correlation between them.
//!
//! **Few rows.** None for fewer than two. With fewer than 8 closed segments the mean is degree 0's.
//! With fewer than three, the scatter of means says nothing yet and that of all rows stands in,
//! inflated as for the highest correlation that is ever assumed: wide, but a number.

use crate::event::WindowSeen;
use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::between::{Between, Group, Groups, open_group};
use crate::fit::correlation::{Caution, cautious, effective_sample_size, variance_inflation};
use crate::fit::factor::{Factor, PerColumn};
use crate::fit::joint::{Joint, Worth};
use crate::fit::model::Model;
use crate::fit::weights::Weights;
use crate::fit::{Fit, ModelWeight, Published};
use crate::time::Timestamp;
use nalgebra::DMatrix;
use std::borrow::Cow;

/// How cautiously r₁ is taken for the uncertainty: free of bias, and then its upper 90 % limit (the
/// normal quantile 1.28). Simulated on other seeds than those of `tests/statistics/`: with one
/// standard error in its place, eight pairs of correlation 0.8 were covered in 80 %.
pub(crate) const PUBLISHING: Caution = Caution {
    bias: 1.0,
    growth: 1.0,
    spread: 1.28,
};
/// Closed segments from which on their scatter is used.
const LEAST_SEGMENTS: usize = 3;
/// Degrees of freedom of a declared variance, if the rows' own are fewer: its root known to 25 %
/// (JCGM 100:2008, G.4.2).
const DECLARED_FREEDOM: f64 = 8.0;

/// The plain fit of one degree to all rows: ordinary least squares and nothing else.
///
/// Its uncertainty takes rows for independent. It is what textbooks and certificates state; the
/// published mean is what a correction should rest on.
#[derive(Clone, Debug, PartialEq)]
pub struct Plain {
    /// Coefficients of ê(t), constant first, t in days from the chosen origin.
    pub coefficients: Vec<f64>,
    /// s²(ΦᵀWΦ)⁻¹, s² = RSS/(n − p) (JCGM 100:2008, H.3.3 for a line).
    pub covariance: Vec<Vec<f64>>,
    /// s.
    pub residual_sd: f64,
    /// RSS.
    pub residual_sum_of_squares: f64,
    /// n − p.
    pub degrees_of_freedom: f64,
}

/// The scatter that the uncertainty rests on.
#[derive(Clone, Copy, Debug)]
pub(super) struct Scatter {
    /// Variance of a row of weight 1.
    pub(super) variance: f64,
    pub(super) degrees_of_freedom: f64,
    /// (1 + r)/(1 − r).
    pub(super) inflation: f64,
    /// n_eff.
    pub(crate) effective: f64,
}

impl Scatter {
    /// What the segments show, with the correlation to count with; `None` if they leave no degree
    /// of freedom.
    pub(super) fn of(between: &Between) -> Option<Self> {
        let segments = between.segments;
        if segments < LEAST_SEGMENTS || between.degrees_of_freedom() < 1.0 {
            return None;
        }
        let r = cautious(between.lag_one, between.largest + 1, segments, PUBLISHING);
        Some(Self {
            variance: between.variance(),
            degrees_of_freedom: between.degrees_of_freedom(),
            inflation: variance_inflation(r),
            effective: effective_sample_size(segments as f64, r),
        })
    }

    /// The same of a problem with span terms or influence quantities.
    pub(super) fn of_joint(joint: &Joint, worth: Worth) -> Self {
        Self {
            variance: joint.variance,
            degrees_of_freedom: joint.freedom,
            inflation: worth.inflation,
            effective: worth.effective,
        }
    }

    /// The same, but no less than what is known beforehand of a row: values that happen to be equal
    /// are not known exactly.
    pub(super) fn at_least(self, variance: f64) -> Self {
        if self.variance * self.inflation >= variance {
            return self;
        }
        Self {
            variance,
            inflation: 1.0,
            degrees_of_freedom: self.degrees_of_freedom.max(DECLARED_FREEDOM),
            ..self
        }
    }
}

/// One degree's share in the mean.
struct Member {
    /// In ê.
    weight: f64,
    /// In u².
    spread: f64,
    coefficients: PerColumn,
    /// R⁻¹ of its columns.
    root: DMatrix<f64>,
}

impl Fit {
    /// The plain fit of `degree` to all rows in the window, t counted from `origin`; `None` with no
    /// more rows than coefficients, with fewer different times, or beyond the window's degree.
    #[must_use]
    pub fn plain(&self, degree: u8, origin: Timestamp) -> Option<Plain> {
        let columns = usize::from(degree) + 1;
        if columns > self.window.columns().time_degree() + 1 {
            return None;
        }
        let degrees_of_freedom = self.window.rows() as f64 - columns as f64;
        if degrees_of_freedom < 1.0 {
            return None;
        }
        let mut factor = self.window.total().clone();
        self.count_days_from(origin, &mut factor);
        let rss = factor.nested_rss()[columns - 1];
        let mut coefficients = factor.solve(columns)?;
        coefficients[0] += self.window.level();
        let variance = rss / degrees_of_freedom;
        let root = factor.covariance_factor(columns)?;
        Some(Plain {
            coefficients: normalised(&coefficients.as_slice()[..columns]),
            covariance: rows_of(&(&root * root.transpose() * variance)),
            residual_sd: variance.sqrt(),
            residual_sum_of_squares: rss,
            degrees_of_freedom,
        })
    }

    /// The mean over degrees as of the newest pair; `None` before there are two rows.
    ///
    /// With a forced degree the mean is that degree's curve alone, or, until there are rows for it,
    /// the highest one's that they bear.
    #[must_use]
    pub fn published(&self) -> Option<Published> {
        self.published_at_least(0.0)
    }

    /// [`Fit::published`], with the variance of a row of weight 1 taken as at least `row_variance`
    /// (what was declared of noise and reference), in the unit of the errors squared.
    #[must_use]
    pub fn published_at_least(&self, row_variance: f64) -> Option<Published> {
        if self.window.rows() < 2 {
            return None;
        }
        let is_plain = self.model().is_zero_only();
        let blended = (!is_plain).then(|| self.blended(row_variance)).flatten();
        blended.or_else(|| self.over_degrees(row_variance))
    }

    /// The mean where there is nothing but time.
    fn over_degrees(&self, row_variance: f64) -> Option<Published> {
        let origin = self.window.newest()?;
        let settled = self.settled();
        let closed = self.closed_mean();
        let judged = settled.between.as_ref();
        let open = open_group(&self.window);
        let (mut factor, level) = with_open(closed.rows.clone(), open.as_ref(), judged)?;
        self.count_days_from(origin, &mut factor);
        let scatter = closed.scatter.unwrap_or_else(|| self.plain_scatter());
        let scatter = scatter.at_least(row_variance);
        let (largest, weights) = match (&closed.weights, self.setup.forced_degree) {
            (Some(weights), None) => (weights.mean.len() - 1, Cow::Borrowed(weights)),
            (None, None) => (0, Cow::Owned(Weights::all_on_last(1))),
            // The segments may bear fewer degrees than the rows: nothing is weighed.
            (_, Some(_)) => {
                let largest = self.bearable(self.highest_degree());
                (largest, Cow::Owned(Weights::all_on_last(largest + 1)))
            }
        };
        let members = members(&factor, &weights)?;
        let (mut coefficients, covariance) = mixed(&members, largest + 1, &scatter);
        let curves: Vec<f64> = members.iter().map(|m| m.coefficients[0]).collect();
        let now = self.window.frame().scaled(origin);
        let turn_variance = judged.map_or(0.0, |between| {
            between.allowance(&closed.turns, now, &curves, coefficients[0])
        });
        coefficients[0] += level;
        Some(Published {
            origin,
            degree: self.degree(),
            models: zero_only(&weights.mean),
            weights: weights.mean.clone(),
            coefficients: normalised(&coefficients.as_slice()[..=largest]),
            covariance: rows_of(&covariance),
            turn_variance: turn_variance + 0.0,
            degrees_of_freedom: scatter.degrees_of_freedom,
            residual_sd: self.rows_sd(largest),
            criterion: closed.criterion.clone(),
            window: WindowSeen {
                from: self.window.oldest()?,
                to: origin,
                pairs: self.window.rows(),
                segments: u32::try_from(settled.segments).unwrap_or(u32::MAX),
                effective_sample_size: scatter.effective,
                lag_one: judged.map_or(0.0, |judged| judged.lag_one),
            },
            span: Vec::new(),
            influences: Vec::new(),
            terms: self.terms(),
        })
    }

    /// Moves a factor in the window's frame to days from `origin`.
    pub(super) fn count_days_from(&self, origin: Timestamp, factor: &mut Factor) {
        let frame = self.window.frame();
        let columns = self.window.columns();
        columns.count_days_from(factor, frame, frame.scaled(origin));
    }

    /// The highest degree ≤ `highest` that all rows together bear with a degree of freedom left.
    fn bearable(&self, highest: usize) -> usize {
        let rows = usize::try_from(self.window.rows()).unwrap_or(usize::MAX);
        let columns = self
            .window
            .total()
            .independent()
            .min(rows.saturating_sub(1));
        highest.min(columns.saturating_sub(1))
    }

    /// √(RSS/(n − p)) of the plain fit of this degree, or of the highest one that the rows bear.
    fn rows_sd(&self, degree: usize) -> f64 {
        let degree = self.bearable(degree);
        let freedom = self.window.rows() as f64 - (degree + 1) as f64;
        (self.window.total().nested_rss()[degree] / freedom.max(1.0)).sqrt()
    }

    /// The scatter to count with while segments say nothing yet.
    fn plain_scatter(&self) -> Scatter {
        let segments = self.settled().between.as_ref().map_or(0, |it| it.segments);
        let sd = self.rows_sd(0);
        let r = cautious(1.0, 1, segments, PUBLISHING);
        Scatter {
            variance: sd * sd,
            degrees_of_freedom: self.window.rows() as f64 - 1.0,
            inflation: variance_inflation(r),
            effective: effective_sample_size(segments.max(1) as f64, r),
        }
    }
}

/// All groups merged, each weighted as the between-segments problem says, at the level returned.
pub(super) fn reweighted(groups: &Groups<'_>, between: Option<&Between>) -> Option<(Factor, f64)> {
    let closed = closed_rows(&groups.closed, between);
    with_open(closed, groups.open.as_ref(), between)
}

/// The same of the closed groups, at the newest one's level; `None` without any.
pub(super) fn closed_rows(
    closed: &[Group<'_>],
    between: Option<&Between>,
) -> Option<(Factor, f64)> {
    let newest = closed.last()?;
    let mut merged = Factor::new(newest.factor.columns());
    for group in closed {
        merge_weighted(&mut merged, group, newest.level, between);
    }
    Some((merged, newest.level))
}

/// These with the open group.
fn with_open(
    closed: Option<(Factor, f64)>,
    open: Option<&Group<'_>>,
    between: Option<&Between>,
) -> Option<(Factor, f64)> {
    let Some(open) = open else { return closed };
    let mut merged = match closed {
        Some((mut merged, level)) => {
            merged.move_level(open.level - level);
            merged
        }
        None => Factor::new(open.factor.columns()),
    };
    merge_weighted(&mut merged, open, open.level, between);
    Some((merged, open.level))
}

/// Merges a group, weighted, into rows at this level.
fn merge_weighted(merged: &mut Factor, group: &Group<'_>, level: f64, between: Option<&Between>) {
    let weight = group.factor.weight_sum();
    let multiplier = between.map_or(1.0, |between| between.weighting.multiplier(weight));
    let mut factor = group.factor.as_ref().clone();
    factor.multiply(multiplier.sqrt());
    merged.merge_level(&factor, level - group.level);
}

/// The degrees with these weights, from 0 on; `None` if the rows are not at enough different times.
fn members(factor: &Factor, weights: &Weights) -> Option<Vec<Member>> {
    let shares = weights.mean.iter().zip(&weights.spread).enumerate();
    shares
        .map(|(k, (&weight, &spread))| {
            Some(Member {
                weight,
                spread,
                coefficients: factor.solve(k + 1)?,
                root: factor.covariance_factor(k + 1)?,
            })
        })
        .collect()
}

/// The weights by model.
fn zero_only(weights: &[f64]) -> Vec<ModelWeight> {
    (0_u8..)
        .zip(weights)
        .map(|(degree, &weight)| ModelWeight {
            model: Model {
                degree,
                span: None,
                influences: [false; MAX_INFLUENCES],
            },
            weight,
        })
        .collect()
}

/// `β̄ = Σ w_k β_k` and `C = Σ v_k (C_k + (β_k − β̄)(β_k − β̄)ᵀ)`, so that u²(t) = φᵀCφ is
/// `Σ v_k (u_k² + (ê_k − ê)²)` at every t, v the weights of the spread (Burnham &
/// Anderson, *Model Selection and Multimodel Inference*, 2nd ed., §4.3, revised estimator; from
/// memory).
fn mixed(members: &[Member], columns: usize, scatter: &Scatter) -> (PerColumn, DMatrix<f64>) {
    let mut mean = PerColumn::zeros();
    for member in members {
        mean += member.coefficients * member.weight;
    }
    let variance = scatter.variance * scatter.inflation;
    let mut covariance = DMatrix::zeros(columns, columns);
    for member in members {
        let own = &member.root * member.root.transpose() * (variance * member.spread);
        let size = own.nrows();
        let apart = member.coefficients - mean;
        for i in 0..columns {
            for j in 0..columns {
                covariance[(i, j)] += member.spread * apart[i] * apart[j];
                if i < size && j < size {
                    covariance[(i, j)] += own[(i, j)];
                }
            }
        }
    }
    (mean, covariance)
}

/// The same numbers, −0 as 0.
pub(crate) fn normalised(values: &[f64]) -> Vec<f64> {
    values.iter().map(|value| value + 0.0).collect()
}

pub(crate) fn rows_of(matrix: &DMatrix<f64>) -> Vec<Vec<f64>> {
    (0..matrix.nrows())
        .map(|i| (0..matrix.ncols()).map(|j| matrix[(i, j)] + 0.0).collect())
        .collect()
}
