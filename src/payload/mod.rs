//! From an MQTT message to input events: plain numbers, JSON by pointer, SenML packs.
//!
//! Nothing here fails: what cannot be used becomes an `Input::Refused` with its reason and what a
//! person needs to find the fault. Not here: subscriptions and acknowledgements, and any judgement
//! of values or times beyond "can be held".
//!
//! Modules in reading order:
//! - [`tables`]: what the configuration says about topics
//! - [`mod@pointer`]: JSON pointers
//! - [`intake`]: one message in, input events out
//! - `plain`, `json`, `senml`: the three formats
//! - `pick`: all wanted values of a JSON text in one pass
//! - `literal`, `instant`: exact numbers and times from their text
//! - `fault`: why something was refused
//! - [`order`]: what a person tells the daemon

pub mod intake;
pub mod order;
pub mod pointer;
pub mod tables;

pub(crate) mod fault;
pub(crate) mod instant;
pub(crate) mod json;
pub(crate) mod literal;
pub(crate) mod pick;
pub(crate) mod plain;
pub(crate) mod senml;

pub use intake::Intake;
pub use order::{OrderIntake, OrderMessage};
pub use pointer::Pointer;
pub use tables::{Format, JsonPlace, Scalar, SenmlPlace, Status, Tables, Target, TimeUnit, Use};
