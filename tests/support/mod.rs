//! What the tests of the fit share: double-double numbers and a batch least squares made of them.

#![allow(dead_code, reason = "each test uses its own part of this")]

pub(crate) mod batch;
pub(crate) mod double;
