//! The record on disk.

mod keeps;
