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

use crate::event::{CriterionValues, WindowSeen};
use crate::fit::basis::MAX_INFLUENCES;
use crate::fit::between::{Between, Groups};
use crate::fit::correlation::{Caution, cautious, effective_sample_size, variance_inflation};
use crate::fit::factor::{Factor, PerColumn};
use crate::fit::gain::Contest;
use crate::fit::joint::{Joint, Worth};
use crate::fit::model::Model;
use crate::fit::turn::allowance;
use crate::fit::weights::{Rival, Weights};
use crate::fit::{Fit, ModelWeight, Published};
use crate::time::Timestamp;
use nalgebra::DMatrix;

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
    /// ln of `spread`, where degree 0's is 0.
    logarithm: f64,
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
        let origin = self.window.newest()?;
        let from = self.window.oldest()?;
        if self.window.rows() < 2 {
            return None;
        }
        let forced = self.setup.forced_degree;
        let highest = self.highest_degree();
        let groups = Groups::of(&self.window);
        if !self.model().is_zero_only()
            && let Some(blended) = self.blended(&groups, row_variance)
        {
            return Some(blended);
        }
        let judged = Between::of(&groups.closed, highest, forced.is_some());
        let (mut factor, level) = reweighted(&groups, judged.as_ref())?;
        self.count_days_from(origin, &mut factor);
        let scatter = self.scatter(judged.as_ref()).at_least(row_variance);
        let largest = match (&judged, forced) {
            (_, Some(_)) => self.bearable(highest),
            (Some(judged), None) => judged.largest,
            (None, None) => 0,
        };
        let members = members(
            &factor,
            largest,
            forced.is_some(),
            &scatter,
            judged.as_ref(),
        )?;
        let (mut coefficients, covariance) = mixed(&members, largest + 1, &scatter);
        let turn_variance = match (&judged, forced) {
            (Some(between), None) => {
                let now = self.window.frame().scaled(origin);
                turn_variance(between, &members, coefficients[0], now, &scatter)
            }
            _ => 0.0,
        };
        coefficients[0] += level;
        Some(Published {
            origin,
            degree: self.degree(),
            models: zero_only(&members),
            weights: members.iter().map(|member| member.weight).collect(),
            coefficients: normalised(&coefficients.as_slice()[..=largest]),
            covariance: rows_of(&covariance),
            turn_variance: turn_variance + 0.0,
            degrees_of_freedom: scatter.degrees_of_freedom,
            residual_sd: self.rows_sd(largest),
            criterion: match (&judged, forced) {
                (Some(judged), None) => Contest::of(judged).criterion_values(self.setup.criterion),
                _ => CriterionValues::default(),
            },
            window: WindowSeen {
                from,
                to: origin,
                pairs: self.window.rows(),
                segments: u32::try_from(groups.closed.len()).unwrap_or(u32::MAX),
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

    fn scatter(&self, judged: Option<&Between>) -> Scatter {
        let segments = judged.map_or(0, |judged| judged.segments);
        if let Some(scatter) = judged.and_then(Scatter::of) {
            return scatter;
        }
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
    let newest = groups.open.as_ref().or(groups.closed.last())?;
    let level = newest.level;
    let mut merged = Factor::new(newest.factor.columns());
    for group in groups.closed.iter().chain(&groups.open) {
        let weight = group.factor.weight_sum();
        let multiplier = between.map_or(1.0, |between| between.weighting.multiplier(weight));
        let mut factor = group.factor.clone().into_owned();
        factor.multiply(multiplier.sqrt());
        merged.merge_level(&factor, level - group.level);
    }
    Some((merged, level))
}

/// The degrees 0 … `largest` with their weights, or all weight on `largest` if `forced`; `None` if
/// the rows are not at enough different times.
fn members(
    factor: &Factor,
    largest: usize,
    forced: bool,
    scatter: &Scatter,
    judged: Option<&Between>,
) -> Option<Vec<Member>> {
    let weights = match judged {
        Some(between) if !forced => {
            let rival = |degree| Rival {
                rss: between.grades.known(degree),
                coefficients: degree + 1,
            };
            let rivals: Vec<Rival> = (0..=largest).map(rival).collect();
            Weights::of(&rivals, scatter.effective)
        }
        // With a forced degree the segments may bear fewer degrees than the rows: nothing is
        // weighed.
        _ => Weights::all_on_last(largest + 1),
    };
    (0..=largest)
        .map(|k| {
            Some(Member {
                weight: weights.mean[k],
                spread: weights.spread[k],
                logarithm: weights.logarithms[k],
                coefficients: factor.solve(k + 1)?,
                root: factor.covariance_factor(k + 1)?,
            })
        })
        .collect()
}

/// The weights by model.
fn zero_only(members: &[Member]) -> Vec<ModelWeight> {
    (0_u8..)
        .zip(members)
        .map(|(degree, member)| ModelWeight {
            model: Model {
                degree,
                span: None,
                influences: [false; MAX_INFLUENCES],
            },
            weight: member.weight,
        })
        .collect()
}

/// What turns add to u² at scaled time `now`, the newest pair's, where ê is `mean`, counted from
/// the same level as the members.
fn turn_variance(
    between: &Between,
    members: &[Member],
    mean: f64,
    now: f64,
    scatter: &Scatter,
) -> f64 {
    let turns = between.turns(now, scatter.effective);
    let curves: Vec<f64> = members.iter().map(|m| m.coefficients[0]).collect();
    let logarithms: Vec<f64> = members.iter().map(|m| m.logarithm).collect();
    allowance(&turns, &curves, &logarithms, mean)
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
