//! The plain way: a batch QR (Householder, nalgebra with its defaults) of the whole window at every
//! row.

use crate::outputs::{DEGREES, Outputs, outputs};
use nalgebra::{DMatrix, DVector};

/// All outputs for the rows of one window, in a basis centred on it.
pub fn batch_qr(times: &[i64], errors: &[f64]) -> Outputs {
    let n = times.len();
    let (oldest, newest) = (times[0], times[n - 1]);
    let (middle, half) = (
        oldest + (newest - oldest) / 2,
        (newest - oldest) as f64 / 2.0,
    );
    let mut phi = DMatrix::zeros(n, DEGREES);
    for (i, &time) in times.iter().enumerate() {
        let u = (time - middle) as f64 / half;
        let mut power = 1.0;
        for j in 0..DEGREES {
            phi[(i, j)] = power;
            power *= u;
        }
    }
    let level = errors[0];
    let mut z = DVector::from_iterator(n, errors.iter().map(|e| e - level));
    let qr = phi.qr();
    qr.q_tr_mul(&mut z);
    let mut rss = [0.0; DEGREES];
    let mut sum: f64 = z.rows(DEGREES, n - DEGREES).norm_squared();
    for degree in (0..DEGREES).rev() {
        rss[degree] = sum;
        sum += z[degree] * z[degree];
    }
    let r = qr.unpack_r();
    let x = r
        .solve_upper_triangular(&z.rows(0, DEGREES))
        .expect("independent columns");
    outputs(n, rss, std::array::from_fn(|i| x[i]))
}
