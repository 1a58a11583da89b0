//! The daemon around the engine.
//!
//! Modules in reading order:
//! - [`configuration`]: one TOML file, or everything that is wrong with it
//! - [`payload`]: from an MQTT message to input events
//! - [`broker`]: the MQTT session
//! - [`state`]: the engine's state as bytes
//! - [`record`]: what the engine was told and said, on the disk
//! - [`document`]: what is published
//! - [`keeper`]: the engine in step with its record and its outbox
//! - [`daemon`]: the loop around the engine
//! - [`import`]: recordings as inputs of the engine
//! - [`replay`]: a record run again, as an audit or with another configuration
//! - `demo`: an invented plant held true on one machine
//! - [`command`]: the command line

pub mod broker;
pub mod command;
pub mod configuration;
pub mod daemon;
#[cfg(feature = "demo")]
pub mod demo;
pub mod document;
pub mod import;
pub mod keeper;
pub mod payload;
pub mod record;
pub mod replay;
pub mod state;
