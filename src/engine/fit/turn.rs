//! What a drift that turned within the window would make of the error now.
//!
//! A polynomial of low degree over a whole window lags behind a drift that began not long ago, and
//! its covariance does not say so: when a drift of 1σ per window sets in, the published mean is at
//! first wrong by all of it. So, beside the degrees, a few further models are looked at: a degree's
//! curve, and a line on top of it that starts a half, a quarter, an eighth or a sixteenth of the
//! segments ago. They have no part in ê. By as much as the segments speak for them, their
//! disagreement with ê enters u.
//!
//! A turn costs its weight Akaike's penalty of its degree's coefficients and of the line's, and the
//! share of the window that its start stands for: a drift may turn at any time, so that one in the
//! newest sixteenth is as much less likely beforehand as that is shorter.

use crate::fit::between::Between;
use crate::fit::factor::{MAX_COLUMNS, PerColumn};
use crate::math;

/// Highest degree that a turn is put on: a parabola with a line on top is too pliable to tell much.
const HIGHEST_DEGREE: usize = 1;
/// How many times the part of the window after the turn is halved: 1/2 … 1/16.
const HALVINGS: usize = 4;
/// Fewest segments that a line can start in.
const SHORTEST: usize = 2;
/// Segments from which on a parabola is looked at, and so a turn.
const LEAST_SEGMENTS: usize = 12;
/// A line that keeps less than this part of its square beside the degree's curve says nothing.
const LEAST_OWN: f64 = 1e-9;

/// One model with a turn, compared with its degree's curve.
#[derive(Clone, Debug)]
pub(crate) struct Turn {
    /// The degree that it stands on.
    pub(crate) degree: usize,
    /// Scaled time at which the line on top starts.
    start: f64,
    /// Coefficient of that line.
    coefficient: f64,
    /// Of the line with the basis Q of the largest model.
    basis: Vec<f64>,
    /// ln of its weight, where degree 0's is 0.
    pub(crate) logarithm: f64,
    /// Its weight; those of all turns and degrees sum to 1.
    weight: f64,
}

/// Sums over the groups after a turn, in units of their standard deviations, of the line x with
/// itself, with the basis Q of the largest model, and with what that model leaves.
struct Sums {
    line: f64,
    basis: Vec<f64>,
    residual: f64,
}

impl Between {
    /// Models with a turn on a sample of `effective`, beside degrees with these logarithms of their
    /// weights; none where there are few segments or only degree 0 is looked at.
    pub(crate) fn turns(&self, effective: f64, logarithms: &[f64]) -> Vec<Turn> {
        let mut turns = Vec::new();
        if self.segments < LEAST_SEGMENTS || self.largest == 0 {
            return turns;
        }
        let Some(basis) = self.basis() else {
            return turns;
        };
        for halving in 1..=HALVINGS {
            let length = self.segments >> halving;
            if length < SHORTEST {
                break;
            }
            let first = self.segments - length;
            let start = 0.5 * (self.rows[first - 1].time() + self.rows[first].time());
            let sums = self.sums(first, start, &basis);
            let share = halving as f64 * std::f64::consts::LN_2;
            turns.extend(self.turned(&sums).into_iter().filter_map(
                |(degree, coefficient, rss)| {
                    let log_likelihood = 0.5 * effective * self.ln_ratio(0, rss)?;
                    // The degree's coefficients beyond the constant, and the line's.
                    let penalty = degree as f64 + 1.0 + share;
                    Some(Turn {
                        degree,
                        start,
                        coefficient,
                        basis: sums.basis.clone(),
                        logarithm: log_likelihood - penalty,
                        weight: 0.0,
                    })
                },
            ));
        }
        weigh(&mut turns, logarithms);
        turns
    }

    /// Rows of Q, the orthonormal basis of the largest model.
    fn basis(&self) -> Option<Vec<PerColumn>> {
        let rows = self.rows.iter().zip(&self.roots);
        rows.map(|(row, root)| Some(self.factor.whitened(&row.phi[..=self.largest])? * *root))
            .collect()
    }

    fn sums(&self, first: usize, start: f64, basis: &[PerColumn]) -> Sums {
        let mut sums = Sums {
            line: 0.0,
            basis: vec![0.0; self.largest + 1],
            residual: 0.0,
        };
        let rows = self.rows.iter().zip(&self.roots);
        let rows = rows.zip(&self.residuals).zip(basis);
        for (((row, root), residual), q) in rows.skip(first) {
            let x = root * (row.time() - start);
            sums.line += x * x;
            sums.residual += x * residual;
            for (sum, q) in sums.basis.iter_mut().zip(q.iter()) {
                *sum += x * q;
            }
        }
        sums
    }

    /// For each degree: the coefficient of the line on top, and what residual sum of squares it
    /// leaves.
    ///
    /// For degree k, x° = x less its projections on the first k + 1 columns of Q; the line's
    /// coefficient is x°ᵀr/|x°|², and RSS falls by (x°ᵀr)²/|x°|². From one degree to the next
    /// lower, the projection on one column and what that column explains come back.
    fn turned(&self, sums: &Sums) -> Vec<(usize, f64, f64)> {
        let projected = |k: usize| sums.basis[..=k].iter().map(|q| q * q).sum::<f64>();
        let explained = |k: usize| -> f64 {
            (k + 1..=self.largest)
                .map(|j| sums.basis[j] * self.factor.entry(j, self.factor.columns()))
                .sum()
        };
        let line = sums.line;
        (0..=self.largest.min(HIGHEST_DEGREE))
            .filter_map(|k| {
                let own = line - projected(k);
                let with = sums.residual + explained(k);
                let coefficient = with / own;
                let rss = (self.grades.rss[k] - coefficient * with).max(0.0) + self.grades.rounding;
                (own > LEAST_OWN * line && coefficient.is_finite()).then_some((k, coefficient, rss))
            })
            .collect()
    }

    /// `Σ ω (ê_turn − ê)²`: what turns add to u² at scaled time `now`, where `curves` are the
    /// degrees' values there and `mean` is ê.
    pub(crate) fn allowance(&self, turns: &[Turn], now: f64, curves: &[f64], mean: f64) -> f64 {
        let mut powers = [1.0; MAX_COLUMNS];
        for place in 1..=self.largest {
            powers[place] = powers[place - 1] * now;
        }
        let Some(here) = self.factor.whitened(&powers[..=self.largest]) else {
            return 0.0;
        };
        turns
            .iter()
            .map(|turn| {
                let apart = curves[turn.degree] + turn.shift(now, &here) - mean;
                turn.weight * apart * apart
            })
            .sum()
    }
}

impl Turn {
    /// By how much it moves its degree's curve at scaled time `now`, where Q's row is `here`.
    fn shift(&self, now: f64, here: &PerColumn) -> f64 {
        let basis = self.basis.iter().zip(here.iter());
        let reached: f64 = basis.take(self.degree + 1).map(|(x, q)| x * q).sum();
        self.coefficient * (now - self.start - reached)
    }
}

/// Weighs turns and degrees together by the logarithms of their weights.
fn weigh(turns: &mut [Turn], logarithms: &[f64]) {
    let all = logarithms
        .iter()
        .copied()
        .chain(turns.iter().map(|turn| turn.logarithm));
    let highest = all.clone().fold(f64::MIN, f64::max);
    let sum: f64 = all.map(|logarithm| math::exp(logarithm - highest)).sum();
    for turn in turns {
        turn.weight = math::exp(turn.logarithm - highest) / sum;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::between::Groups;
    use crate::fit::factor::Factor;
    use crate::fit::{Fit, Row};
    use crate::setup::{Criterion, FitSetup, PairNoise, WindowLength};
    use crate::time::Timestamp;
    use approx::assert_relative_eq;

    /// A fit of one row a minute, 64 segments of 4, with noise that needs no generator.
    fn fit(rows: u32, forced_degree: Option<u8>, drift: impl Fn(f64) -> f64) -> Fit {
        let mut fit = Fit::new(FitSetup {
            window: WindowLength::Pairs(256),
            segments: 64,
            max_degree: 2,
            forced_degree,
            criterion: Criterion::Bic,
            max_span_degree: None,
            influences: 0,
            noise: PairNoise::default(),
        });
        for i in 0..rows {
            let noise = (f64::from(i) * 0.618_033_988_749_895).fract() - 0.5;
            fit.insert(Row {
                time: Timestamp(i64::from(i) * 60_000_000_000),
                error: drift(f64::from(i)) + noise,
                weight: 1.0,
                x: 0.0,
                influences: [0.0; 2],
            });
        }
        fit
    }

    /// Least squares of degree k with the line as one more column.
    #[test]
    fn a_turn_is_the_least_squares_fit_with_one_more_column() {
        let fit = fit(256, None, |i| 0.02 * (i - 200.0).max(0.0));
        let groups = Groups::of(fit.window());
        let between = Between::of(&groups.closed, 2, false).expect("segments");
        let now = fit
            .window()
            .frame()
            .scaled(fit.window().newest().expect("rows"));
        let turns = between.turns(64.0, &[0.0; 3]);
        let powers: Vec<f64> = (0..3)
            .map(|k| crate::math::pow(now, f64::from(k)))
            .collect();
        let here = between.factor.whitened(&powers).expect("independent");
        assert_eq!(turns.len(), HALVINGS * (HIGHEST_DEGREE + 1));
        for (place, turn) in turns.iter().enumerate() {
            let halving = 1 + place / (HIGHEST_DEGREE + 1);
            let first = 64 - (64 >> halving);
            let start = 0.5 * (between.rows[first - 1].time() + between.rows[first].time());
            let columns = turn.degree + 1;
            let line = |time: f64| (time - start).max(0.0);
            let mut with = Factor::new(columns + 1);
            let mut without = Factor::new(columns);
            for (row, root) in between.rows.iter().zip(&between.roots) {
                let mut entries: Vec<f64> = row.phi[..columns].iter().map(|p| p * root).collect();
                without.insert(&[&entries[..], &[row.error * root]].concat());
                entries.push(line(row.time()) * root);
                with.insert(&[&entries[..], &[row.error * root]].concat());
            }
            let value = |factor: &Factor, count: usize| {
                let beta = factor.solve(count).expect("independent");
                let powers = (0..columns).map(|k| beta[k] * crate::math::pow(now, k as f64));
                let curve: f64 = powers.sum();
                curve
                    + if count > columns {
                        beta[columns] * line(now)
                    } else {
                        0.0
                    }
            };
            let shift = value(&with, columns + 1) - value(&without, columns);
            assert_relative_eq!(
                turn.shift(now, &here),
                shift,
                epsilon = 1e-9,
                max_relative = 1e-6
            );
            let ratio = between.grades.rss[0] / with.nested_rss()[columns];
            let penalty = turn.degree as f64 + 1.0 + halving as f64 * std::f64::consts::LN_2;
            let expected = 32.0 * crate::math::ln(ratio) - penalty;
            assert_relative_eq!(turn.logarithm, expected, epsilon = 1e-6);
        }
    }

    #[test]
    fn a_drift_that_has_begun_widens_and_a_quiet_one_hardly_does() {
        let widened = |rows, forced, slope: f64| {
            let fit = fit(rows, forced, |i| slope * (i - 400.0).max(0.0));
            fit.published().expect("rows").turn_variance.sqrt()
        };
        let quiet = widened(432, None, 0.0);
        let begun = widened(432, None, 0.01);
        assert!(quiet < 0.05, "{quiet}");
        assert!(
            begun > 2.0 * quiet,
            "{begun} after an onset, {quiet} without"
        );
        assert!(
            widened(432, Some(1), 0.01) <= 0.0,
            "a forced degree is taken at its word"
        );
        assert!(widened(40, None, 0.0) <= 0.0, "few segments tell no turn");
    }
}
