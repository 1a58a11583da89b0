//! Correlated noise.

use crate::range::Draw;

/// First-order autoregressive noise, `x_t = ρ·x_{t−1} + √(1 − ρ²)·σ·z_t`, stationary from its first
/// value (Box & Jenkins, *Time Series Analysis*, §3.2.3; from memory).
#[derive(Clone, Debug)]
pub struct Autoregressive {
    memory: f64,
    fresh: f64,
    deviation: f64,
    last: Option<f64>,
}

impl Autoregressive {
    /// Noise with the standard `deviation` and the lag-1 correlation `memory` (0 ≤ memory < 1).
    #[must_use]
    pub fn new(deviation: f64, memory: f64) -> Self {
        let fresh = deviation * libm::sqrt(1.0 - memory * memory);
        Self {
            memory,
            fresh,
            deviation,
            last: None,
        }
    }

    /// The next value.
    pub fn next(&mut self, draw: &mut Draw) -> f64 {
        let value = match self.last {
            None => self.deviation * draw.normal(),
            Some(last) => self.memory * last + self.fresh * draw.normal(),
        };
        self.last = Some(value);
        value
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::range::Duty;

    #[test]
    fn deviation_and_correlation_are_as_stated() {
        for memory in [0.0, 0.5, 0.9] {
            let mut draw = Draw::new(3, 0, Duty::Noise);
            let mut noise = Autoregressive::new(2.0, memory);
            let values: Vec<f64> = (0..200_000).map(|_| noise.next(&mut draw)).collect();
            let square: f64 = values.iter().map(|v| v * v).sum();
            let lagged: f64 = values.windows(2).map(|pair| pair[0] * pair[1]).sum();
            // Four standard errors of both estimates, with n reduced by the correlation.
            let effective = 200_000.0 * (1.0 - memory) / (1.0 + memory);
            let tolerance = 4.0 / libm::sqrt(effective);
            let deviation = libm::sqrt(square / 200_000.0);
            assert!(
                (deviation / 2.0 - 1.0).abs() < tolerance,
                "{memory}: {deviation}"
            );
            assert!(
                (lagged / square - memory).abs() < tolerance,
                "{memory}: {}",
                lagged / square
            );
        }
    }
}
