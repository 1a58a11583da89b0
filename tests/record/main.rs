//! The record on disk.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking; the lint does not see helpers as tests"
)]

mod chain;
mod damaged;
mod golden;
mod impact;
mod import;
mod keeps;
mod replays;
mod restores;
mod retention;
mod station;
mod support;
