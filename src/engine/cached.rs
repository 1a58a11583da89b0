//! A value that can be found anew at any time from the state around it.

use std::sync::OnceLock;

/// Kept between uses to save time, never as knowledge: states that differ in nothing else are
/// equal, and it is neither stored (`#[serde(skip)]`) nor copied, so that a restored or copied
/// state finds it anew. Whoever keeps one proves in a test that every result is the same to the bit
/// with and without it.
#[derive(Debug)]
pub(crate) struct Cached<T>(OnceLock<T>);

impl<T> Default for Cached<T> {
    fn default() -> Self {
        Self(OnceLock::new())
    }
}

impl<T> Clone for Cached<T> {
    fn clone(&self) -> Self {
        Self::default()
    }
}

impl<T> PartialEq for Cached<T> {
    fn eq(&self, _: &Self) -> bool {
        true
    }
}

impl<T> Cached<T> {
    /// What is kept, found first if nothing is.
    pub(crate) fn get_or_find(&self, find: impl FnOnce() -> T) -> &T {
        self.0.get_or_init(find)
    }

    /// What is kept.
    pub(crate) fn get_mut(&mut self) -> Option<&mut T> {
        self.0.get_mut()
    }

    /// Keeps nothing: the state around it has changed.
    pub(crate) fn forget(&mut self) {
        self.0.take();
    }
}
