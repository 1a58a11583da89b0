//! The instruments of Harrow Mere, an invented small lakeside water works.
//!
//! Levels, noises and limits are plausible orders of magnitude, not data of any real plant or
//! product.

use serde::Serialize;

/// The node's and the topics' first level.
pub const PLANT: &str = "harrow-mere";

/// Seconds between two indications of every instrument.
pub const CADENCE_SECONDS: i64 = 1200;

/// One quantity measured by one sensor, with the reference beside it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Instrument {
    /// Place and sensor, as in topics and documents.
    pub name: &'static str,
    /// Unit of every value below that has one.
    pub unit: &'static str,
    /// Mean of the true value.
    pub level: f64,
    /// Amplitude of the true value's daily cycle.
    pub swing: f64,
    /// Standard deviation of the true value's slow wander (correlated over about a day).
    pub wander: f64,
    /// Standard deviation of the indication's noise.
    pub noise: f64,
    /// Lag-1 correlation of that noise from one indication to the next.
    pub memory: f64,
    /// Decimals that the indication shows; its resolution is one unit of the last.
    pub decimals: usize,
    /// Lowest and highest value that the sensor can show.
    pub span: (f64, f64),
    /// Largest error that its specification permits, either sign.
    pub max_permissible_error: f64,
    /// Indications between two reference values.
    pub reference_every: u32,
    /// Seconds from an indication to the reference value; not 0: the pair needs interpolation.
    pub reference_offset_seconds: i64,
    /// Standard deviation of a single reference value, independent between values.
    pub reference_each: f64,
    /// Standard deviation of the error that all its reference values share.
    pub reference_common: f64,
    /// Days that the fit looks back.
    pub window_days: f64,
}

impl Instrument {
    /// Smallest step of the indication, in its unit.
    #[must_use]
    pub fn resolution(&self) -> f64 {
        libm::pow(10.0, -(self.decimals as f64))
    }

    /// The topic of its indications.
    #[must_use]
    pub fn topic(&self) -> String {
        format!("{PLANT}/{}", self.name)
    }

    /// The name of its reference.
    #[must_use]
    pub fn reference(&self) -> String {
        format!("reference/{}", self.name)
    }

    /// The topic of its reference's values.
    #[must_use]
    pub fn reference_topic(&self) -> String {
        format!("{PLANT}/{}", self.reference())
    }
}

/// All instruments. Their order decides their random numbers: append, never insert.
#[rustfmt::skip]
pub const INSTRUMENTS: [Instrument; 13] = [
    with("intake/ph-1", "pH", (7.4, 0.08, 0.05), (0.02, 0.6), 3, (0.0, 14.0), 0.2, 5.0),
    with("intake/oxygen-1", "mg/L", (9.0, 0.6, 0.1), (0.04, 0.6), 2, (0.0, 25.0), 2.0, 3.0),
    with("intake/turbidity-1", "NTU", (6.0, 0.3, 0.4), (0.1, 0.5), 2, (0.0, 40.0), 2.5, 2.0),
    with("intake/temperature-1", "Cel", (11.0, 0.8, 0.4), (0.04, 0.7), 2, (-5.0, 50.0), 0.5, 7.0),
    with("filter-hall/turbidity-2", "NTU",
        (0.4, 0.02, 0.02), (0.01, 0.5), 3, (0.0, 10.0), 0.2, 5.0),
    with("contact-tank/chlorine-1", "mg/L",
        (0.9, 0.05, 0.05), (0.02, 0.6), 3, (0.0, 5.0), 0.8, 5.0),
    with("contact-tank/ph-2", "pH", (7.6, 0.03, 0.03), (0.02, 0.8), 3, (0.0, 14.0), 0.2, 5.0),
    with("clearwell/conductivity-1", "uS/cm",
        (420.0, 4.0, 6.0), (1.5, 0.6), 1, (0.0, 2000.0), 80.0, 5.0),
    with("clearwell/level-1", "m", (3.5, 0.5, 0.1), (0.004, 0.3), 3, (0.0, 6.0), 0.05, 5.0),
    with("pump-house/pressure-1", "bar", (5.2, 0.2, 0.1), (0.01, 0.5), 3, (0.0, 16.0), 0.35, 2.0),
    with("pump-house/flow-1", "m3/h", (310.0, 40.0, 10.0), (1.5, 0.5), 1, (0.0, 800.0), 15.0, 5.0),
    with("weather-mast/pressure-1", "hPa",
        (1008.0, 1.0, 5.0), (0.15, 0.9), 2, (800.0, 1100.0), 2.0, 5.0),
    with("weather-mast/humidity-1", "%RH",
        (72.0, 10.0, 4.0), (0.8, 0.7), 1, (0.0, 110.0), 40.0, 10.0),
];

/// An instrument with an hourly reference: `truth` is level, swing and wander; `noise` its standard
/// deviation and memory.
#[allow(
    clippy::too_many_arguments,
    reason = "one line per instrument keeps the table readable"
)]
const fn with(
    name: &'static str,
    unit: &'static str,
    truth: (f64, f64, f64),
    noise: (f64, f64),
    decimals: usize,
    span: (f64, f64),
    max_permissible_error: f64,
    window_days: f64,
) -> Instrument {
    Instrument {
        name,
        unit,
        level: truth.0,
        swing: truth.1,
        wander: truth.2,
        noise: noise.0,
        memory: noise.1,
        decimals,
        span,
        max_permissible_error,
        reference_every: 3,
        reference_offset_seconds: if window_days > 2.0 { 420 } else { 0 },
        reference_each: noise.0 * 0.3,
        reference_common: noise.0 * 0.05,
        window_days,
    }
}
