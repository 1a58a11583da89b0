//! The between-segments problem where the error depends on more than time: groups count by their
//! mean rows and by their contrast rows.
//!
//! **One variance for all rows.** A mean row of weight 1 has the variance `σ_b²` that means show,
//! times (1 + r)/(1 − r) for the correlation from mean to mean: the long-run variance that a sum of
//! them has. A contrast row of regressor k has the variance `σ_k²` that such contrasts show from
//! group to group, times the same of their own r. Contrast rows are multiplied by the root of the
//! ratio, so that every row of the problem has the same long-run variance. Then
//! - least squares is the best linear fit,
//! - residual sums of squares compare on a sample of Σ n(1 − r)/(1 + r) rows, over means and each
//!   kind of contrast,
//! - the covariance of the coefficients is that variance times A⁻¹. (With rows of two variances it
//!   is `A⁻¹(σ_b²M + σ_w²(A − M))A⁻¹`, M the mean rows' part of A; scaling one part to the variance
//!   of the other turns the middle into `σ_b²A`.)
//!
//! Variances are what residuals show over what they have left of degrees of freedom: n − Σh, h the
//! leverages of these rows.
//!
//! **Judging.** Each term is judged given all others: degrees of the zero after the span terms and
//! the influence quantities (columns [1 | extras | u, u², …]), so that a varying level or a
//! temperature is not booked as drift; span terms and influence quantities after everything else.
//! x counts from its mean here, so that x·u does not stand in for u.

use crate::fit::basis::Columns;
use crate::fit::between::{
    About, Group, MeanRow, Weighting, can_bear, factor_of, inside, mean_row, rounding, weighting,
};
use crate::fit::centre::Centre;
use crate::fit::contrast::{Apart, Contrast, KINDS};
use crate::fit::correlation::{
    Caution, cautious, effective_sample_size, lag_one, variance_inflation,
};
use crate::fit::factor::{Factor, MAX_COLUMNS};
use crate::fit::gain::{Contest, Grades, JUDGING, PLAIN};
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::model::Model;

/// Rows that each coefficient must have before a term is looked at.
const ROWS_PER_COEFFICIENT: usize = 4;
/// Contrasts of a regressor show their own variance from so many degrees of freedom on; with fewer,
/// they count as rows of the means' long-run variance.
const LEAST_FREEDOM: f64 = 4.0;
/// Contrasts are taken for at most so many times quieter or noisier than means, as variances: a
/// sensor whose last digit does not move is not without noise.
const LARGEST_RATIO: f64 = 1e4;

/// The problem, solved.
pub(crate) struct Joint {
    pub(super) columns: Columns,
    /// Where x counts from here, as the window counts it.
    x_mean: f64,
    pub(super) means: Vec<MeanRow>,
    pub(super) contrasts: Vec<Contrast>,
    /// Places of the span and influence columns in it: those that there are rows enough for and
    /// that are independent of the others.
    extras: Vec<usize>,
    /// Highest degree of the zero in it.
    pub(crate) largest: usize,
    /// How mean rows weigh.
    pub(crate) weighting: Weighting,
    /// `σ_b²`.
    pub(crate) variance: f64,
    /// Degrees of freedom of `σ_b²`.
    pub(crate) freedom: f64,
    /// The kinds of contrasts; `None` where there are too few.
    kinds: [Option<Kind>; KINDS],
    /// Coefficients that the mean rows determine, Σh, rounded up.
    coefficients: usize,
    /// r₁ of the means' residuals.
    pub(crate) lag_one: f64,
    /// Variance of a row of weight 1 about the largest model.
    pub(super) rows_variance: f64,
    /// What may be rounding in the square of a residual.
    rounding: f64,
}

/// What contrasts of one regressor show from group to group.
#[derive(Clone, Copy, Debug)]
struct Kind {
    count: usize,
    /// `σ_k²`.
    variance: f64,
    /// r₁ of their residuals.
    lag_one: f64,
    /// Coefficients that they determine, Σh, rounded up.
    coefficients: usize,
}

/// What the rows are worth, r taken with a certain caution.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Worth {
    /// Σ n(1 − r)/(1 + r) over means and kinds of contrasts.
    pub(crate) effective: f64,
    /// (1 + r)/(1 − r) of the means.
    pub(crate) inflation: f64,
    /// By what contrast rows of each kind are multiplied.
    pub(crate) scales: [f64; KINDS],
}

/// All rows at one variance with the sample's worth, with caution and without.
pub(crate) struct Sides {
    cautious: (f64, Factor),
    plain: (f64, Factor),
}

/// What a pass over the problem finds.
struct Pass {
    beta: [f64; MAX_COLUMNS],
    /// Unscaled leverage of each mean row.
    leverages: Vec<f64>,
    /// Residual of each mean row.
    residuals: Vec<f64>,
    variance: f64,
    freedom: f64,
    kinds: [Option<Kind>; KINDS],
}

impl Joint {
    /// Sets up and solves the problem for models up to `richest`; `None` where the groups leave no
    /// degree of freedom. With `forced`, its degree is taken as soon as they leave one.
    pub(crate) fn of(
        groups: &[Group<'_>],
        columns: Columns,
        richest: Model,
        forced: bool,
    ) -> Option<Self> {
        let level = groups.last()?.level;
        let mut joint = Self::unsolved(groups, columns, level)?;
        joint.choose_terms(richest, forced);
        let plain = joint.pass(joint.worth(JUDGING))?;
        let about = joint.about(&plain);
        joint.weighting = weighting(groups, &joint.means, &about);
        let (inside, freedom) = inside(groups, &about.beta);
        joint.rows_variance = (inside + about.rss) / (freedom.max(0.0) + about.freedom);
        // The scales of contrasts need the variances, and those a fit: once more than needed.
        for _ in 0..2 {
            let pass = joint.pass(joint.worth(JUDGING))?;
            joint.take(&pass);
        }
        Some(joint)
    }

    fn unsolved(groups: &[Group<'_>], columns: Columns, level: f64) -> Option<Self> {
        let mut means: Vec<MeanRow> = groups.iter().filter_map(|g| mean_row(g, level)).collect();
        let mut contrasts: Vec<Contrast> = groups
            .iter()
            .flat_map(|group| Apart::of(&group.factor, columns).contrasts)
            .collect();
        let weight: f64 = means.iter().map(|row| row.weight).sum();
        let mut x_mean = 0.0;
        if columns.span_columns() > 0 {
            let x = columns.span_place(0);
            x_mean = means.iter().map(|row| row.weight * row.phi[x]).sum::<f64>() / weight;
            let rows = means.iter_mut().map(|row| &mut row.phi[..]);
            for phi in rows.chain(contrasts.iter_mut().map(|c| &mut c.row[..])) {
                for power in 0..columns.span_columns() {
                    phi[columns.span_place(power)] -= x_mean * phi[power];
                }
            }
        }
        let rounding = weight * rounding(&means, level);
        (!means.is_empty()).then_some(Self {
            columns,
            x_mean,
            means,
            contrasts,
            extras: Vec::new(),
            largest: 0,
            weighting: Weighting::PLAIN,
            variance: 0.0,
            freedom: 0.0,
            kinds: [None; KINDS],
            coefficients: 1,
            lag_one: 0.0,
            rows_variance: 0.0,
            rounding,
        })
    }

    /// The terms that there are rows enough for and that are independent, the most wanted first:
    /// x, the influence quantities, x·u, x·u², then degrees of the zero.
    fn choose_terms(&mut self, richest: Model, forced: bool) {
        let columns = self.columns;
        let rows = self.means.len() + self.contrasts.len();
        let factor = self.factor(self.worth(JUDGING));
        let spans = richest.span_terms().min(columns.span_columns());
        let span = |power: usize| (power < spans).then(|| columns.span_place(power));
        let influence = |j: usize| {
            let is_wanted = j < columns.influence_columns() && richest.influences[j];
            is_wanted.then(|| columns.influence_place(j))
        };
        let wanted = [span(0), influence(0), influence(1), span(1), span(2)];
        for place in wanted.into_iter().flatten() {
            let is_higher_span = (place > columns.span_place(0))
                && place < columns.span_place(columns.span_columns());
            // Powers of the span follow one another.
            if is_higher_span && !self.extras.contains(&(place - 1)) {
                continue;
            }
            let coefficients = self.extras.len() + 2;
            let mut order = self.order();
            order.push(place);
            if rows >= ROWS_PER_COEFFICIENT * coefficients
                && factor.choose(&order).independent() == order.len()
            {
                self.extras.push(place);
            }
        }
        for degree in 1..=usize::from(richest.degree).min(columns.time_degree()) {
            let coefficients = self.extras.len() + degree + 1;
            let needed = if forced {
                coefficients + 1
            } else {
                ROWS_PER_COEFFICIENT * coefficients
            };
            self.largest = degree;
            let order = self.order();
            if rows < needed
                || !can_bear(self.means.len(), degree, forced)
                || factor.choose(&order).independent() < order.len()
            {
                self.largest = degree - 1;
                break;
            }
        }
    }

    /// Places of all its columns: [1 | extras | u, u², …].
    pub(super) fn order(&self) -> Vec<usize> {
        let extras = self.extras.iter().copied();
        [0].into_iter()
            .chain(extras)
            .chain(1..=self.largest)
            .collect()
    }

    /// All rows in the window's columns, at one variance.
    pub(super) fn factor(&self, worth: Worth) -> Factor {
        let width = self.columns.count();
        let multiplier = |weight| self.weighting.multiplier(weight);
        let mut factor = factor_of(&self.means, width, multiplier);
        let mut scaled = [0.0; MAX_WIDTH];
        for contrast in &self.contrasts {
            let scale = worth.scales[contrast.kind];
            for (to, entry) in scaled.iter_mut().zip(&contrast.row) {
                *to = scale * entry;
            }
            factor.insert(&scaled[..=width]);
        }
        factor
    }

    /// Solves the problem as it is weighted now.
    fn pass(&self, worth: Worth) -> Option<Pass> {
        let order = self.order();
        let factor = self.factor(worth).choose(&order);
        let solved = factor.solve(order.len())?;
        let mut beta = [0.0; MAX_COLUMNS];
        for (&place, value) in order.iter().zip(&solved) {
            beta[place] = *value;
        }
        let leverage = |phi: &[f64]| {
            let chosen: Vec<f64> = order.iter().map(|&place| phi[place]).collect();
            factor.leverage(&chosen).unwrap_or(0.0)
        };
        let leverages: Vec<f64> = self.means.iter().map(|row| leverage(&row.phi)).collect();
        let residuals: Vec<f64> = self.means.iter().map(|row| row.residual(&beta)).collect();
        let (mut squares, mut freedom) = (0.0, 0.0);
        for ((row, h), residual) in self.means.iter().zip(&leverages).zip(&residuals) {
            let weight = row.weight * self.weighting.multiplier(row.weight);
            squares += weight * residual * residual;
            freedom += 1.0 - weight * h;
        }
        if freedom < 1.0 {
            return None;
        }
        let kinds = std::array::from_fn(|kind| self.kind(kind, &beta, worth, leverage));
        Some(Pass {
            beta,
            leverages,
            residuals,
            variance: squares / freedom,
            freedom,
            kinds,
        })
    }

    /// What contrasts of one kind show about these coefficients.
    fn kind(
        &self,
        kind: usize,
        beta: &[f64],
        worth: Worth,
        leverage: impl Fn(&[f64]) -> f64,
    ) -> Option<Kind> {
        let width = self.columns.count();
        let square = worth.scales[kind] * worth.scales[kind];
        let mut determined = 0.0;
        let mut residuals = Vec::new();
        for contrast in self.contrasts.iter().filter(|c| c.kind == kind) {
            let entries = beta.iter().zip(&contrast.row[..width]);
            let fitted: f64 = entries.map(|(beta, entry)| beta * entry).sum();
            residuals.push(contrast.row[width] - fitted);
            determined += square * leverage(&contrast.row);
        }
        let freedom = residuals.len() as f64 - determined;
        let squares: f64 = residuals.iter().map(|r| r * r).sum();
        (freedom >= LEAST_FREEDOM).then(|| Kind {
            count: residuals.len(),
            variance: squares / freedom,
            lag_one: lag_one(&residuals) + 0.0,
            coefficients: rounded_up(determined),
        })
    }

    /// The count-weighted fit, for the variances within and between groups. The groups' factors
    /// count x from the window's centre; only their rows about the mean are asked, where a shift of
    /// x is a multiple of the powers of time.
    fn about(&self, pass: &Pass) -> About {
        let mut beta = pass.beta;
        for (power, zero) in beta
            .iter_mut()
            .enumerate()
            .take(self.columns.span_columns())
        {
            *zero -= self.x_mean * pass.beta[self.columns.span_place(power)];
        }
        let rows = self.means.iter();
        let rss = rows
            .clone()
            .zip(&pass.residuals)
            .map(|(row, r)| row.weight * r * r)
            .sum();
        let taken: f64 = rows
            .zip(&pass.leverages)
            .map(|(row, h)| row.weight * h)
            .sum();
        About {
            beta: beta[..self.columns.count()].to_vec(),
            leverages: pass.leverages.clone(),
            rss,
            freedom: self.means.len() as f64 - taken,
        }
    }

    fn take(&mut self, pass: &Pass) {
        self.variance = pass.variance;
        self.freedom = pass.freedom;
        self.kinds = pass.kinds;
        let residuals: Vec<f64> = self
            .means
            .iter()
            .zip(&pass.residuals)
            .map(|(row, residual)| {
                (row.weight * self.weighting.multiplier(row.weight)).sqrt() * residual
            })
            .collect();
        self.lag_one = lag_one(&residuals) + 0.0;
        self.coefficients = rounded_up(self.means.len() as f64 - pass.freedom);
    }

    /// Standard deviation of a row of weight 1 about the largest model.
    pub(crate) fn rows_sd(&self) -> f64 {
        self.rows_variance.sqrt()
    }

    /// Whether there are rows enough for a span.
    pub(crate) fn can_bear_span(&self) -> bool {
        self.means.len() + self.contrasts.len() >= 2 * ROWS_PER_COEFFICIENT
    }

    /// Closed groups.
    pub(crate) fn segments(&self) -> usize {
        self.means.len()
    }

    /// What the rows are worth at a caution. Contrasts that are too few to show their own variance
    /// take part as rows of the means' long-run variance, but do not count.
    pub(crate) fn worth(&self, caution: Caution) -> Worth {
        let r = cautious(self.lag_one, self.coefficients, self.segments(), caution);
        let mut worth = Worth {
            effective: effective_sample_size(self.segments() as f64, r),
            inflation: variance_inflation(r),
            scales: [1.0; KINDS],
        };
        let means = self.variance * worth.inflation;
        for (scale, kind) in worth.scales.iter_mut().zip(self.kinds) {
            let Some(kind) = kind else { continue };
            let r = cautious(kind.lag_one, kind.coefficients, kind.count, caution);
            worth.effective += effective_sample_size(kind.count as f64, r);
            let ratio = means / (kind.variance * variance_inflation(r));
            if ratio.is_finite() && ratio > 0.0 {
                *scale = ratio.clamp(1.0 / LARGEST_RATIO, LARGEST_RATIO).sqrt();
            }
        }
        worth
    }

    /// Span columns in the problem.
    pub(crate) fn span_columns(&self) -> usize {
        (0..self.columns.span_columns())
            .take_while(|&power| self.extras.contains(&self.columns.span_place(power)))
            .count()
    }

    /// Whether an influence quantity is in the problem.
    pub(crate) fn has_influence(&self, influence: usize) -> bool {
        self.extras
            .contains(&self.columns.influence_place(influence))
    }

    /// The degrees of the zero, after everything else.
    pub(crate) fn zero_contest(&self, sides: &Sides) -> Contest {
        self.contest(sides, &self.order(), self.extras.len() + 1)
    }

    /// No span terms, one, two …, after everything else.
    pub(crate) fn span_contest(&self, sides: &Sides) -> Contest {
        let is_span = |place: &usize| {
            (self.columns.span_place(0)..self.columns.influence_place(0)).contains(place)
        };
        let others: Vec<usize> = self.order().into_iter().filter(|p| !is_span(p)).collect();
        let spans = (0..self.span_columns()).map(|power| self.columns.span_place(power));
        let order: Vec<usize> = others.iter().copied().chain(spans).collect();
        self.contest(sides, &order, others.len())
    }

    /// Without and with an influence quantity, after everything else.
    pub(crate) fn influence_contest(&self, sides: &Sides, influence: usize) -> Contest {
        let own = self.columns.influence_place(influence);
        let others: Vec<usize> = self.order().into_iter().filter(|&p| p != own).collect();
        let mut order = others.clone();
        order.extend(self.has_influence(influence).then_some(own));
        self.contest(sides, &order, others.len())
    }

    /// The models of the first `least`, `least` + 1 … of these columns.
    fn contest(&self, sides: &Sides, order: &[usize], least: usize) -> Contest {
        let grades = |(effective, factor): &(f64, Factor)| {
            let rss = factor.choose(order).nested_rss();
            let grades = Grades {
                rss: rss.as_slice()[least - 1..order.len()].to_vec(),
                rounding: self.rounding,
                least,
            };
            (*effective, grades)
        };
        Contest {
            cautious: grades(&sides.cautious),
            plain: grades(&sides.plain),
            segments: self.segments(),
            lag_one: self.lag_one,
        }
    }

    /// The problem as terms are judged on it.
    pub(crate) fn sides(&self) -> Sides {
        let side = |caution| {
            let worth = self.worth(caution);
            (worth.effective, self.factor(worth))
        };
        Sides {
            cautious: side(JUDGING),
            plain: side(PLAIN),
        }
    }

    /// Residual sums of squares of models with their possible rounding; x counts from the window's
    /// centre, as the published coefficients do.
    pub(crate) fn known_rss(&self, models: &[Model], worth: Worth) -> Vec<f64> {
        let mut factor = self.factor(worth);
        let back = Centre {
            x: 0.0 - self.x_mean,
            ..Centre::default()
        };
        self.columns.move_centre(&mut factor, back);
        models
            .iter()
            .map(|model| {
                let places = model.places(self.columns);
                factor.choose(&places).nested_rss()[places.len() - 1] + self.rounding
            })
            .collect()
    }
}

/// The number of coefficients that is at least `count`, 1 … [`MAX_COLUMNS`].
fn rounded_up(count: f64) -> usize {
    (1..MAX_COLUMNS)
        .find(|&whole| whole as f64 >= count)
        .unwrap_or(MAX_COLUMNS)
}
