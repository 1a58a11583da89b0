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
}
