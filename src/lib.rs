//! The daemon around the engine.
//!
//! Modules in reading order:
//! - [`configuration`]: one TOML file, or everything that is wrong with it
//! - [`payload`]: from an MQTT message to input events

pub mod configuration;
pub mod payload;
