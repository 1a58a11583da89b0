//! The deciding part of holdtrue: a plain value that takes one input event and appends output
//! events.
//!
//! It owns no clock, file, socket, task or random source. Time arrives inside events, configuration
//! is an event too, and `step` cannot fail: bad input is an expected event with a reason. The same
//! inputs give bit-identical outputs on another day and another machine.
//!
//! Modules in reading order:
//! - [`time`]: timestamps and durations in integer nanoseconds
//! - [`math`]: the one door to inexact float functions; [`quantile`]: Student's t and the normal
//!   distribution over it; `median`
//! - [`setup`]: the configuration as the engine sees it, already checked
//! - [`event`]: `Input` and `Output`, the whole vocabulary
//! - [`fit`]: numbers only: factors, windows, the degree, the published mean
//! - `track`, `gate`: what was measured and what held recently, in order of phenomenon time
//! - `channel`: pairing → screening → fit → judgement → alarms, one file per station
//! - `alarm`: the state machine of one alarm
//! - [`fleet`]: routing, references shared by channels, now
//! - [`engine`]: the value that takes inputs and appends outputs; `report`, `notice`, [`counters`]:
//!   how it says things; `wording`: numbers in texts
//! - [`standing`]: how things stand, for the `state` document
//! - [`state`]: the engine taken to pieces for the record, and put together again; `kept`: which
//!   pieces have changed

mod alarm;
mod cached;
mod channel;
pub mod counters;
pub mod engine;
pub mod event;
pub mod fit;
pub mod fleet;
mod gate;
mod kept;
pub mod math;
mod median;
mod notice;
pub mod quantile;
mod report;
pub mod setup;
pub mod standing;
pub mod state;
pub mod time;
mod track;
mod wording;
