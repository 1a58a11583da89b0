//! The engine run again over a record: as an audit, whether it says the same bit for bit; as a
//! trial, what another configuration would have said.
//!
//! Nothing is published and the record is only read. Modules in reading order:
//! - `range`: which part of a record
//! - [`audit()`]: every output and every saved state compared
//! - [`trial()`]: another configuration over the same readings; `feed`: the recorded inputs for it,
//!   `account`: what came of each channel

mod account;
mod audit;
mod feed;
mod range;
mod trial;

pub use account::{Account, AlarmAt, Change};
pub use audit::{Audit, Difference, audit};
pub use range::Range;
pub use trial::{Raised, Trial, trial};

use crate::record::RecordError;

/// Why a record can't be replayed.
#[derive(Debug, thiserror::Error)]
pub enum ReplayError {
    /// It can't be read.
    #[error(transparent)]
    Record(#[from] RecordError),
    /// It was written by another arithmetic.
    #[error(
        "{file} was written by holdtrue {program}, whose arithmetic has revision {found}; this \
         program has {known} and may rightly differ in some bits. Replay it with the program that \
         wrote it"
    )]
    Arithmetic {
        /// The file.
        file: String,
        /// The program that wrote it.
        program: String,
        /// Its revision.
        found: i64,
        /// This program's.
        known: i64,
    },
    /// The state that a file opens with can't be used.
    #[error("{file}: {why}")]
    State {
        /// The file.
        file: String,
        /// Why.
        why: String,
    },
    /// Nothing of the record lies in the range.
    #[error(
        "no file of the record holds anything of the time that was asked for; it goes from {from} \
         to {to}"
    )]
    Nothing {
        /// The first file.
        from: String,
        /// The last.
        to: String,
    },
}
