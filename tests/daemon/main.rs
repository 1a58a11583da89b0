//! The whole daemon: the real binary against a real Mosquitto. One program for all behaviours, one
//! file for each.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking; the lint does not see helpers as tests"
)]

mod live;

mod bad_input;
mod killed;
mod main_path;
mod orders;
mod outbox;
mod record_paused;
mod resistor_feed;
mod restarts;
mod sessions;
