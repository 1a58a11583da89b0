//! One row of the fit, and its entries in a frame.

use crate::fit::basis::{Columns, Frame, MAX_INFLUENCES};
use crate::fit::centre::Centre;
use crate::time::Timestamp;

/// One row of the fit. All numbers are finite.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct WindowRow {
    /// Phenomenon time.
    pub time: Timestamp,
    /// e = indication − reference.
    pub error: f64,
    /// Weight, > 0.
    pub weight: f64,
    /// Regressor of the span terms; unused without them.
    pub x: f64,
    /// Influence quantities; unused beyond the window's columns.
    pub influences: [f64; MAX_INFLUENCES],
}

impl WindowRow {
    /// The centre that its own regressors are.
    pub(crate) fn centre(&self) -> Centre {
        Centre {
            x: self.x,
            influences: self.influences,
        }
    }

    /// The same row, its regressors counted from a centre.
    pub(crate) fn counted_from(&self, centre: Centre) -> Self {
        let [first, second] = self.influences;
        Self {
            x: self.x - centre.x,
            influences: [first - centre.influences[0], second - centre.influences[1]],
            ..*self
        }
    }
}

/// Writes √w·φ and returns √w.
#[inline]
pub(crate) fn scale_row(
    columns: Columns,
    frame: Frame,
    row: &WindowRow,
    scaled: &mut [f64],
) -> f64 {
    columns.fill(frame.scaled(row.time), row.x, row.influences, scaled);
    if row.weight.to_bits() == 1.0_f64.to_bits() {
        return 1.0;
    }
    let root = row.weight.sqrt();
    for entry in &mut scaled[..columns.count()] {
        *entry *= root;
    }
    root
}
