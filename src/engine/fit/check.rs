//! Whether a fit read back from a record is the one that its setup asks for.

use super::{Fit, FitSetup};

impl Fit {
    /// Says what does not fit. (That its numbers can be computed with was seen as they were read.)
    pub(crate) fn check(&self, setup: &FitSetup) -> Result<(), &'static str> {
        let expected = Self::new(*setup);
        let (window, expected) = (&self.window, &expected.window);
        if self.setup != *setup
            || window.columns() != expected.columns()
            || window.cut() != expected.cut()
        {
            return Err("has a fit of another setup");
        }
        let columns = window.columns();
        let claims = &self.announced.claims;
        let influences = claims.influences.iter().map(|climb| (climb, 1));
        let mut climbs = [
            (&self.announced.zero, columns.time_degree()),
            (&claims.span, columns.span_columns()),
        ]
        .into_iter()
        .chain(influences);
        if !climbs.all(|(climb, highest)| climb.is_possible(highest)) {
            return Err("announces what its fit cannot be");
        }
        Ok(())
    }
}
