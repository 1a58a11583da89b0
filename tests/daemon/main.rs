//! The whole daemon: the real binary against a real Mosquitto. One program for all behaviours, one
//! file for each.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking; the lint does not see helpers as tests"
)]

#[path = "../support/live/mod.rs"]
mod live;

mod bad_input;
mod main_path;
mod orders;
mod outbox;
mod record_paused;
mod restarts;
mod sessions;
