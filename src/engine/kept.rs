//! A piece of the state that knows whether it may have changed since it was last saved, so that a
//! snapshot need not hold everything each time.
//!
//! Whoever borrows the value to change it marks it, so no change can be forgotten; it costs one
//! store. The mark is no state: it is neither stored nor compared, and nothing the engine says
//! depends on it.

use serde::{Deserialize, Serialize};
use std::ops::{Deref, DerefMut};

/// See the module's text. One that is new, or was read back, counts as changed.
#[derive(Clone, Debug, Default, Serialize, Deserialize)]
#[serde(transparent)]
pub(crate) struct Kept<T> {
    value: T,
    #[serde(skip)]
    saved: bool,
}

impl<T> Kept<T> {
    /// Takes a value in, as changed.
    pub(crate) fn new(value: T) -> Self {
        Self {
            value,
            saved: false,
        }
    }

    /// Whether it may have changed since it was last saved.
    pub(crate) fn has_changed(&self) -> bool {
        !self.saved
    }

    /// It has been saved as it is.
    pub(crate) fn mark_saved(&mut self) {
        self.saved = true;
    }
}

impl<T> Deref for Kept<T> {
    type Target = T;

    fn deref(&self) -> &T {
        &self.value
    }
}

impl<T> DerefMut for Kept<T> {
    fn deref_mut(&mut self) -> &mut T {
        self.saved = false;
        &mut self.value
    }
}

impl<T: PartialEq> PartialEq for Kept<T> {
    fn eq(&self, other: &Self) -> bool {
        self.value == other.value
    }
}

impl<T> From<T> for Kept<T> {
    fn from(value: T) -> Self {
        Self::new(value)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_a_borrow_that_can_change_it_marks_it() {
        let mut kept = Kept::new(vec![1]);
        assert!(kept.has_changed(), "never saved");
        kept.mark_saved();
        assert_eq!(kept.len(), 1);
        assert!(!kept.has_changed(), "looked at only");
        kept.push(2);
        assert!(kept.has_changed());
        let mut saved = kept.clone();
        saved.mark_saved();
        assert_eq!(saved, kept, "the mark is no part of the value");
        let stored = serde_json::to_string(&saved).unwrap();
        assert_eq!(stored, "[1,2]");
        let read: Kept<Vec<i32>> = serde_json::from_str(&stored).unwrap();
        assert!(read.has_changed());
    }
}
