//! Recordings become inputs of the engine, in the order of time: CSV, JSON lines, SenML.
//!
//! Every file is read twice. The first time nothing is kept but what is wrong, how much there is
//! and how far the file is out of order; so a recording that does not fit is refused before
//! anything is written. The second time the files are merged by time, each held back no longer than
//! its own disorder needs. What a recording does not tell is when a value arrived: its received
//! time is its phenomenon time.
//!
//! Not here: what the inputs lead to; the engine judges them like any others.
//!
//! Modules in reading order:
//! - [`mapping`]: which column is whose value; `words`: told on the command line; `columns`: told
//!   in a TOML file; `names`: what the configuration calls them
//! - [`problem`]: what can't be read, with file, line and column
//! - [`entry`]: one value of a recording
//! - [`recording`]: a file row by row; `table`, `json_lines`, `packs` over `scan`: its forms;
//!   `cell`: values and times from their text
//! - [`survey`]: the first reading
//! - [`merge`]: the second, in the order of time; `ordered`: one file
//! - [`mod@into_record`]: what comes of it into a record

pub mod entry;
pub mod into_record;
pub mod mapping;
pub mod merge;
pub mod problem;
pub mod recording;
pub mod survey;

mod cell;
mod columns;
mod json_lines;
mod names;
mod ordered;
mod packs;
mod scan;
mod table;
mod words;

use crate::keeper::RestoreError;
use crate::record::RecordError;
use std::path::PathBuf;

pub use table::separator;
pub use words::Words;

/// Why recordings can't be imported at all.
#[derive(Debug, thiserror::Error)]
pub enum ImportError {
    /// A file can't be read.
    #[error("{}: {source}", path.display())]
    File {
        /// Which.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// Files and mapping do not fit each other.
    #[error("{0}")]
    Misfit(String),
    /// A file is so far out of order that too much of it would have to be kept.
    #[error(
        "{}:{line}: out of order by {seconds:.0} s, and more than {} values would have to wait \
         for each other; sort the file by time, or write one file for each sensor",
        path.display(), ordered::HELD_MAX
    )]
    Disorder {
        /// Which.
        path: PathBuf,
        /// Where it is worst.
        line: u64,
        /// By how much.
        seconds: f64,
    },
    /// The record can't be used.
    #[error(transparent)]
    Record(#[from] RecordError),
    /// The record can't be gone on with.
    #[error(transparent)]
    Restore(#[from] RestoreError),
    /// A file is not what it was when it was read first.
    #[error("{}: changed while it was imported; start again with a new record", path.display())]
    Changed {
        /// Which.
        path: PathBuf,
    },
}
