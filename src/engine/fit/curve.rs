//! The published mean at one level: a polynomial in time with its covariance.

use crate::fit::Published;
use crate::fit::basis::MAX_INFLUENCES;

/// ê(t) where level and influence quantities stay as they are, t in days from the mean's origin.
#[derive(Clone, Debug, PartialEq)]
pub struct Curve {
    /// Coefficients, constant first.
    pub coefficients: Vec<f64>,
    /// Their covariance.
    pub covariance: Vec<Vec<f64>>,
}

impl Published {
    /// The mean at level `x` with these influence quantities.
    ///
    /// With T the matrix that adds (x − centre) times each span coefficient to that of the zero,
    /// and (q − centre) times each influence's effect to the constant: coefficients T·β, covariance
    /// T·C·Tᵀ.
    #[must_use]
    pub fn at_level(&self, x: f64, influences: [f64; MAX_INFLUENCES]) -> Curve {
        let zero = self.coefficients.len();
        let span = self.span.len();
        let size = zero.max(span);
        let centre = self.terms.centre;
        let mut parts: Vec<Vec<(usize, f64)>> = (0..size)
            .map(|power| Vec::from_iter((power < zero).then_some((power, 1.0))))
            .collect();
        for (power, part) in parts.iter_mut().enumerate().take(span) {
            part.push((zero + power, x - centre.x));
        }
        for (place, value) in influences.iter().enumerate().take(self.influences.len()) {
            parts[0].push((zero + span + place, value - centre.influences[place]));
        }
        let all: Vec<f64> = self
            .coefficients
            .iter()
            .chain(&self.span)
            .chain(&self.influences)
            .copied()
            .collect();
        let sum = |part: &[(usize, f64)], of: &dyn Fn(usize) -> f64| -> f64 {
            part.iter().map(|&(place, by)| by * of(place)).sum()
        };
        Curve {
            coefficients: parts
                .iter()
                .map(|part| sum(part, &|place| all[place]))
                .collect(),
            covariance: parts
                .iter()
                .map(|row| {
                    let between = |column: &[(usize, f64)]| {
                        sum(row, &|i| sum(column, &|j| self.covariance[i][j]))
                    };
                    parts.iter().map(|column| between(column)).collect()
                })
                .collect(),
        }
    }
}
