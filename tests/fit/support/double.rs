//! Double-double numbers: two floats whose sum carries about 32 digits. For references in tests.
//!
//! Source of the error-free steps: Dekker 1971 (two-sum, product through fused multiply-add);
//! division and root by one Newton correction (from memory).

use std::ops::{Add, Div, Mul, Neg, Sub};

/// The unevaluated sum of two floats, the second below half a unit in the last place of the first.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(crate) struct Double(pub(crate) f64, pub(crate) f64);

impl Double {
    pub(crate) const ZERO: Self = Self(0.0, 0.0);
    pub(crate) const ONE: Self = Self(1.0, 0.0);

    /// An integer, exactly.
    #[allow(
        clippy::cast_possible_truncation,
        reason = "an integer below 2^64 as it is"
    )]
    pub(crate) fn from_integer(value: i64) -> Self {
        let high = value as f64;
        // The difference is small; 2^63 itself does not fit an i64, so go through i128.
        Self(high, (i128::from(value) - high as i128) as f64)
    }

    /// The nearest float.
    pub(crate) fn float(self) -> f64 {
        self.0 + self.1
    }

    pub(crate) fn sqrt(self) -> Self {
        if self.0 <= 0.0 {
            return Self::ZERO;
        }
        let root = Self::from(self.0.sqrt());
        root + (self - root * root) / (root + root)
    }
}

impl From<f64> for Double {
    fn from(value: f64) -> Self {
        Self(value, 0.0)
    }
}

/// a + b with its rounding error.
fn two_sum(a: f64, b: f64) -> Double {
    let sum = a + b;
    let part = sum - a;
    Double(sum, (a - (sum - part)) + (b - part))
}

/// The same where |a| ≥ |b|.
fn quick_sum(a: f64, b: f64) -> Double {
    let sum = a + b;
    Double(sum, b - (sum - a))
}

impl Add for Double {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        let high = two_sum(self.0, other.0);
        let low = two_sum(self.1, other.1);
        let first = quick_sum(high.0, high.1 + low.0);
        quick_sum(first.0, first.1 + low.1)
    }
}

impl Neg for Double {
    type Output = Self;
    fn neg(self) -> Self {
        Self(-self.0, -self.1)
    }
}

impl Sub for Double {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        self + -other
    }
}

impl Mul for Double {
    type Output = Self;
    fn mul(self, other: Self) -> Self {
        let product = self.0 * other.0;
        let error = self.0.mul_add(other.0, -product);
        quick_sum(product, error + (self.0 * other.1 + self.1 * other.0))
    }
}

impl Div for Double {
    type Output = Self;
    fn div(self, other: Self) -> Self {
        let first = self.0 / other.0;
        let rest = self - other * Self::from(first);
        let second = rest.0 / other.0;
        let rest = rest - other * Self::from(second);
        quick_sum(first, second) + Self::from(rest.0 / other.0)
    }
}
