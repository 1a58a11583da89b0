//! Where in a series of residuals a step is most likely, and how much better it explains them than
//! a bend does: the onset of a drift, or a curve that the model before it did not know.
//!
//! Least squares on whitened residuals: w = r − φ·r₋₁, and every shape is whitened alike (Prais &
//! Winsten; from memory). A step of size Δ at place m is Δ·(0 … 0, 1, 1−φ, 1−φ …); the gain of a
//! shape is what it takes off the sum of squares, in units of the noise: twice the gain in log
//! likelihood. Before the step the residuals are about zero, since they count from a model fitted
//! to them.

/// Residuals in order of time.
pub(super) struct Series {
    /// Instants, 0 … 1.
    times: Vec<f64>,
    whitened: Vec<f64>,
    phi: f64,
    /// Variance of a whitened residual, widened.
    variance: f64,
}

/// A step in a series.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Place {
    /// The first residual after it.
    pub(super) first: usize,
    /// The earliest and latest place that explain the series nearly as well.
    pub(super) earliest: usize,
    pub(super) latest: usize,
    /// Its gain.
    pub(super) gain: f64,
    /// Its size by generalised least squares; its standard uncertainty is size/√gain.
    pub(super) size: f64,
}

/// Places that are behind the best by no more than this are not told from it: the 95 % point of
/// χ² with one degree of freedom, as for a regular parameter. (A place is none; measured, the
/// interval of a 3σ step in white noise holds it in 96 %.)
const INDISTINCT: f64 = 3.84;

impl Series {
    /// `unit`: standard deviation of a whitened residual.
    pub(super) fn new(times: Vec<f64>, residuals: &[f64], phi: f64, unit: f64) -> Self {
        Self {
            times,
            whitened: whitened(residuals, phi),
            phi,
            variance: unit * unit,
        }
    }

    /// The most likely step of this sign.
    pub(super) fn step(&self, up: bool) -> Option<Place> {
        let tail = 1.0 - self.phi;
        // Sums over what follows a place.
        let mut sum = 0.0;
        let mut squares = 0.0;
        let mut gains = vec![0.0; self.whitened.len()];
        let mut sizes = vec![0.0; self.whitened.len()];
        for (place, &w) in self.whitened.iter().enumerate().rev() {
            let product: f64 = w + tail * sum;
            if (product > 0.0) == up {
                sizes[place] = product / (1.0 + squares);
                gains[place] = product * sizes[place] / self.variance;
            }
            sum += w;
            squares += tail * tail;
        }
        let (first, gain) = gains
            .iter()
            .copied()
            .enumerate()
            .reduce(|best, next| if next.1 > best.1 { next } else { best })?;
        let near = |place: &usize| gains[*place] >= gain - INDISTINCT;
        Some(Place {
            first,
            earliest: (0..=first).rev().take_while(near).last()?,
            latest: (first..gains.len()).take_while(near).last()?,
            gain,
            size: sizes[first],
        })
    }

    /// The largest gain of a bend: of a kink (zero, then a straight line) at any instant, and of a
    /// parabola.
    pub(super) fn bend(&self) -> f64 {
        let kinks = self.times.iter().map(|&onset| self.kink(onset));
        let kinks = kinks.fold(0.0, f64::max);
        let powers: [fn(f64) -> f64; 3] = [|_| 1.0, |t| t, |t| t * t];
        let shapes = powers.map(|power| self.times.iter().map(|&t| power(t)).collect());
        kinks.max(self.gain(&shapes))
    }

    /// The gain of a kink at an instant.
    fn kink(&self, onset: f64) -> f64 {
        let mut before = 0.0;
        let (mut product, mut square) = (0.0, 0.0);
        for (time, w) in self.times.iter().zip(&self.whitened) {
            let height = (time - onset).max(0.0);
            let entry = height - self.phi * before;
            product += entry * w;
            square += entry * entry;
            before = height;
        }
        if square > 0.0 {
            product * product / square / self.variance
        } else {
            0.0
        }
    }

    /// The gain of the best combination of shapes: Gram-Schmidt, shape by shape.
    fn gain(&self, shapes: &[Vec<f64>]) -> f64 {
        let mut basis: Vec<Vec<f64>> = Vec::with_capacity(shapes.len());
        let mut gain = 0.0;
        for shape in shapes {
            let mut rest = whitened(shape, self.phi);
            let size = dot(&rest, &rest);
            for known in &basis {
                let share = dot(known, &rest);
                for (entry, other) in rest.iter_mut().zip(known) {
                    *entry -= share * other;
                }
            }
            let left = dot(&rest, &rest);
            if left <= 1e-12 * size {
                continue;
            }
            let scale = 1.0 / left.sqrt();
            for entry in &mut rest {
                *entry *= scale;
            }
            let share = dot(&rest, &self.whitened);
            gain += share * share / self.variance;
            basis.push(rest);
        }
        gain
    }
}

fn whitened(values: &[f64], phi: f64) -> Vec<f64> {
    let first = values.first().map(|value| value * (1.0 - phi * phi).sqrt());
    let rest = values.windows(2).map(|two| two[1] - phi * two[0]);
    first.into_iter().chain(rest).collect()
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}
