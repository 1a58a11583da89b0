//! What can be wrong with a record.

use std::path::{Path, PathBuf};

/// What can be wrong with a record.
#[derive(Debug, thiserror::Error)]
pub enum RecordError {
    /// The folder or a file in it can't be made, opened or locked.
    #[error("record folder {}: {source}", folder.display())]
    Folder {
        /// Which folder or file.
        folder: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// Another process holds the record.
    #[error(
        "record folder {} is in use by another holdtrue (process {holder}); stop that one, or give \
         this one a [record] folder of its own",
        folder.display()
    )]
    InUse {
        /// Which folder.
        folder: PathBuf,
        /// What the lock file says about the holder.
        holder: String,
    },
    /// The folder holds no record.
    #[error(
        "{} holds no record: a record's files are named like 2026-12-01.0001.sqlite",
        folder.display()
    )]
    Empty {
        /// Which folder.
        folder: PathBuf,
    },
    /// The file is of something else.
    #[error(
        "{} is not a file of a record of holdtrue; take it out of the folder, or give [record] \
         folder another place",
        path.display()
    )]
    Foreign {
        /// Which file.
        path: PathBuf,
    },
    /// The file was written in another format.
    #[error(
        "{} has record format {found}, this program reads {known}; use the holdtrue that wrote it, \
         or move the record folder aside to begin anew, and keep it",
        path.display()
    )]
    OtherFormat {
        /// Which file.
        path: PathBuf,
        /// Its format.
        found: i32,
        /// The format that this program reads.
        known: i32,
    },
    /// SQLite refused.
    #[error("record: {0}")]
    Sqlite(#[from] rusqlite::Error),
    /// SQLite refused, in a file that is known.
    #[error("{}: {source}", path.display())]
    File {
        /// Which file.
        path: PathBuf,
        /// What SQLite said.
        source: rusqlite::Error,
    },
    /// What stands in the file contradicts itself.
    #[error("{}: {what}; the file is damaged or was changed", path.display())]
    Damaged {
        /// Which file.
        path: PathBuf,
        /// What is wrong.
        what: String,
    },
    /// A row can't be turned into an input.
    #[error("{}: input {position} can't be read: {source}", path.display())]
    Unreadable {
        /// Which file.
        path: PathBuf,
        /// Its position.
        position: i64,
        /// What is wrong with the text.
        source: serde_json::Error,
    },
    /// A row is missing.
    #[error(
        "{}: input {expected} is missing (the next one is {found}); the file is damaged or was \
         changed",
        path.display()
    )]
    Missing {
        /// Which file.
        path: PathBuf,
        /// The position that should have come.
        expected: i64,
        /// The position that came.
        found: i64,
    },
}

impl RecordError {
    /// Names the file that an error of SQLite is about.
    pub(super) fn of(self, path: &Path) -> Self {
        match self {
            Self::Sqlite(source) => Self::File {
                path: path.to_path_buf(),
                source,
            },
            other => other,
        }
    }

    /// Whether what stands on the disk is at fault, and not the disk's present mood: trying again
    /// would not help.
    #[must_use]
    pub fn is_damage(&self) -> bool {
        use rusqlite::ErrorCode::{DatabaseCorrupt, NotADatabase};
        match self {
            Self::Sqlite(error) | Self::File { source: error, .. } => match error {
                rusqlite::Error::SqliteFailure(failure, _) => {
                    matches!(failure.code, DatabaseCorrupt | NotADatabase)
                }
                _ => true,
            },
            Self::Damaged { .. } | Self::Unreadable { .. } | Self::Missing { .. } => true,
            _ => false,
        }
    }
}
