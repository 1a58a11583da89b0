//! What the fit of one channel is told.

use crate::time::Duration;
use serde::{Deserialize, Serialize};

/// How far a fit looks back.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum WindowLength {
    /// A span of time; segments close on a grid of time.
    Time(Duration),
    /// A number of pairs; segments close after a number of rows.
    Pairs(u32),
}

/// The criterion that judges degrees.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Criterion {
    /// Bayesian information criterion (Schwarz 1978), the default.
    Bic,
    /// Akaike information criterion with small-sample correction (Hurvich & Tsai 1989).
    Aicc,
}

/// What the fit of one channel is told.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct FitSetup {
    /// How far it looks back.
    pub window: WindowLength,
    /// Segments in a full window, 1 … 1024; with a window in pairs at most the number of pairs.
    pub segments: u32,
    /// Highest degree in time that may be announced, 0 … 5.
    pub max_degree: u8,
    /// Announce and publish exactly this degree, whatever the criterion says.
    pub forced_degree: Option<u8>,
    /// The criterion.
    pub criterion: Criterion,
    /// Highest degree in time of the span terms, 0 … 2 and no more than that of the zero; `None`:
    /// the error is taken not to depend on the level.
    pub max_span_degree: Option<u8>,
    /// Influence quantities that every row brings, 0 … 2.
    pub influences: u8,
    /// What is declared of the noise of both sides of a pair; only span terms ask for it.
    pub noise: PairNoise,
}

/// What is declared of the random part of a pair's two sides: standard deviations of the value
/// that enters a row, in the channel's unit. Zero: not declared.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct PairNoise {
    /// Of the reference value: its own `each`.
    pub reference: f64,
    /// Of the indication: declared noise and resolution, √(noise² + q²/12). Where a pair holds the
    /// mean of an interval, that of the mean.
    pub indication: f64,
}

/// Which side of a pair the span terms are a function of.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum SpanSide {
    /// The reference value. With S the slope of the error on it, an indication i is corrected by
    /// c = (zero correction − S·(i − centre)) / (1 + S).
    Reference,
    /// The indication: c = zero correction − S·(i − centre).
    Indication,
}

impl FitSetup {
    /// The side of a pair with less random noise, as far as that is declared. Noise in a regressor
    /// flattens its slope, and where it is the error's own noise too it makes up one. The
    /// reference value, unless the indication is declared to be quieter.
    ///
    /// It follows from the configuration alone, so that a fit never mixes sides.
    #[must_use]
    pub fn span_side(&self) -> SpanSide {
        let PairNoise {
            reference,
            indication,
        } = self.noise;
        if 0.0 < indication && indication < reference {
            SpanSide::Indication
        } else {
            SpanSide::Reference
        }
    }

    /// Whether rows made for one setup mean the same in the other: all but the declared noise, as
    /// long as it chooses the same side.
    #[must_use]
    pub fn has_same_rows(&self, other: &Self) -> bool {
        let same_side = self.max_span_degree.is_none() || self.span_side() == other.span_side();
        let noise = other.noise;
        same_side && Self { noise, ..*self } == *other
    }
}
