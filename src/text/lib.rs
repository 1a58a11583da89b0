//! Numbers, instants and rows from text: what payloads, recordings and the simulators' `plant feed`
//! have in common. Nothing here loses a digit, and nothing is guessed.
//!
//! Modules in reading order:
//! - [`decimal`]: decimal numbers as integers, exact
//! - [`instant`]: RFC 3339, full dates, and offsets from UTC
//! - [`time_form`]: the forms in which a recording's column of times may be written
//! - [`csv_rows`], [`lines`]: a file row by row, without keeping more than one

pub mod csv_rows;
pub mod decimal;
pub mod instant;
pub mod lines;
pub mod time_form;
