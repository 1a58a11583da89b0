//! The deciding part of holdtrue: a plain value that takes one input event and appends output events.
//!
//! It owns no clock, file, socket, task or random source. Time arrives inside events, configuration is an event too,
//! and `step` cannot fail: bad input is an expected event with a reason. The same inputs give bit-identical outputs on
//! another day and another machine.
//!
//! Modules in reading order:
//! - [`time`]: timestamps and durations in integer nanoseconds
//! - [`math`]: the one door to inexact float functions, and quantiles
//! - [`setup`]: the configuration as the engine sees it, already checked
//! - [`event`]: `Input` and `Output`, the whole vocabulary
//! - [`fit`]: numbers only: factors, windows, the degree, the published mean

pub mod event;
pub mod fit;
pub mod math;
pub mod setup;
pub mod time;
