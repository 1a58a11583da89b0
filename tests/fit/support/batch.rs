//! A plain batch least squares in double-double numbers: slow, obvious, and right to far more
//! digits than what it is compared with.

use super::double::Double;

/// The triangle of a batch problem [Φ | e].
pub(crate) struct Batch {
    /// Rows of the triangle, full length.
    r: Vec<Vec<Double>>,
}

/// QR by modified Gram–Schmidt (Golub & Van Loan, *Matrix Computations*, §5.2.8) of the given
/// columns, error last. A column without a part of its own gets a zero diagonal.
pub(crate) fn factor(mut columns: Vec<Vec<Double>>) -> Batch {
    let width = columns.len();
    let mut r = vec![vec![Double::ZERO; width]; width];
    for j in 0..width {
        let (done, rest) = columns.split_at_mut(j + 1);
        let pivot = &mut done[j];
        let length = dot(pivot, pivot).sqrt();
        r[j][j] = length;
        if length == Double::ZERO {
            continue;
        }
        for entry in pivot.iter_mut() {
            *entry = *entry / length;
        }
        for (offset, column) in rest.iter_mut().enumerate() {
            let part = dot(pivot, column);
            r[j][j + 1 + offset] = part;
            for (entry, &along) in column.iter_mut().zip(pivot.iter()) {
                *entry = *entry - part * along;
            }
        }
    }
    Batch { r }
}

/// Time rows (nanoseconds, error, weight) as columns 1, u, …, u^degree and e, scaled by √w; u is
/// centred on the rows: −1 at the oldest, 1 at the newest. Returns the batch and the function from
/// time to u.
pub(crate) fn polynomial(
    rows: &[(i64, f64, f64)],
    degree: usize,
) -> (Batch, impl Fn(i64) -> Double) {
    let oldest = rows.iter().map(|row| row.0).min().expect("rows");
    let newest = rows.iter().map(|row| row.0).max().expect("rows");
    let half = (Double::from_integer(newest - oldest) / Double::from(2.0))
        .0
        .max(0.5);
    let scaled =
        move |time: i64| Double::from_integer(time - oldest) / Double::from(half) - Double::ONE;
    let mut columns = vec![Vec::with_capacity(rows.len()); degree + 2];
    for &(time, error, weight) in rows {
        let root = Double::from(weight).sqrt();
        let u = scaled(time);
        let mut power = root;
        for column in &mut columns[..=degree] {
            column.push(power);
            power = power * u;
        }
        columns[degree + 1].push(Double::from(error) * root);
    }
    (factor(columns), scaled)
}

impl Batch {
    fn width(&self) -> usize {
        self.r.len()
    }

    /// RSS of the model of the first `columns` columns.
    pub(crate) fn rss(&self, columns: usize) -> f64 {
        let last = self.width() - 1;
        let sum = (columns..=last).map(|i| self.r[i][last] * self.r[i][last]);
        sum.fold(Double::ZERO, |sum, square| sum + square).float()
    }

    /// Coefficients of the model of the first `columns` columns.
    pub(crate) fn solve(&self, columns: usize) -> Vec<Double> {
        let last = self.width() - 1;
        let mut x = vec![Double::ZERO; columns];
        for i in (0..columns).rev() {
            let mut rest = self.r[i][last];
            for (j, &known) in x.iter().enumerate().skip(i + 1) {
                rest = rest - self.r[i][j] * known;
            }
            x[i] = rest / self.r[i][i];
        }
        x
    }

    /// The polynomial fit of this degree at scaled time `u`.
    pub(crate) fn predict(&self, degree: usize, u: Double) -> f64 {
        let coefficients = self.solve(degree + 1);
        coefficients
            .iter()
            .rev()
            .fold(Double::ZERO, |value, &c| value * u + c)
            .float()
    }
}

fn dot(a: &[Double], b: &[Double]) -> Double {
    a.iter()
        .zip(b)
        .fold(Double::ZERO, |sum, (&x, &y)| sum + x * y)
}
