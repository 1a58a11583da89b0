//! The daemon around the engine.
//!
//! Modules in reading order:
//! - [`configuration`]: one TOML file, or everything that is wrong with it
//! - [`payload`]: from an MQTT message to input events
//! - [`record`]: what the engine was told and said, on the disk
//! - [`document`]: what is published

pub mod configuration;
pub mod document;
pub mod payload;
pub mod record;
