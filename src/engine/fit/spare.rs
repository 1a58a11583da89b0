//! Used-up factors of a window, kept so that sliding doesn't allocate.

use crate::fit::factor::Factor;

/// Memory without meaning: equal to any other, and not worth a copy.
#[derive(Debug, Default)]
pub(crate) struct Spare(Vec<Factor>);

impl Clone for Spare {
    fn clone(&self) -> Self {
        Self::default()
    }
}

impl PartialEq for Spare {
    fn eq(&self, _: &Self) -> bool {
        true
    }
}

impl Spare {
    /// An empty factor for so many columns. All that were kept must have as many.
    pub(crate) fn take(&mut self, columns: usize) -> Factor {
        let mut factor = self.0.pop().unwrap_or_else(|| Factor::new(columns));
        factor.clear();
        factor
    }

    /// Keeps a factor that is no longer needed.
    pub(crate) fn keep(&mut self, factor: Factor) {
        self.0.push(factor);
    }

    /// Keeps all of these, leaving the list empty with its memory.
    pub(crate) fn keep_all(&mut self, factors: &mut Vec<Factor>) {
        self.0.append(factors);
    }
}
