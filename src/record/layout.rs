//! Tables of the record file, its format stamp, and how the file is opened.

use super::RecordError;
use rusqlite::Connection;
use std::path::Path;

/// Format version that this program writes. A record with a higher one is refused.
pub const FORMAT_VERSION: i32 = 1;

/// Marks the file as a record of this daemon (SQLite header field `application_id`): the letters H
/// T r u.
const APPLICATION_ID: i32 = 0x4854_7275;

/// How long a statement waits for another process that reads or copies the file. Short: while it
/// waits, nothing else runs, and the daemon has an own back-off for a record that can't be
/// written.
const BUSY_WAIT: std::time::Duration = std::time::Duration::from_millis(250);

/// What an auditor sees when he opens the file. Times are integer nanoseconds since 1970 (UTC);
/// the views show them as text.
const TABLES: &str = "
CREATE TABLE inputs (
    position   INTEGER PRIMARY KEY,  -- order in which the engine was told, from 1
    kind       TEXT NOT NULL,        -- setup, reading, gate, refused, tick, supplied, order
    received   INTEGER,              -- when the daemon got it
    source     TEXT,                 -- indication/N, reference/N, influence/N; N as in the setup
    phenomenon INTEGER,              -- when it was sampled, or what an order tells was done
    body       TEXT NOT NULL         -- the whole input as JSON; numbers read back to the same bits
) STRICT;
CREATE TABLE outputs (
    position INTEGER PRIMARY KEY,    -- order in which the engine said it, from 1
    input    INTEGER NOT NULL,       -- position of the input that caused it
    kind     TEXT NOT NULL,          -- correction, withdrawn, alarm, degree, pair, answer …
    body     TEXT NOT NULL
) STRICT;
CREATE TABLE outbox (                -- documents that the broker has not yet acknowledged
    number  INTEGER PRIMARY KEY,
    topic   TEXT NOT NULL,
    payload BLOB NOT NULL,
    retain  INTEGER NOT NULL,
    expires INTEGER,                 -- after this instant it is no longer worth sending
    correlation BLOB                 -- of an answer: what its asker knows it by
) STRICT;
CREATE TABLE standing (              -- the retained documents as they should stand at the broker
    topic   TEXT PRIMARY KEY,
    payload BLOB NOT NULL,
    expires INTEGER
) STRICT;
CREATE TABLE sessions (              -- one row for each start of the daemon
    first_input INTEGER NOT NULL,    -- the next input's position at the start
    started     INTEGER NOT NULL,
    program     TEXT NOT NULL        -- version of the program
) STRICT;
CREATE TABLE subscriptions (filter TEXT PRIMARY KEY) STRICT;
CREATE VIEW inputs_readable AS
    SELECT position, kind, datetime(received / 1000000000, 'unixepoch') AS received_utc, source,
           datetime(phenomenon / 1000000000, 'unixepoch') AS phenomenon_utc, body FROM inputs;
CREATE VIEW outputs_readable AS
    SELECT outputs.position, input, datetime(received / 1000000000, 'unixepoch') AS received_utc,
           outputs.kind, outputs.body FROM outputs JOIN inputs ON inputs.position = outputs.input;
";

/// Indexes, also made in files that an earlier build began. The first finds what the engine asks
/// for (`Record::readings`) without walking through the whole record; every reading pays for it
/// with about 30 bytes. The second finds the last configuration.
const INDEXES: &str = "
CREATE INDEX IF NOT EXISTS readings_by_source ON inputs (source, phenomenon) WHERE kind = 'reading';
CREATE INDEX IF NOT EXISTS setups ON inputs (position) WHERE kind = 'setup';
";

/// A column that the outbox of earlier builds lacks.
const CORRELATION: (&str, &str) = (
    "SELECT count(*) FROM pragma_table_info('outbox') WHERE name = 'correlation'",
    "ALTER TABLE outbox ADD COLUMN correlation BLOB",
);

/// Opens the file, makes the tables if it is new, and refuses what this program can't read.
///
/// # Errors
/// When the file can't be opened, is no record, or was written by a newer format.
pub(super) fn open_file(path: &Path) -> Result<Connection, RecordError> {
    let mut connection = Connection::open(path)?;
    connection.busy_timeout(BUSY_WAIT)?;
    // The stamp first: a file that is not ours must not be touched.
    let version: i32 = connection.query_row("PRAGMA user_version", [], |row| row.get(0))?;
    let application: i32 = connection.query_row("PRAGMA application_id", [], |row| row.get(0))?;
    let tables: i64 =
        connection.query_row("SELECT count(*) FROM sqlite_schema", [], |row| row.get(0))?;
    let new = tables == 0 && version == 0;
    if !new && application != APPLICATION_ID {
        return Err(RecordError::Foreign {
            path: path.to_path_buf(),
        });
    }
    if version > FORMAT_VERSION {
        return Err(RecordError::NewerFormat {
            path: path.to_path_buf(),
            found: version,
            known: FORMAT_VERSION,
        });
    }
    // Write-ahead log: readers (an auditor, a copy) do not stop the daemon. FULL: a commit is on
    // the disk when it returns, also when the power fails right after (SQLite documentation,
    // PRAGMA synchronous).
    connection.pragma_update(None, "journal_mode", "WAL")?;
    connection.pragma_update(None, "synchronous", "FULL")?;
    if new {
        let transaction = connection.transaction()?;
        transaction.execute_batch(TABLES)?;
        transaction.pragma_update(None, "application_id", APPLICATION_ID)?;
        transaction.pragma_update(None, "user_version", FORMAT_VERSION)?;
        transaction.commit()?;
    }
    let known: i64 = connection.query_row(CORRELATION.0, [], |row| row.get(0))?;
    if known == 0 {
        connection.execute_batch(CORRELATION.1)?;
    }
    connection.execute_batch(INDEXES)?;
    Ok(connection)
}
