//! What reaches the intake from outside: every payload format, and what is refused.

mod formats;
mod recordings;
mod refused;
mod senml;
mod support;
