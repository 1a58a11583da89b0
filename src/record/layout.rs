//! Tables and views of a record file, its format stamp, and how the file is opened.

use super::RecordError;
use super::revision::FORMAT_VERSION;
use rusqlite::{Connection, OpenFlags};
use std::path::Path;

/// Marks the file as a record of this daemon (SQLite header field `application_id`): the letters H
/// T r u.
const APPLICATION_ID: i32 = 0x4854_7275;

/// How long a statement waits for another process that reads or copies the file. Short: while it
/// waits, nothing else runs, and the daemon has an own back-off for a record that can't be
/// written.
const BUSY_WAIT: std::time::Duration = std::time::Duration::from_millis(250);

/// The write-ahead log is folded into the file when it has this many pages. Pages that many
/// commits have touched are then written once.
const FOLD_PAGES: i64 = 4000;

/// Everything is appended, nothing is changed afterwards. Times are integer nanoseconds since 1970
/// (UTC); the views show them as text.
pub(super) const TABLES: &str = "
CREATE TABLE day (                   -- one row: what this file goes on from
    opened       INTEGER NOT NULL,
    program      TEXT NOT NULL,      -- version of the program that opened it
    arithmetic   INTEGER NOT NULL,   -- revision of the engine's arithmetic
    state        INTEGER NOT NULL,   -- revision of the saved state
    setup        TEXT NOT NULL,      -- configuration in force, as JSON
    preceding    TEXT,               -- name of the file before; NULL in the first
    chain        BLOB NOT NULL,      -- digest of the last batch before; zeros in the first
    first_batch  INTEGER NOT NULL,
    first_input  INTEGER NOT NULL,
    first_output INTEGER NOT NULL,
    first_document INTEGER NOT NULL
) STRICT;
CREATE TABLE batches (               -- one row for each transaction
    number    INTEGER PRIMARY KEY,
    committed INTEGER NOT NULL,      -- when
    last_input    INTEGER NOT NULL,  -- last position up to here
    last_output   INTEGER NOT NULL,
    last_document INTEGER NOT NULL,
    digest    BLOB NOT NULL          -- SHA-256 over the digest before and this batch's rows
) STRICT;
CREATE TABLE sources (               -- whose values readings are
    number INTEGER PRIMARY KEY,
    batch  INTEGER NOT NULL,         -- known since
    kind   TEXT NOT NULL,            -- indication, reference, influence
    name   TEXT NOT NULL,
    unit   TEXT NOT NULL
) STRICT;
CREATE TABLE raw_readings (          -- inputs that are values; see the view readings
    position   INTEGER PRIMARY KEY,  -- order in which the engine was told, with inputs
    source     INTEGER NOT NULL,     -- number in sources
    phenomenon INTEGER NOT NULL,     -- when it was sampled
    received   INTEGER NOT NULL,     -- when the daemon got it
    value      REAL NOT NULL,
    sequence   INTEGER,              -- the sender's running number
    excluded   INTEGER               -- 1: the sender's own status says not to use it
) STRICT;
CREATE TABLE inputs (                -- all other inputs
    position INTEGER PRIMARY KEY,
    kind     TEXT NOT NULL,          -- setup, gate, refused, tick, supplied, order
    received INTEGER,                -- when the daemon got it
    body     TEXT NOT NULL           -- the whole input as JSON; numbers read back to the same bits
) STRICT;
CREATE TABLE outputs (
    position INTEGER PRIMARY KEY,    -- order in which the engine said it, from 1
    input    INTEGER NOT NULL,       -- position of the input that caused it
    subject  INTEGER,                -- number in sources of what it is about
    kind     TEXT NOT NULL,          -- correction, withdrawn, alarm, degree, pair, answer …
    body     TEXT NOT NULL
) STRICT;
CREATE TABLE documents (             -- what is published, in the order of issue
    number  INTEGER PRIMARY KEY,
    input   INTEGER NOT NULL,        -- position of the last input before it
    retain  INTEGER NOT NULL,
    expires INTEGER,                 -- after this instant it is no longer worth sending
    topic   TEXT NOT NULL,
    correlation BLOB,                -- of an answer: what its asker knows it by
    payload BLOB NOT NULL            -- empty: clears the retained document of the topic
) STRICT;
CREATE TABLE settled (               -- documents that wait no longer
    number INTEGER PRIMARY KEY,
    batch  INTEGER NOT NULL,
    how    TEXT NOT NULL             -- taken, overtaken, expired, refused, pushed-out, not-sent
) STRICT;
CREATE TABLE events (                -- what happened to the record itself
    batch INTEGER NOT NULL,
    kind  TEXT NOT NULL,             -- start, subscriptions, sealed, removed
    body  TEXT NOT NULL
) STRICT;
CREATE TABLE states (                -- parts of the engine's state, as they were after a batch
    batch  INTEGER NOT NULL,
    part   TEXT NOT NULL,
    digest BLOB NOT NULL,            -- SHA-256 of bytes
    bytes  BLOB NOT NULL
) STRICT;
CREATE TABLE waiting_at_opening (    -- documents of earlier files that the broker did not have
    number  INTEGER PRIMARY KEY,
    expires INTEGER,
    retain  INTEGER NOT NULL,
    topic   TEXT NOT NULL,
    correlation BLOB,
    payload BLOB NOT NULL
) STRICT;
CREATE TABLE retained_at_opening (   -- retained documents as they should stand at the broker
    topic   TEXT PRIMARY KEY,
    number  INTEGER NOT NULL,
    expires INTEGER,
    payload BLOB NOT NULL
) STRICT;
";

/// Indexes that the writing of every batch needs; small.
pub(super) const LIVE_INDEXES: &str = "
CREATE INDEX states_by_part ON states (part, batch);
CREATE INDEX setups ON inputs (position) WHERE kind = 'setup';
";

/// Indexes that a finished file gets. In a file that is written to, the first costs more than all
/// the rest of the writing.
pub(super) const REST_INDEXES: &str = "
CREATE INDEX IF NOT EXISTS readings_by_source ON raw_readings (source, phenomenon);
CREATE INDEX IF NOT EXISTS outputs_by_kind ON outputs (kind, position);
CREATE INDEX IF NOT EXISTS outputs_by_input ON outputs (input);
";

/// Opens a file to write to; makes the tables if it is new.
///
/// # Errors
/// When the file can't be opened, is no record, or has another format.
pub(super) fn open_to_write(path: &Path) -> Result<Connection, RecordError> {
    connect_to_write(path).map_err(|error| error.of(path))
}

fn connect_to_write(path: &Path) -> Result<Connection, RecordError> {
    let connection = Connection::open(path)?;
    connection.busy_timeout(BUSY_WAIT)?;
    // The stamp first: a file that is not ours must not be touched.
    let is_new = is_empty(&connection)?;
    if !is_new {
        check_stamp(&connection, path)?;
    }
    // Write-ahead log: readers (an auditor, a copy) do not stop the daemon. FULL: a commit is on
    // the disk when it returns, also when the power fails right after (SQLite documentation,
    // PRAGMA synchronous).
    connection.pragma_update(None, "journal_mode", "WAL")?;
    connection.pragma_update(None, "synchronous", "FULL")?;
    connection.pragma_update(None, "wal_autocheckpoint", FOLD_PAGES)?;
    Ok(connection)
}

/// Opens a file to read from.
///
/// # Errors
/// When the file can't be opened, is no record, or has another format.
pub(super) fn open_to_read(path: &Path) -> Result<Connection, RecordError> {
    connect_to_read(path).map_err(|error| error.of(path))
}

fn connect_to_read(path: &Path) -> Result<Connection, RecordError> {
    let flags = OpenFlags::SQLITE_OPEN_READ_ONLY | OpenFlags::SQLITE_OPEN_NO_MUTEX;
    let connection = Connection::open_with_flags(path, flags)?;
    connection.busy_timeout(BUSY_WAIT)?;
    check_stamp(&connection, path)?;
    Ok(connection)
}

/// Whether nothing was ever committed to the file.
pub(super) fn is_empty(connection: &Connection) -> Result<bool, RecordError> {
    let version: i32 = connection.query_row("PRAGMA user_version", [], |row| row.get(0))?;
    let tables: i64 =
        connection.query_row("SELECT count(*) FROM sqlite_schema", [], |row| row.get(0))?;
    Ok(tables == 0 && version == 0)
}

/// Whether the file at `path` can be read and nothing was ever committed to it: its making was
/// broken off.
pub(super) fn is_unmade(path: &Path) -> bool {
    let flags = OpenFlags::SQLITE_OPEN_READ_ONLY | OpenFlags::SQLITE_OPEN_NO_MUTEX;
    Connection::open_with_flags(path, flags)
        .map_err(RecordError::from)
        .and_then(|connection| is_empty(&connection))
        .unwrap_or(false)
}

/// Stamps a new file as ours; part of the transaction that fills it.
pub(super) fn stamp(connection: &Connection) -> Result<(), RecordError> {
    connection.pragma_update(None, "application_id", APPLICATION_ID)?;
    connection.pragma_update(None, "user_version", FORMAT_VERSION)?;
    Ok(())
}

fn check_stamp(connection: &Connection, path: &Path) -> Result<(), RecordError> {
    let version: i32 = connection.query_row("PRAGMA user_version", [], |row| row.get(0))?;
    let application: i32 = connection.query_row("PRAGMA application_id", [], |row| row.get(0))?;
    if application != APPLICATION_ID {
        return Err(RecordError::Foreign {
            path: path.to_path_buf(),
        });
    }
    if version != FORMAT_VERSION {
        return Err(RecordError::OtherFormat {
            path: path.to_path_buf(),
            found: version,
            known: FORMAT_VERSION,
        });
    }
    Ok(())
}
