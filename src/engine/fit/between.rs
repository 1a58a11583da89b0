//! The between-segments problem: each closed segment of a window counts as one row, its mean row.
//!
//! Rows of a sensor are correlated with their neighbours, and a criterion that takes them for
//! independent finds degrees that aren't there. Means of whole segments are nearly independent, and
//! what correlation is left between them can be estimated (see `correlation`). Each mean weighs
//! 1/(τ² + s²/W): s² is the variance of a row of weight 1 within segments, W the sum of a segment's
//! weights, τ² the variance between segments beyond that, by moments. With equal W all weigh the
//! same; with unequal ones, τ² keeps a heavy segment from ruling the fit.

use crate::fit::correlation::lag_one;
use crate::fit::factor::{Factor, MAX_COLUMNS};
use crate::fit::gain::Grades;
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::segment::Segment;
use crate::fit::window::{Cut, Window};
use crate::math;
use crate::time::Timestamp;
use std::borrow::Cow;

/// A window cut finer than this is judged on so many groups of its segments. More would cost time
/// and gain nothing: the sample's worth is limited by correlation.
pub(crate) const MOST_GROUPS: usize = 64;
/// Closed segments that a degree k ≥ 1 must have per coefficient before it is looked at: 8 for a
/// line, 12 for a parabola.
const SEGMENTS_PER_COEFFICIENT: usize = 4;
/// ln of the largest ratio of two residual sums that is told: a part in 1e300.
pub(crate) const LARGEST_LN_RATIO: f64 = 690.0;
/// Residuals below so many units in the last place of the errors are rounding, not noise.
const ROUNDING_UNITS: f64 = 4.0;

/// One or more neighbouring segments, judged as one.
pub(crate) struct Group<'a> {
    pub(crate) factor: Cow<'a, Factor>,
    /// Where its errors count from.
    pub(crate) level: f64,
    /// Oldest phenomenon time of a row.
    pub(crate) first: Timestamp,
}

/// The segments of a window, as they are judged.
pub(crate) struct Groups<'a> {
    /// Complete groups of closed segments, oldest first.
    pub(crate) closed: Vec<Group<'a>>,
    /// What is not complete yet: the open segment, and closed ones whose group isn't full.
    pub(crate) open: Option<Group<'a>>,
    /// Number of the newest complete group; grows as groups are completed.
    pub(crate) newest: Option<i64>,
    /// How many groups a full window would hold at the present cadence: those there are over the
    /// part of the window's length that they cover.
    pub(crate) when_full: f64,
}

impl<'a> Groups<'a> {
    /// The groups of a window's segments.
    pub(crate) fn of(window: &'a Window) -> Self {
        let keep = keep(window);
        let size = group_size(keep);
        let next = next_slice(window);
        let complete_below = next.div_euclid(size);
        let mut groups = Self {
            closed: Vec::with_capacity(MOST_GROUPS + 1),
            open: open_group(window),
            newest: None,
            when_full: 0.0,
        };
        let mut number = None;
        for segment in window.closed() {
            let group = segment.slice().div_euclid(size);
            if group >= complete_below {
                break;
            }
            if number == Some(group) {
                if let Some(last) = groups.closed.last_mut() {
                    last.take(segment);
                }
            } else {
                groups.closed.push(Group::of(segment));
                number = Some(group);
            }
        }
        groups.newest = number;
        if let Some(oldest) = window.closed().next() {
            let covered = next.saturating_sub(oldest.slice()).max(1) as f64;
            let part = (covered / keep as f64).min(1.0);
            groups.when_full = groups.closed.len() as f64 / part;
        }
        groups
    }
}

/// What of a window is not in a complete group yet: [`Groups::open`], without building the others.
pub(crate) fn open_group(window: &Window) -> Option<Group<'_>> {
    let size = group_size(keep(window));
    let complete_below = next_slice(window).div_euclid(size);
    let is_open = |segment: &&Segment| segment.slice().div_euclid(size) >= complete_below;
    let incomplete = window.closed().rev().take_while(is_open).count();
    let complete = window.closed().len() - incomplete;
    let mut open = None;
    for segment in window.closed().skip(complete).chain(window.open()) {
        join(&mut open, segment);
    }
    open
}

/// Number of the newest complete group of a window, without building the groups.
pub(crate) fn newest_group(window: &Window) -> Option<i64> {
    let size = group_size(keep(window));
    let complete_below = next_slice(window).div_euclid(size);
    window
        .closed()
        .rev()
        .map(|segment| segment.slice().div_euclid(size))
        .find(|&group| group < complete_below)
}

/// How many closed segments a full window has.
fn keep(window: &Window) -> usize {
    match window.cut() {
        Cut::Time { keep, .. } | Cut::Rows { keep, .. } => keep as usize,
    }
}

/// How many segments make a group.
fn group_size(keep: usize) -> i64 {
    // At most 1024 segments are configured, and `keep` never exceeds the number of rows, a u32.
    i64::try_from(keep.div_ceil(MOST_GROUPS).max(1)).unwrap_or(i64::MAX)
}

/// The slice that rows to come will enter: everything before it is closed.
fn next_slice(window: &Window) -> i64 {
    match (window.open(), window.closed().next_back()) {
        (Some(open), _) => open.slice(),
        (None, Some(last)) => last.slice().saturating_add(1),
        (None, None) => 0,
    }
}

fn join<'a>(group: &mut Option<Group<'a>>, segment: &'a Segment) {
    match group {
        Some(group) => group.take(segment),
        None => *group = Some(Group::of(segment)),
    }
}

impl<'a> Group<'a> {
    fn of(segment: &'a Segment) -> Self {
        Self {
            factor: Cow::Borrowed(segment.factor()),
            level: segment.level(),
            first: segment.first(),
        }
    }

    fn take(&mut self, segment: &Segment) {
        let level = self.level - segment.level();
        self.factor.to_mut().merge_level(segment.factor(), level);
        self.first = self.first.min(segment.first());
    }
}

/// The mean row of a group.
#[derive(Debug)]
pub(crate) struct MeanRow {
    /// Sum of its rows' weights.
    pub(crate) weight: f64,
    /// φ̄; zero beyond the factor's columns.
    pub(crate) phi: [f64; MAX_COLUMNS],
    /// ē, counted from the problem's common level.
    pub(crate) error: f64,
}

/// The variance of a group's mean, by which groups are weighted.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Weighting {
    /// s²: variance of a row of weight 1 within groups; `None` where no group has two rows.
    within: Option<f64>,
    /// τ²: variance between groups beyond s²/W.
    between: f64,
    /// Makes the weights sum to what they would without τ².
    scale: f64,
}

impl Weighting {
    /// No weighting: every row counts with its own weight.
    pub(crate) const PLAIN: Self = Self {
        within: None,
        between: 0.0,
        scale: 1.0,
    };

    /// By what the weights of all rows of a group are multiplied, `weight` being their sum.
    pub(crate) fn multiplier(&self, weight: f64) -> f64 {
        match self.within {
            Some(within) => self.scale / (self.between * weight + within),
            None => 1.0,
        }
    }
}

/// What closed segments, each taken as one row, say about the degree.
#[derive(Debug)]
pub(crate) struct Between {
    /// S, closed groups.
    pub(crate) segments: usize,
    /// Highest degree that they can bear.
    pub(crate) largest: usize,
    /// How groups weigh.
    pub(crate) weighting: Weighting,
    /// Residual sums of squares for degrees 0 … `largest`.
    pub(crate) grades: Grades,
    /// r₁ of the residuals of degree `largest` (raw).
    pub(crate) lag_one: f64,
    /// The rows, oldest first.
    pub(crate) rows: Vec<MeanRow>,
    /// √weight of each, as it counts here.
    pub(crate) roots: Vec<f64>,
    /// What degree `largest` leaves of each, times its root.
    pub(crate) residuals: Vec<f64>,
    /// The rows' factor, as they count here.
    pub(crate) factor: Factor,
}

impl Between {
    /// Sets up and solves the problem for degrees up to `highest`; `None` without groups.
    ///
    /// Degrees that the groups can't bear are left out: a line needs 8 of them, a parabola 12. With
    /// `forced`, `highest` is taken as soon as it leaves a degree of freedom.
    pub(crate) fn of(groups: &[Group<'_>], highest: usize, forced: bool) -> Option<Self> {
        let level = groups.last()?.level;
        let rows: Vec<MeanRow> = groups.iter().filter_map(|g| mean_row(g, level)).collect();
        let columns = groups.last()?.factor.columns();
        let segments = rows.len();
        let counted = factor_of(&rows, columns, |_| 1.0);
        let independent = counted.independent();
        let largest = (0..=highest)
            .rev()
            .find(|&k| k < independent && can_bear(segments, k, forced))?;
        let weighting = plain_weighting(groups, &rows, &counted, largest);
        let factor = factor_of(&rows, columns, |weight| weighting.multiplier(weight));
        let coefficients = factor.solve(largest + 1)?;
        let roots: Vec<f64> = rows
            .iter()
            .map(|row| (row.weight * weighting.multiplier(row.weight)).sqrt())
            .collect();
        let residuals: Vec<f64> = rows
            .iter()
            .zip(&roots)
            .map(|(row, root)| root * row.residual(&coefficients.as_slice()[..=largest]))
            .collect();
        let nested = factor.nested_rss();
        Some(Self {
            segments,
            largest,
            weighting,
            grades: Grades {
                rss: nested.as_slice()[..=largest].to_vec(),
                rounding: factor.weight_sum() * rounding(&rows, level),
                least: 1,
            },
            lag_one: lag_one(&residuals) + 0.0,
            rows,
            roots,
            residuals,
            factor,
        })
    }

    /// ln(`RSS_k`/`rss`), `rss` with its possible rounding; `None` where nothing is left to
    /// compare.
    pub(crate) fn ln_ratio(&self, degree: usize, rss: f64) -> Option<f64> {
        (rss > 0.0).then(|| math::ln(self.grades.known(degree) / rss).min(LARGEST_LN_RATIO))
    }

    /// σ̂² = RSS/(S − p) of the largest model: variance of a row of weight 1 as groups show it, so
    /// with the correlation inside groups. 0 where there are no degrees of freedom.
    pub(crate) fn variance(&self) -> f64 {
        let freedom = self.degrees_of_freedom();
        if freedom > 0.0 {
            self.grades.rss[self.largest] / freedom
        } else {
            0.0
        }
    }

    /// S − p, p coefficients of the largest model.
    pub(crate) fn degrees_of_freedom(&self) -> f64 {
        self.segments as f64 - (self.largest + 1) as f64
    }
}

/// What may be rounding in the square of one row's residual.
pub(crate) fn rounding(rows: &[MeanRow], level: f64) -> f64 {
    let largest_error = rows
        .iter()
        .map(|row| row.error.abs())
        .fold(level.abs() * f64::EPSILON, f64::max);
    let unit = ROUNDING_UNITS * f64::EPSILON * (largest_error + level.abs());
    unit * unit
}

/// Whether so many segments can bear a degree.
pub(crate) fn can_bear(segments: usize, degree: usize, forced: bool) -> bool {
    if degree == 0 {
        return true;
    }
    let needed = if forced {
        degree + 2
    } else {
        SEGMENTS_PER_COEFFICIENT * (degree + 1)
    };
    segments >= needed
}

pub(crate) fn mean_row(group: &Group<'_>, level: f64) -> Option<MeanRow> {
    let mean = group.factor.mean_row()?;
    let columns = group.factor.columns();
    let mut phi = [0.0; MAX_COLUMNS];
    phi[..columns].copy_from_slice(&mean.as_slice()[..columns]);
    Some(MeanRow {
        weight: group.factor.weight_sum(),
        phi,
        error: mean[columns] + (group.level - level),
    })
}

impl MeanRow {
    /// Scaled time, in a problem with a degree above 0.
    pub(crate) fn time(&self) -> f64 {
        self.phi[1]
    }

    /// ē − φ̄ᵀβ for the first columns.
    pub(crate) fn residual(&self, coefficients: &[f64]) -> f64 {
        coefficients
            .iter()
            .zip(&self.phi)
            .fold(self.error, |rest, (beta, phi)| rest - beta * phi)
    }
}

/// The factor of mean rows, each weighing the sum of its weights times `multiplier` of that sum.
pub(crate) fn factor_of(
    rows: &[MeanRow],
    columns: usize,
    multiplier: impl Fn(f64) -> f64,
) -> Factor {
    let mut factor = Factor::new(columns);
    let mut scaled = [0.0; MAX_WIDTH];
    for row in rows {
        let root = (row.weight * multiplier(row.weight)).sqrt();
        for (to, phi) in scaled.iter_mut().zip(&row.phi[..columns]) {
            *to = root * phi;
        }
        scaled[columns] = root * row.error;
        factor.insert(&scaled[..=columns]);
    }
    factor
}

/// How groups weigh about the count-weighted fit of degree `largest`.
fn plain_weighting(
    groups: &[Group<'_>],
    rows: &[MeanRow],
    counted: &Factor,
    largest: usize,
) -> Weighting {
    let Some(coefficients) = counted.solve(largest + 1) else {
        return Weighting::PLAIN;
    };
    let leverage = |row: &MeanRow| counted.leverage(&row.phi[..=largest]).unwrap_or(0.0);
    let about = About {
        beta: coefficients.as_slice()[..=largest].to_vec(),
        leverages: rows.iter().map(leverage).collect(),
        rss: counted.nested_rss()[largest],
        freedom: rows.len() as f64 - (largest + 1) as f64,
    };
    weighting(groups, rows, &about)
}

/// A count-weighted fit, about which the variances are taken.
pub(crate) struct About {
    /// Coefficients of the leading columns of the groups' factors.
    pub(crate) beta: Vec<f64>,
    /// h of each mean row.
    pub(crate) leverages: Vec<f64>,
    /// Weighted residual sum of squares of the mean rows.
    pub(crate) rss: f64,
    /// Degrees of freedom of `rss`.
    pub(crate) freedom: f64,
}

/// Sum of squares within groups about β, and its degrees of freedom.
pub(crate) fn inside(groups: &[Group<'_>], beta: &[f64]) -> (f64, f64) {
    let mut members = 0;
    for group in groups {
        members += group.factor.rows();
    }
    let freedom = members as f64 - groups.len() as f64;
    (
        groups.iter().map(|g| inside_rss(&g.factor, beta)).sum(),
        freedom,
    )
}

/// s² within groups and τ² between them, by moments, about a count-weighted fit.
///
/// `τ² = (Q − (S − p)s²)/(ΣW − ΣW²h)`, at least 0: Q the weighted residual sum of squares, h the
/// leverage of a mean row (`DerSimonian` & Laird, *Controlled Clinical Trials* 7 (1986) 177, in the
/// form for a regression; from memory).
pub(crate) fn weighting(groups: &[Group<'_>], rows: &[MeanRow], about: &About) -> Weighting {
    let (inside, freedom) = inside(groups, &about.beta);
    if freedom <= 0.0 {
        return Weighting::PLAIN;
    }
    let within = inside / freedom;
    let (mut total, mut taken) = (0.0, 0.0);
    for (row, leverage) in rows.iter().zip(&about.leverages) {
        total += row.weight;
        taken += row.weight * row.weight * leverage;
    }
    let excess = about.rss - about.freedom * within;
    let between = if total > taken {
        (excess / (total - taken)).max(0.0)
    } else {
        0.0
    };
    let unscaled = Weighting {
        within: Some(within),
        between,
        scale: 1.0,
    };
    let sum: f64 = rows
        .iter()
        .map(|row| row.weight * unscaled.multiplier(row.weight))
        .sum();
    let scale = total / sum;
    // All errors the same: nothing varies, and nothing needs weighting.
    if scale > 0.0 && scale.is_finite() {
        Weighting { scale, ..unscaled }
    } else {
        Weighting::PLAIN
    }
}

/// Sum of squares of a group's rows about β, beyond that of their mean row: rows 1, 2, … of its
/// factor.
fn inside_rss(factor: &Factor, beta: &[f64]) -> f64 {
    let columns = factor.columns();
    let mut sum = 0.0;
    for i in 1..=columns {
        let mut rest = factor.entry(i, columns);
        for (j, beta) in beta.iter().enumerate().skip(i) {
            rest -= factor.entry(i, j) * beta;
        }
        sum += rest * rest;
    }
    sum
}
