//! What reaches the intake from outside: every payload format, and what is refused.

#![allow(
    clippy::unwrap_used,
    reason = "a test says what went wrong by panicking; the lint does not see helpers as tests"
)]

mod formats;
mod recordings;
mod refused;
mod senml;
mod support;
