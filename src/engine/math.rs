//! The one door to float functions whose last bit differs between platforms.
//!
//! Everything here comes from the pure-Rust `libm`, whose results are the same bits on every
//! machine. The package's lint file bans the platform's own functions.

/// Natural logarithm.
#[must_use]
pub fn ln(x: f64) -> f64 {
    libm::log(x)
}

/// Exponential function.
#[must_use]
pub fn exp(x: f64) -> f64 {
    libm::exp(x)
}

/// `x` to the power of `y`.
#[must_use]
pub fn pow(x: f64, y: f64) -> f64 {
    libm::pow(x, y)
}
