//! The published mean where span terms or influence quantities are claimed: over degrees of the
//! zero, degrees of the span, and with and without each influence quantity.
//!
//! As without them (see `mean`), all rows count, those of the open segment too, and models weigh at
//! two prices (see `weights`). Mean rows weigh as in the between-segments problem and contrast rows
//! are scaled as there (see `joint`), so that every row of the factor has one long-run variance σ²,
//! and the covariance of a model's coefficients is σ²(RᵀR)⁻¹. What is left of a group beside its
//! mean and its contrasts is time moving inside it, next to nothing; it counts as it is.
//!
//! The effect of noise in the level on the span, λ, is a bias that nobody knows better than by its
//! size. It enters the covariance as a shift of the slope by λ about the mean level.

use crate::event::{CriterionValues, WindowSeen};
use crate::fit::basis::Columns;
use crate::fit::between::{Group, Groups};
use crate::fit::contrast::Apart;
use crate::fit::factor::Factor;
use crate::fit::joint::{Joint, Worth};
use crate::fit::kernel::MAX_WIDTH;
use crate::fit::mean::{PUBLISHING, Scatter, normalised, rows_of};
use crate::fit::model::Model;
use crate::fit::weights::{Rival, Weights};
use crate::fit::{Fit, ModelWeight, Published};
use nalgebra::{DMatrix, DVector};

/// One model's share in the mean, its coefficients at the places of the window's columns.
struct Member {
    /// In ê.
    weight: f64,
    /// In u².
    spread: f64,
    coefficients: DVector<f64>,
    covariance: DMatrix<f64>,
}

/// The mean of members, at the places of the window's columns.
struct Blend {
    coefficients: DVector<f64>,
    covariance: DMatrix<f64>,
}

impl Fit {
    /// The mean over models; `None` where none of the claimed terms can be had from the closed
    /// segments.
    pub(crate) fn blended(&self, row_variance: f64) -> Option<Published> {
        let groups = &Groups::of(&self.window);
        let columns = self.window.columns();
        let forced = self.setup.forced_degree;
        let joint = Joint::of(&groups.closed, columns, self.richest(), forced.is_some())?;
        let models = self.candidates(&joint);
        if models.iter().all(|model| model.is_zero_only()) {
            return None;
        }
        let worth = joint.worth(PUBLISHING);
        let known = joint.known_rss(&models, worth);
        let rivals: Vec<Rival> = models
            .iter()
            .zip(known)
            .map(|(model, rss)| Rival {
                rss,
                coefficients: model.places(columns).len(),
            })
            .collect();
        let weights = Weights::of(&rivals, worth.effective);
        let (mut factor, level) = weighted(groups, &joint, columns, worth)?;
        self.count_days_from(self.window.newest()?, &mut factor);
        let scatter = Scatter::of_joint(&joint, worth).at_least(row_variance);
        let variance = scatter.variance * scatter.inflation;
        let shares = weights.mean.iter().copied().zip(weights.spread);
        let members = models
            .iter()
            .zip(shares)
            .map(|(model, shares)| Member::of(*model, shares, &factor, columns, variance));
        let mut blend = Blend::of(&members.collect::<Option<Vec<_>>>()?, columns.count());
        blend.coefficients[0] += level;
        let with_span = models
            .iter()
            .zip(&weights.mean)
            .filter(|(model, _)| model.span.is_some());
        let span_weight: f64 = with_span.map(|(_, weight)| weight).sum();
        if span_weight > 0.0 {
            let share = self.noise_share(&joint, worth);
            blend.doubt_slope(share * span_weight, &factor, columns);
        }
        self.assembled(groups, &joint, &scatter, (&models, &weights.mean), &blend)
    }

    /// λ: by about so much noise in the level bends a slope on it.
    pub(super) fn noise_share(&self, joint: &Joint, worth: Worth) -> f64 {
        let noise = joint.regressor_noise(self.setup.span_side(), self.setup.noise);
        let found = joint.span_noise(worth, noise);
        found.map_or(0.0, |found| found.share)
    }

    /// The models that compete: every degree of the zero (the forced one alone), with no more than
    /// the claimed span terms and influence quantities that the problem holds.
    fn candidates(&self, joint: &Joint) -> Vec<Model> {
        let announced = self.model();
        let spans =
            usize::from(announced.span.map_or(0, |degree| degree + 1)).min(joint.span_columns());
        let least = self.setup.forced_degree.map_or(0, |_| joint.largest);
        let used = |j: usize| announced.influences[j] && joint.has_influence(j);
        let choices = |j: usize| {
            if used(j) {
                &[false, true][..]
            } else {
                &[false][..]
            }
        };
        let mut models = Vec::new();
        for degree in (least..=joint.largest).filter_map(|k| u8::try_from(k).ok()) {
            for span in (0..=spans).filter_map(|count| u8::try_from(count).ok()) {
                let span = span.checked_sub(1);
                for &first in choices(0) {
                    for &second in choices(1) {
                        models.push(Model {
                            degree,
                            span,
                            influences: [first, second],
                        });
                    }
                }
            }
        }
        models
    }

    fn assembled(
        &self,
        groups: &Groups<'_>,
        joint: &Joint,
        scatter: &Scatter,
        (models, weights): (&[Model], &[f64]),
        blend: &Blend,
    ) -> Option<Published> {
        let columns = self.window.columns();
        let spans = models
            .iter()
            .filter_map(|m| m.span)
            .max()
            .map_or(0, |degree| usize::from(degree) + 1);
        let has_influences = models.iter().any(|m| m.influences.contains(&true));
        let influences = if has_influences {
            columns.influence_columns()
        } else {
            0
        };
        let zero: Vec<usize> = (0..=joint.largest).collect();
        let span: Vec<usize> = (0..spans).map(|power| columns.span_place(power)).collect();
        let influence: Vec<usize> = (0..influences)
            .map(|j| columns.influence_place(j))
            .collect();
        let all = [&zero[..], &span, &influence].concat();
        let pick = |places: &[usize]| {
            let values: Vec<f64> = places
                .iter()
                .map(|&place| blend.coefficients[place])
                .collect();
            normalised(&values)
        };
        let size = all.len();
        let covariance = DMatrix::from_fn(size, size, |i, j| blend.covariance[(all[i], all[j])]);
        let mut per_degree = vec![0.0; joint.largest + 1];
        for (model, weight) in models.iter().zip(weights) {
            per_degree[usize::from(model.degree)] += weight;
        }
        let criterion = match self.setup.forced_degree {
            None => joint
                .zero_contest(&joint.sides())
                .criterion_values(self.setup.criterion),
            Some(_) => CriterionValues::default(),
        };
        let (from, to) = (self.window.oldest()?, self.window.newest()?);
        Some(Published {
            origin: to,
            degree: self.degree(),
            weights: per_degree,
            coefficients: pick(&zero),
            span: pick(&span),
            influences: pick(&influence),
            covariance: rows_of(&covariance),
            turn_variance: 0.0,
            degrees_of_freedom: scatter.degrees_of_freedom,
            residual_sd: joint.rows_sd(),
            criterion,
            window: WindowSeen {
                from,
                to,
                pairs: self.window.rows(),
                segments: u32::try_from(groups.closed.len()).unwrap_or(u32::MAX),
                effective_sample_size: scatter.effective,
                lag_one: joint.lag_one,
            },
            models: models
                .iter()
                .zip(weights)
                .map(|(&model, &weight)| ModelWeight { model, weight })
                .collect(),
            terms: self.terms(),
        })
    }
}

/// All rows, mean rows and contrast rows of each group at one variance, at the level returned.
pub(super) fn weighted(
    groups: &Groups<'_>,
    joint: &Joint,
    columns: Columns,
    worth: Worth,
) -> Option<(Factor, f64)> {
    let level = groups.open.as_ref().or(groups.closed.last())?.level;
    let mut merged = Factor::new(columns.count());
    for group in groups.closed.iter().chain(&groups.open) {
        take_group(&mut merged, group, level, joint, (columns, worth));
    }
    Some((merged, level))
}

fn take_group(
    merged: &mut Factor,
    group: &Group<'_>,
    level: f64,
    joint: &Joint,
    (columns, worth): (Columns, Worth),
) {
    let width = columns.count() + 1;
    let mut take = |row: &[f64; MAX_WIDTH], scale: f64| {
        let scaled: Vec<f64> = row[..width].iter().map(|entry| scale * entry).collect();
        merged.insert(&scaled);
    };
    let factor = &group.factor;
    let root = joint.weighting.multiplier(factor.weight_sum()).sqrt();
    let mut mean = [0.0; MAX_WIDTH];
    for (j, entry) in mean.iter_mut().enumerate().take(width) {
        *entry = factor.entry(0, j);
    }
    mean[width - 1] -= (level - group.level) * mean[0];
    take(&mean, root);
    let apart = Apart::of(factor, columns);
    for contrast in &apart.contrasts {
        take(&contrast.row, worth.scales[contrast.kind]);
    }
    for row in &apart.rest {
        take(row, root);
    }
}

impl Member {
    /// A model's fit, where its columns are independent.
    fn of(
        model: Model,
        (weight, spread): (f64, f64),
        factor: &Factor,
        columns: Columns,
        variance: f64,
    ) -> Option<Self> {
        let places = model.places(columns);
        let own = factor.choose(&places);
        let solved = own.solve(places.len())?;
        let root = own.covariance_factor(places.len())?;
        let inner = &root * root.transpose() * variance;
        let size = columns.count();
        let mut coefficients = DVector::zeros(size);
        let mut covariance = DMatrix::zeros(size, size);
        for (i, &to) in places.iter().enumerate() {
            coefficients[to] = solved[i];
            for (j, &across) in places.iter().enumerate() {
                covariance[(to, across)] = inner[(i, j)];
            }
        }
        Some(Self {
            weight,
            spread,
            coefficients,
            covariance,
        })
    }
}

impl Blend {
    /// `β̄ = Σ w β` and `C = Σ v (C_m + (β_m − β̄)(β_m − β̄)ᵀ)`, as in `mean`.
    fn of(members: &[Member], size: usize) -> Self {
        let mut coefficients = DVector::zeros(size);
        for member in members {
            coefficients += &member.coefficients * member.weight;
        }
        let mut covariance = DMatrix::zeros(size, size);
        for member in members {
            let apart = &member.coefficients - &coefficients;
            covariance += (&member.covariance + &apart * apart.transpose()) * member.spread;
        }
        Self {
            coefficients,
            covariance,
        }
    }

    /// Adds what a slope wrong by `share` about the mean level would be.
    fn doubt_slope(&mut self, share: f64, factor: &Factor, columns: Columns) {
        let x = columns.span_place(0);
        let mean = factor.mean_row().map_or(0.0, |mean| mean[x]);
        let mut shift = DVector::zeros(columns.count());
        shift[x] = share;
        shift[0] = -share * mean;
        self.covariance += &shift * shift.transpose();
    }
}
