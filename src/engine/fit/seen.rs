//! The levels and influence quantities that a stretch has seen: beyond them nothing was learned.

use crate::fit::Row;
use crate::fit::basis::{Columns, MAX_INFLUENCES};
use serde::{Deserialize, Serialize};

/// Lowest and highest regressors that entered a stretch; `None` before the first row.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Seen {
    /// Of x.
    pub x: Option<(f64, f64)>,
    /// Of each influence quantity.
    pub influences: [Option<(f64, f64)>; MAX_INFLUENCES],
}

impl Seen {
    /// Takes a row that entered.
    pub(crate) fn take(&mut self, row: &Row, columns: Columns) {
        widen(&mut self.x, row.x);
        let influences = self.influences.iter_mut().zip(row.influences);
        for (range, value) in influences.take(columns.influence_columns()) {
            widen(range, value);
        }
    }
}

fn widen(range: &mut Option<(f64, f64)>, value: f64) {
    if value.is_finite() {
        let (lowest, highest) = range.unwrap_or((value, value));
        *range = Some((lowest.min(value) + 0.0, highest.max(value) + 0.0));
    }
}
