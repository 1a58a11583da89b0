//! The fast peer: a Cholesky factor of the augmented normal equations, kept by one rank-one update
//! and one downdate per row, and re-anchored once per window.
//!
//! Sources: update by Givens rotations, downdate by hyperbolic rotations in the mixed form (Golub &
//! Van Loan, *Matrix Computations*, 4th ed., §6.5.4; from memory). It is as fast as we could make
//! it: fixed width, no allocation, no safety against overflow. It loses digits for ever with each
//! downdate.

use crate::outputs::{DEGREES, Outputs, outputs};

/// Columns and the error.
const WIDTH: usize = DEGREES + 1;

/// The factor of the last `window` rows.
pub struct Cholesky {
    r: [[f64; WIDTH]; WIDTH],
    /// Rows in the window: time and error, as a ring.
    rows: Vec<(i64, f64)>,
    oldest: usize,
    window: usize,
    anchor: i64,
    per_unit: f64,
    level: f64,
    since_anchor: usize,
}

impl Cholesky {
    /// `unit`: about the time that the window spans, in nanoseconds.
    pub fn new(window: usize, unit: i64, first: (i64, f64)) -> Self {
        Self {
            r: [[0.0; WIDTH]; WIDTH],
            rows: Vec::with_capacity(window),
            oldest: 0,
            window,
            anchor: first.0,
            per_unit: 1.0 / unit as f64,
            level: first.1,
            since_anchor: 0,
        }
    }

    /// Takes a row and, once the window is full, drops the oldest. All outputs.
    pub fn slide(&mut self, row: (i64, f64)) -> Option<Outputs> {
        let x = self.scaled(row);
        self.update(x);
        if self.rows.len() < self.window {
            self.rows.push(row);
            return None;
        }
        let old = std::mem::replace(&mut self.rows[self.oldest], row);
        self.oldest = if self.oldest + 1 == self.window {
            0
        } else {
            self.oldest + 1
        };
        let x = self.scaled(old);
        self.downdate(x);
        self.since_anchor += 1;
        if self.since_anchor == self.window {
            self.move_anchor(row.0);
            self.since_anchor = 0;
        }
        Some(self.outputs())
    }

    #[inline]
    fn scaled(&self, row: (i64, f64)) -> [f64; WIDTH] {
        let u = (row.0 - self.anchor) as f64 * self.per_unit;
        let mut x = [1.0; WIDTH];
        for j in 1..DEGREES {
            x[j] = x[j - 1] * u;
        }
        x[DEGREES] = row.1 - self.level;
        x
    }

    #[inline]
    fn update(&mut self, mut x: [f64; WIDTH]) {
        for i in 0..WIDTH {
            let (diagonal, leading) = (self.r[i][i], x[i]);
            let length = (diagonal * diagonal + leading * leading).sqrt();
            if length == 0.0 {
                continue;
            }
            let inverse = 1.0 / length;
            let (cosine, sine) = (diagonal * inverse, leading * inverse);
            self.r[i][i] = length;
            for j in i + 1..WIDTH {
                let (above, below) = (self.r[i][j], x[j]);
                self.r[i][j] = cosine * above + sine * below;
                x[j] = cosine * below - sine * above;
            }
        }
    }

    #[inline]
    fn downdate(&mut self, mut x: [f64; WIDTH]) {
        for i in 0..WIDTH {
            let (diagonal, leading) = (self.r[i][i], x[i]);
            // What would be negative by rounding is the definiteness that this way loses.
            let length = (diagonal * diagonal - leading * leading)
                .max(f64::MIN_POSITIVE)
                .sqrt();
            let inverse = 1.0 / diagonal;
            let (cosine, sine) = (length * inverse, leading * inverse);
            let secant = diagonal / length;
            self.r[i][i] = length;
            for j in i + 1..WIDTH {
                let above = (self.r[i][j] - sine * x[j]) * secant;
                x[j] = cosine * x[j] - sine * above;
                self.r[i][j] = above;
            }
        }
    }

    /// u ← u − shift, by repeated synthetic division.
    fn move_anchor(&mut self, anchor: i64) {
        let shift = (anchor - self.anchor) as f64 * self.per_unit;
        for row in &mut self.r {
            for pass in 1..DEGREES {
                for power in (pass..DEGREES).rev() {
                    row[power] -= shift * row[power - 1];
                }
            }
        }
        self.anchor = anchor;
    }

    #[inline]
    fn outputs(&self) -> Outputs {
        let mut rss = [0.0; DEGREES];
        let mut sum = 0.0;
        for i in (1..WIDTH).rev() {
            sum += self.r[i][DEGREES] * self.r[i][DEGREES];
            rss[i - 1] = sum;
        }
        let mut x = [0.0; DEGREES];
        for i in (0..DEGREES).rev() {
            let mut rest = self.r[i][DEGREES];
            for j in i + 1..DEGREES {
                rest -= self.r[i][j] * x[j];
            }
            x[i] = rest / self.r[i][i];
        }
        outputs(self.window, rss, x)
    }
}
