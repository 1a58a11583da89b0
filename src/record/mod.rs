//! The append-only record: what the engine was told, what it said, what was published, and the
//! engine's state from time to time.
//!
//! A folder with one SQLite file a day (and one more for each clean stop), written by one daemon at
//! a time. A batch is committed whole or not at all, to one file; nothing is published or
//! acknowledged before its batch is committed. Each batch is a link of a hash chain that goes on
//! from file to file; a finished file is sealed by a checksum that stands beside it and in the file
//! that follows.
//!
//! Modules in reading order:
//! - `name`, `layout`, `views`, `revision`: what the files are called and what stands in them
//! - `row`, `state_row`, `body`, `sources`: rows as they are written, read and hashed
//! - `chain`: the digests
//! - `batch`: what is written together
//! - `opening`: what a file opens with
//! - `writing`: [`Record`], the one who writes, with `turning`, `seals`, `retention` and
//!   `recall`; `sealing`, `lock`, `disk`: what that takes
//! - `archive`, `day`, `links`: [`Archive`] and [`Day`], for those who read; `search`: old
//!   readings; `view_rows`: views for export; `verify`: whether all is as it was written

mod archive;
mod batch;
mod body;
mod chain;
mod day;
mod disk;
mod error;
mod layout;
mod links;
mod lock;
mod name;
mod opening;
mod recall;
mod retention;
mod revision;
mod row;
mod sealing;
mod seals;
mod search;
mod sources;
mod state_row;
mod turning;
mod verify;
mod view_rows;
mod views;
mod writing;

pub use archive::Archive;
pub use batch::{Batch, Numbered, Settled};
pub use body::output_text;
pub use chain::{Digest, Head};
pub use day::{Day, Said, Told};
pub use disk::{Disk, Operation, RealDisk};
pub use error::RecordError;
pub use name::DayName;
pub use opening::Opening;
pub use retention::{Removal, Retention};
pub use revision::{ARITHMETIC_REVISION, FORMAT_VERSION, STATE_REVISION};
pub use sources::SourceName;
pub use turning::Turn;
pub use verify::{Fault, Verdict, verify};
pub use view_rows::Choice;
pub use views::{VIEWS, View};
pub use writing::Record;

/// Parts of the engine's state: each with its name.
pub type State = Vec<(String, Vec<u8>)>;
