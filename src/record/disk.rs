//! What the record does to the disk, one operation at a time.
//!
//! A seam for simulations: every operation that lasts is announced before and after it is done, and
//! may be refused. The real disk refuses nothing here; SQLite and the file system speak for it.

use std::io;
use std::path::Path;

/// An operation that leaves something on the disk.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Operation {
    /// A day's file is made, with the state that it opens with.
    Open,
    /// A batch is committed.
    Commit,
    /// A finished file is brought to rest: write-ahead log folded in, indexes made.
    Rest,
    /// The checksum of a finished file is written beside it.
    Checksum,
    /// An old file is removed.
    Remove,
}

/// Announces operations.
pub trait Disk: Send {
    /// `operation` on the file at `path` is about to be done.
    ///
    /// # Errors
    /// When it shall not be done; the record then behaves as if the disk had failed.
    fn before(&mut self, operation: Operation, path: &Path) -> io::Result<()>;

    /// `operation` was done and will last.
    ///
    /// # Errors
    /// When nothing more shall be done.
    fn after(&mut self, operation: Operation, path: &Path) -> io::Result<()>;
}

/// The disk as it is.
#[derive(Clone, Copy, Debug, Default)]
pub struct RealDisk;

impl Disk for RealDisk {
    fn before(&mut self, _operation: Operation, _path: &Path) -> io::Result<()> {
        Ok(())
    }

    fn after(&mut self, _operation: Operation, _path: &Path) -> io::Result<()> {
        Ok(())
    }
}
