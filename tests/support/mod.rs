//! What the tests of the fit share: double-double numbers and a batch least squares made of them.

pub(crate) mod batch;
pub(crate) mod double;
