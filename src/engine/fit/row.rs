//! One row of the fit, its entries in a window, and what became of it.

use crate::fit::basis::{Columns, Frame, MAX_INFLUENCES};
use crate::fit::centre::Centre;
use crate::time::Timestamp;

/// Largest magnitude of an error or a regressor that the fit takes: its square, times any weight
/// and number of rows, is still a float.
const LARGEST_VALUE: f64 = 1e120;
/// Largest weight of a row, and the smallest one's inverse.
const LARGEST_WEIGHT: f64 = 1e30;

/// One pair as the fit sees it. All numbers that are in use are finite.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Row {
    /// Phenomenon time.
    pub time: Timestamp,
    /// e = indication − reference.
    pub error: f64,
    /// Relative weight of the row, > 0; 1 for equal rows.
    pub weight: f64,
    /// What the span terms are a function of: the reference value or the indication, as
    /// [`crate::setup::FitSetup::span_side`] says. Unused without them.
    pub x: f64,
    /// The influence quantities, as many as the setup says; the rest is not looked at.
    pub influences: [f64; MAX_INFLUENCES],
}

/// What an insertion did.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Inserted {
    /// At least one segment closed, or a late row changed a closed one: a decision is due.
    pub closed: bool,
    /// The row was older than everything in the window and was left out.
    pub too_old: bool,
    /// The row can't be computed with and was left out: an error or a regressor in use beyond
    /// ±1e120, or a weight outside 1e-30 … 1e30.
    pub out_of_range: bool,
}

impl Row {
    /// The centre that its own regressors are.
    pub(crate) fn centre(&self) -> Centre {
        Centre {
            x: self.x,
            influences: self.influences,
        }
    }

    /// Whether a window of these columns can compute with it.
    pub(crate) fn can_be_held(&self, columns: Columns) -> bool {
        let weights = 1.0 / LARGEST_WEIGHT..=LARGEST_WEIGHT;
        let x = (columns.span_columns() > 0).then_some(self.x);
        let influences = self
            .influences
            .into_iter()
            .take(columns.influence_columns());
        let mut values = [self.error].into_iter().chain(x).chain(influences);
        values.all(|value| value.abs() <= LARGEST_VALUE) && weights.contains(&self.weight)
    }
}

/// What the entries of a row are: which columns there are, and where time, the level and the
/// influence quantities count from. The one way from a [`Row`] to numbers that a factor of the
/// window, or coefficients solved from one, can be used with.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Coordinates {
    pub(crate) columns: Columns,
    pub(crate) frame: Frame,
    pub(crate) centre: Centre,
}

impl Coordinates {
    /// Writes φ of a row into the first places of `phi`.
    #[inline]
    pub(crate) fn fill(self, row: &Row, phi: &mut [f64]) {
        let [first, second] = row.influences;
        let [first_centre, second_centre] = self.centre.influences;
        self.columns.fill(
            self.frame.scaled(row.time),
            row.x - self.centre.x,
            [first - first_centre, second - second_centre],
            phi,
        );
    }

    /// Writes √w·φ and returns √w.
    #[inline]
    pub(crate) fn fill_weighted(self, row: &Row, scaled: &mut [f64]) -> f64 {
        self.fill(row, scaled);
        if row.weight.to_bits() == 1.0_f64.to_bits() {
            return 1.0;
        }
        let root = row.weight.sqrt();
        for entry in &mut scaled[..self.columns.count()] {
            *entry *= root;
        }
        root
    }
}
