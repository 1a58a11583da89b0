//! How much of what varies in the level is noise, and what that does to a span.

use crate::fit::joint::{Joint, Worth};
use crate::setup::{PairNoise, SpanSide};

/// How much of what varies in the level is noise.
#[derive(Clone, Copy, Debug)]
pub(crate) struct SpanNoise {
    /// λ: by about so much a slope on the level is wrong.
    pub(crate) share: f64,
    /// Standard uncertainty of the slope.
    pub(crate) slope_u: f64,
}

impl Joint {
    /// λ and u of the span's slope, the span taken as constant and after everything else; `None`
    /// where the level does not vary beyond what the other terms explain.
    ///
    /// Noise of variance s² in every row's regressor adds N = s²·(rows) to the sum of squares about
    /// the other columns, x⊥² (itself included in what is found there). Where it is the error's own
    /// noise with the sign turned, as the reference's is, the slope b reads b − λ(1 + b), λ =
    /// N/x⊥²; the indication's reads b + λ(1 − b) to first order. (Fuller, *Measurement Error
    /// Models*, §1.1; from memory.)
    pub(crate) fn span_noise(&self, worth: Worth, noise: f64) -> Option<SpanNoise> {
        let x = self.columns.span_place(0);
        let is_span = |place: &usize| (x..self.columns.influence_place(0)).contains(place);
        let mut order: Vec<usize> = self.order().into_iter().filter(|p| !is_span(p)).collect();
        order.push(x);
        let factor = self.factor(worth).choose(&order);
        if factor.independent() < order.len() {
            return None;
        }
        let own = factor.entry(order.len() - 1, order.len() - 1);
        let scale = worth.scales[0];
        let of_means: f64 = self
            .means
            .iter()
            .map(|row| self.weighting.multiplier(row.weight))
            .sum();
        let of_contrasts: f64 = self
            .contrasts
            .iter()
            .filter(|c| c.kind == 0)
            .map(|c| c.noise)
            .sum();
        let energy = of_means + scale * scale * of_contrasts;
        Some(SpanNoise {
            share: noise * energy / (own * own),
            slope_u: (self.variance * worth.inflation).sqrt() / own,
        })
    }

    /// Variance of the noise in the regressor of the span terms. The reference's is what it
    /// declares for each value, or, if nothing, all that rows scatter; the indication's is what it
    /// declares, or what rows scatter beyond the reference's, whichever is more.
    pub(crate) fn regressor_noise(&self, side: SpanSide, declared: PairNoise) -> f64 {
        let each = declared.reference * declared.reference;
        match side {
            SpanSide::Reference if each > 0.0 => each,
            SpanSide::Reference => self.rows_variance,
            SpanSide::Indication => f64::max(
                declared.indication * declared.indication,
                self.rows_variance - each,
            ),
        }
    }
}
