//! Whether the pairs since a signal are a step: against the extrapolation of the largest model
//! fitted to the pairs before it, and against a bend.

use super::bend::Series;
use super::noise::Known;
use crate::channel::publishing::NEGLIGIBLE;
use crate::channel::recent::{Recent, Remembered};
use crate::channel::stretch::{Stretch, row};
use crate::fit::Row;
use crate::fit::predict::Fitted;
use crate::median::upper_median;
use crate::quantile;
use crate::setup::ChannelSetup;
use crate::time::Timestamp;

/// Pairs before the change that the place of the step is looked for among.
const BEFORE: usize = 64;
/// What a pair can contribute to the mean after the change, in standard deviations about their
/// median: an outlier among them makes no step.
const REACH: f64 = 4.0;
/// Pairs before the change whose scatter counts as that of late.
const LATEST: usize = 32;
/// Φ⁻¹(0.8).
const UPPER_QUINTILE: f64 = 0.841_621_233_572_914_2;
/// A step must explain the pairs better than any bend by so much of twice the log likelihood:
/// strong evidence, as for a degree (Kass & Raftery 1995, p. 777).
pub(super) const BEND_MARGIN: f64 = 6.0;
/// Where the noise is slow, no mean over few pairs stands out from it, but a leap between two pairs
/// does: a step whose leap in the whitened residuals beats every bend by this many times what is
/// asked of the mean is one, whatever the level before it may do.
const LEAP: f64 = 2.0;

/// A step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Finding {
    /// The last pair before the change, and the first after it.
    pub(crate) last_before: Option<Timestamp>,
    pub(crate) first_after: Timestamp,
    /// The earliest and latest pair that may have been the first after it.
    pub(crate) earliest: Timestamp,
    pub(crate) latest: Timestamp,
    /// Mean of the pairs after the change beyond the extrapolation, or the leap at the change where
    /// that alone stands out; and its standard uncertainty.
    pub(crate) size: f64,
    pub(crate) u: f64,
    /// How many u are needed.
    pub(crate) needed: f64,
    /// The extrapolation at the first pair after the change.
    pub(crate) before: f64,
    /// Pairs after the change.
    pub(crate) pairs: usize,
    /// By how much the step explains the pairs better than a bend.
    pub(crate) gain: f64,
}

/// What is looked at.
pub(super) struct Question<'a> {
    pub(super) stretch: &'a Stretch,
    pub(super) recent: &'a Recent,
    pub(super) setup: &'a ChannelSetup,
    pub(super) known: Known,
    pub(super) up: bool,
    /// Fewest pairs that make a step.
    pub(super) least: usize,
    /// So many u must a step have, with the noise known exactly.
    pub(super) confirmation: f64,
}

/// A pair with the model before the change taken off.
#[derive(Clone, Copy)]
struct Rest {
    row: Row,
    /// As it is.
    raw: f64,
    /// As far as it counts for when the step was: an outlier beyond both levels is clipped.
    shape: f64,
    /// As far as it counts for the level after the step.
    residual: f64,
}

impl Question<'_> {
    /// Looks for a step that began about `began`; `None` if there is none, or no model from before
    /// it.
    pub(super) fn look(&self, began: Timestamp) -> Option<Finding> {
        let mut pairs: Vec<&Remembered> = self
            .recent
            .iter()
            .filter(|held| held.stretch == self.stretch.number())
            .collect();
        pairs.sort_by_key(|held| held.pair.time);
        let first = self.place(&pairs, began)?;
        self.find(&pairs, first)
    }

    /// When the step most likely happened, with the model from before the signal's beginning.
    fn place(&self, pairs: &[&Remembered], began: Timestamp) -> Option<Timestamp> {
        let fit = self.stretch.fit_before(began, self.recent, self.setup);
        let rests = self.rests(pairs, &fit.ahead()?, began);
        let place = self.series(&rests).step(self.up)?;
        Some(rests.get(place.first)?.row.time)
    }

    fn find(&self, pairs: &[&Remembered], first_after: Timestamp) -> Option<Finding> {
        let fit = self
            .stretch
            .fit_before(first_after, self.recent, self.setup);
        let ahead = fit.ahead()?;
        let rests = self.rests(pairs, &ahead, first_after);
        let series = self.series(&rests);
        let place = series.step(self.up)?;
        let split = rests.partition_point(|rest| rest.row.time < first_after);
        let (before, after) = rests.split_at(split);
        let first = after.first()?;
        let n = after.len() as f64;
        let rows: Vec<Row> = after.iter().map(|rest| rest.row).collect();
        let learned = self.known.sd.max(ahead.residual_sd);
        let grown = (scatter(before, after) / learned).max(1.0);
        let sd = learned * grown;
        let thin = rows.iter().map(|row| 1.0 / row.weight).sum::<f64>() / n;
        let variance = self.known.inflation * ahead.leverage(&rows)? + self.known.of_mean(n) * thin;
        let u = sd * variance.sqrt();
        let size = after.iter().map(|rest| rest.residual).sum::<f64>() / n;
        let outside = 2.0 * quantile::normal_below(-self.confirmation);
        let needed = quantile::student(1.0 - outside, self.known.degrees_of_freedom);
        let gain = (place.gain - series.bend()) / (grown * grown);
        let (size, u) = if size.abs() >= needed * u && gain >= BEND_MARGIN {
            (size, u)
        } else if gain >= (LEAP * needed) * (LEAP * needed) {
            let scale = 1.0 / first.row.weight.sqrt();
            (
                place.size * scale,
                place.size.abs() / place.gain.sqrt() * grown * scale,
            )
        } else {
            return None;
        };
        // In a stream without noise the last digits leap.
        let is_news = size.abs() > NEGLIGIBLE * ahead.expected(&first.row).abs();
        let is_step = is_news && after.len() >= self.least && lasts(after, size);
        is_step.then_some(Finding {
            last_before: before.last().map(|rest| rest.row.time),
            first_after,
            earliest: rests.get(place.earliest)?.row.time.min(first_after),
            latest: rests.get(place.latest)?.row.time.max(first_after),
            size,
            u,
            needed,
            before: ahead.expected(&first.row),
            pairs: after.len(),
            gain,
        })
    }

    /// The last [`BEFORE`] pairs that entered before `from`, and all since then, less the model.
    fn rests(&self, pairs: &[&Remembered], ahead: &Fitted<'_>, from: Timestamp) -> Vec<Rest> {
        let rest = |held: &&Remembered| {
            let row = row(&held.pair, self.setup);
            let residual = ahead.residual(&row);
            Rest {
                row,
                raw: residual,
                shape: residual,
                residual,
            }
        };
        let split = pairs.partition_point(|held| held.pair.time < from);
        let (before, after) = pairs.split_at(split);
        let entered = before.iter().filter(|held| held.rejected.is_none());
        let mut rests: Vec<Rest> = entered.rev().take(BEFORE).map(rest).collect();
        rests.reverse();
        let mut after: Vec<Rest> = after.iter().map(rest).collect();
        let reach = REACH * self.known.sd.max(ahead.residual_sd);
        let mut levels: Vec<f64> = after.iter().map(|rest| rest.raw).collect();
        let centre = upper_median(&mut levels);
        for rest in &mut after {
            rest.residual = rest.raw.clamp(centre - reach, centre + reach);
            // Where the signal began early, pairs from before the step are among these. Drawn
            // towards its level they would move it.
            let levels = (centre.min(0.0), centre.max(0.0));
            rest.shape = rest.raw.clamp(levels.0 - reach, levels.1 + reach);
        }
        rests.append(&mut after);
        rests
    }

    fn series(&self, rests: &[Rest]) -> Series {
        let first = rests.first().map_or(Timestamp(0), |rest| rest.row.time);
        let last = rests.last().map_or(first, |rest| rest.row.time);
        let length = (last.since(first).0 as f64).max(1.0);
        let times = rests
            .iter()
            .map(|rest| rest.row.time.since(first).0 as f64 / length)
            .collect();
        let residuals: Vec<f64> = rests
            .iter()
            .map(|rest| rest.shape * rest.row.weight.sqrt())
            .collect();
        Series::new(times, &residuals, self.known.phi, self.known.unit)
    }
}

/// Standard deviation of a pair of late, as far as it must be: noise that has grown is learned
/// slowly, and a few pairs of it look like a step to who only knows the old. That of the pairs
/// after the change about their mean, and that of these with the latest before it, each no larger
/// than chance makes it in one of five: s·√(ν/χ²) with the upper quintile of χ² (Wilson & Hilferty
/// 1931, from memory).
fn scatter(before: &[Rest], after: &[Rest]) -> f64 {
    let latest = &before[before.len().saturating_sub(LATEST)..];
    let mean = after.iter().map(|rest| rest.residual).sum::<f64>() / after.len().max(1) as f64;
    let square = |rest: &Rest, level: f64| {
        let deviation = rest.residual - level;
        deviation * deviation * rest.row.weight
    };
    let before: f64 = latest.iter().map(|rest| square(rest, 0.0)).sum();
    let after_squares: f64 = after.iter().map(|rest| square(rest, mean)).sum();
    let least = |squares: f64, count: usize| {
        let freedom = count.saturating_sub(1).max(1) as f64;
        let part = 2.0 / (9.0 * freedom);
        let quotient = 1.0 - part + UPPER_QUINTILE * part.sqrt();
        (squares / freedom / (quotient * quotient * quotient)).sqrt()
    };
    let both = least(before + after_squares, latest.len() + after.len());
    least(after_squares, after.len()).max(both)
}

/// Whether the error stayed where it stepped to: two thirds of the pairs and the newest are nearer
/// to the new level than to the old one. Outliers in a row come back.
fn lasts(after: &[Rest], size: f64) -> bool {
    let is_there = |rest: &&Rest| rest.raw / size > 0.5;
    let there = after.iter().filter(is_there).count();
    3 * there >= 2 * after.len() && after.last().is_some_and(|newest| is_there(&newest))
}
