//! The real binary with a configuration and a record folder of its own.

use super::{LIMIT, signal, wait_for};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, ExitStatus, Stdio};
use tempfile::TempDir;

/// A daemon. Killed when dropped.
pub(crate) struct Holdtrue {
    folder: TempDir,
    process: Option<Child>,
    /// Length of the log at the last start.
    logged_before: usize,
}

impl Holdtrue {
    /// Prepares one for the broker at `port`; `rest` follows `[node]`, `[broker]` and `[record]`.
    pub(crate) fn prepare(port: u16, rest: &str) -> Self {
        Self::prepare_with(port, "", "", rest)
    }

    /// The same with more lines in `[node]` and `[broker]`.
    pub(crate) fn prepare_with(port: u16, node: &str, broker: &str, rest: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        let daemon = Self {
            folder,
            process: None,
            logged_before: 0,
        };
        daemon.configure(port, node, broker, rest);
        daemon
    }

    /// Writes another configuration for the next start.
    pub(crate) fn configure(&self, port: u16, node: &str, broker: &str, rest: &str) {
        let text = format!(
            "[node]\nname = \"test\"\n{node}\n[broker]\nurl = \"mqtt://127.0.0.1:{port}\"\n\
             {broker}\n[record]\nfolder = \"record\"\ncommit = \"100 ms\"\n{rest}\n"
        );
        std::fs::write(self.folder.path().join("holdtrue.toml"), text).unwrap();
    }

    /// Prepares and starts one.
    pub(crate) fn start(port: u16, rest: &str) -> Self {
        let mut daemon = Self::prepare(port, rest);
        daemon.launch();
        daemon
    }

    /// Starts it (again).
    pub(crate) fn launch(&mut self) {
        assert!(self.process.is_none(), "it runs already");
        self.logged_before = self.log().len();
        let log = std::fs::File::options()
            .create(true)
            .append(true)
            .open(self.log_path())
            .unwrap();
        let process = Command::new(env!("CARGO_BIN_EXE_holdtrue"))
            .arg("run")
            .arg("--config")
            .arg(self.folder.path().join("holdtrue.toml"))
            .stdout(Stdio::null())
            .stderr(log)
            .spawn()
            .unwrap();
        self.process = Some(process);
    }

    /// Asks it to end and waits for that.
    pub(crate) fn stop(&mut self) -> ExitStatus {
        signal("TERM", self.process.as_ref().unwrap().id());
        self.wait_end()
    }

    /// Kills it without warning.
    pub(crate) fn kill(&mut self) {
        let mut process = self.process.take().unwrap();
        process.kill().unwrap();
        process.wait().unwrap();
    }

    /// Waits until it ends by itself.
    pub(crate) fn wait_end(&mut self) -> ExitStatus {
        let mut process = self.process.take().unwrap();
        wait_for("the daemon ends", || process.try_wait().unwrap())
    }

    /// Its process number.
    pub(crate) fn process(&self) -> u32 {
        self.process.as_ref().unwrap().id()
    }

    /// The record's folder.
    pub(crate) fn record(&self) -> PathBuf {
        self.folder.path().join("record")
    }

    /// A folder for the test's own files, such as certificates.
    pub(crate) fn folder(&self) -> &Path {
        self.folder.path()
    }

    /// What it logged so far.
    pub(crate) fn log(&self) -> String {
        std::fs::read_to_string(self.log_path()).unwrap_or_default()
    }

    /// Waits until the log since the last start holds a text.
    pub(crate) fn wait_log(&self, text: &str) {
        wait_for(&format!("log {text:?}"), || {
            self.log()[self.logged_before..]
                .contains(text)
                .then_some(())
        });
    }

    /// A connection to the file that is written to, or was last.
    pub(crate) fn newest_file(&self) -> rusqlite::Connection {
        let connection = rusqlite::Connection::open(self.files().pop().unwrap()).unwrap();
        connection.busy_timeout(LIMIT).unwrap();
        connection
    }

    /// A reading connection to the whole record: its tables hold the rows of all files.
    pub(crate) fn sqlite(&self) -> rusqlite::Connection {
        let connection = rusqlite::Connection::open_in_memory().unwrap();
        connection.busy_timeout(LIMIT).unwrap();
        let files = self.files();
        for (number, file) in files.iter().enumerate() {
            let path = file.to_str().unwrap();
            connection
                .execute(&format!("ATTACH ?1 AS file{number}"), [path])
                .unwrap();
        }
        for table in [
            "inputs",
            "raw_readings",
            "outputs",
            "documents",
            "settled",
            "events",
        ] {
            let selects: Vec<String> = (0..files.len())
                .map(|number| format!("SELECT * FROM file{number}.{table}"))
                .collect();
            let all = selects.join(" UNION ALL ");
            connection
                .execute_batch(&format!("CREATE TEMP VIEW {table} AS {all}"))
                .unwrap();
        }
        connection
            .execute_batch(
                "CREATE TEMP VIEW outbox AS SELECT * FROM documents
                 WHERE number NOT IN (SELECT number FROM settled)",
            )
            .unwrap();
        connection
    }

    /// The record's files, oldest first.
    fn files(&self) -> Vec<PathBuf> {
        let archive = holdtrue::record::Archive::open(&self.record()).unwrap();
        archive
            .days()
            .iter()
            .map(|day| archive.path(*day))
            .collect()
    }

    /// The one number that a query on the record gives.
    pub(crate) fn count(&self, query: &str) -> i64 {
        self.sqlite()
            .query_row(query, [], |row| row.get(0))
            .unwrap()
    }

    /// Waits until the record's file exists and a query gives at least this.
    pub(crate) fn wait_count(&self, query: &str, least: i64) {
        wait_for(&format!("{query} >= {least}"), || {
            let made = self.record().exists() && !self.files().is_empty();
            let connection = made.then(|| self.sqlite())?;
            let count: i64 = connection.query_row(query, [], |row| row.get(0)).ok()?;
            (count >= least).then_some(())
        });
    }

    fn log_path(&self) -> PathBuf {
        self.folder.path().join("log")
    }
}

impl Drop for Holdtrue {
    fn drop(&mut self) {
        if let Some(mut process) = self.process.take() {
            let _ = process.kill();
            let _ = process.wait();
        }
        if std::thread::panicking() {
            eprintln!("--- holdtrue\n{}", self.log());
        }
    }
}
