//! A recording (CSV or JSON lines) as MQTT messages, row by row in the file's order.
//!
//! - [`field`]: which columns become which members of the payload
//! - [`table`]: the file as rows
//! - [`rows`]: rows turned into messages; what is left out, with reasons

pub mod field;
pub mod rows;
pub mod table;

use std::fmt;
use std::path::PathBuf;

/// Why a recording can't be fed.
#[derive(Debug)]
pub enum FeedError {
    /// The file can't be read.
    File {
        /// Which.
        path: PathBuf,
        /// Why.
        cause: std::io::Error,
    },
    /// The request does not fit the file.
    Usage(String),
}

impl fmt::Display for FeedError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::File { path, .. } => write!(out, "reading {}", path.display()),
            Self::Usage(what) => out.write_str(what),
        }
    }
}

impl std::error::Error for FeedError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::File { cause, .. } => Some(cause),
            Self::Usage(_) => None,
        }
    }
}
