//! What is said about a configuration, good or bad.

mod check_command;
mod examples;
mod problems;
mod sources;
mod support;
