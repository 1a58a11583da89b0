//! A Mosquitto broker with a configuration, a port and a persistence folder of its own.

use super::{signal, wait_for};
use std::io::Write;
use std::net::{Ipv4Addr, TcpListener, TcpStream};
use std::process::{Child, Command, Stdio};
use tempfile::TempDir;

/// The broker. Ends when dropped.
pub(crate) struct Mosquitto {
    pub(crate) port: u16,
    folder: TempDir,
    process: Option<Child>,
}

impl Mosquitto {
    /// Starts one that keeps sessions, queues and retained messages over a restart.
    pub(crate) fn start() -> Self {
        Self::start_with("")
    }

    /// The same with more lines of configuration.
    pub(crate) fn start_with(extra: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        let port = free_port();
        let path = folder.path();
        let configuration = format!(
            "listener {port} 127.0.0.1\nallow_anonymous true\nuser root\npersistence true\n\
             persistence_location {}/\nautosave_interval 1\nmax_queued_messages 100000\n\
             log_dest file {}/log\n{extra}\n",
            path.display(),
            path.display()
        );
        std::fs::write(path.join("mosquitto.conf"), configuration).unwrap();
        let mut broker = Self {
            port,
            folder,
            process: None,
        };
        broker.launch();
        broker
    }

    /// Starts it (again) and waits until it listens.
    pub(crate) fn launch(&mut self) {
        assert!(self.process.is_none(), "it runs already");
        let path = std::env::var("PATH").unwrap_or_default();
        let process = Command::new("mosquitto")
            .env("PATH", format!("{path}:/usr/sbin:/usr/local/sbin"))
            .arg("-c")
            .arg(self.folder.path().join("mosquitto.conf"))
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .expect("mosquitto is installed (tests/run installs it)");
        self.process = Some(process);
        wait_for("mosquitto listens", || {
            TcpStream::connect((Ipv4Addr::LOCALHOST, self.port)).ok()
        });
    }

    /// Asks it to end, as a service manager does; it saves its state.
    pub(crate) fn stop(&mut self) {
        let mut process = self.process.take().unwrap();
        signal("TERM", process.id());
        process.wait().unwrap();
    }

    /// Kills it without warning; it loses what it had not saved.
    pub(crate) fn kill(&mut self) {
        let mut process = self.process.take().unwrap();
        process.kill().unwrap();
        process.wait().unwrap();
    }

    /// Loses everything that it kept; to be called while it does not run.
    pub(crate) fn forget(&self) {
        assert!(self.process.is_none(), "it runs");
        std::fs::remove_file(self.folder.path().join("mosquitto.db")).unwrap();
    }

    /// One of the broker's own clients, pointed at this broker and a topic, quality of service 1.
    fn client(&self, program: &str, topic: &str) -> Command {
        let mut command = Command::new(program);
        command
            .args(["-h", "127.0.0.1", "-p", &self.port.to_string()])
            .args(["-q", "1", "-t", topic]);
        command
    }

    /// Publishes one message with `mosquitto_pub`, quality of service 1.
    pub(crate) fn publish(&self, topic: &str, payload: &[u8]) {
        self.publish_with(topic, payload, &[]);
    }

    /// The same with more arguments, such as `-r`.
    pub(crate) fn publish_with(&self, topic: &str, payload: &[u8], arguments: &[&str]) {
        let mut process = self
            .client("mosquitto_pub", topic)
            .arg(if payload.is_empty() { "-n" } else { "-s" })
            .args(arguments)
            .stdin(Stdio::piped())
            .spawn()
            .unwrap();
        process.stdin.take().unwrap().write_all(payload).unwrap();
        assert!(
            process.wait().unwrap().success(),
            "mosquitto_pub failed for {topic}"
        );
    }

    /// Publishes each line as a message of its own, in order, with one `mosquitto_pub`.
    pub(crate) fn publish_lines(&self, topic: &str, lines: &[String]) {
        let mut process = self
            .client("mosquitto_pub", topic)
            .arg("-l")
            .stdin(Stdio::piped())
            .spawn()
            .unwrap();
        let mut input = process.stdin.take().unwrap();
        for line in lines {
            writeln!(input, "{line}").unwrap();
        }
        drop(input);
        assert!(
            process.wait().unwrap().success(),
            "mosquitto_pub failed for {topic}"
        );
    }

    /// The retained message on a topic, read with `mosquitto_sub`; `None` if there is none.
    pub(crate) fn retained(&self, topic: &str) -> Option<Vec<u8>> {
        let output = self
            .client("mosquitto_sub", topic)
            .args(["--retained-only", "-C", "1", "-W", "1", "-N"])
            .output()
            .unwrap();
        output.status.success().then_some(output.stdout)
    }

    /// All retained messages below a topic, sorted: topic and payload.
    pub(crate) fn all_retained(&self, filter: &str) -> Vec<(String, String)> {
        let output = self
            .client("mosquitto_sub", filter)
            .args(["--retained-only", "-W", "2", "-F", "%t %p"])
            .output()
            .unwrap();
        let text = String::from_utf8(output.stdout).unwrap();
        let mut all: Vec<(String, String)> = text
            .lines()
            .filter_map(|line| line.split_once(' '))
            .map(|(topic, payload)| (topic.to_owned(), payload.to_owned()))
            .collect();
        all.sort();
        all
    }
}

impl Drop for Mosquitto {
    fn drop(&mut self) {
        if let Some(mut process) = self.process.take() {
            let _ = process.kill();
            let _ = process.wait();
        }
        if std::thread::panicking() {
            let log = std::fs::read_to_string(self.folder.path().join("log")).unwrap_or_default();
            let tail: Vec<&str> = log
                .lines()
                .filter(|it| !it.contains("Saving"))
                .rev()
                .take(30)
                .collect();
            eprintln!("--- mosquitto, newest first\n{}", tail.join("\n"));
        }
    }
}

/// A port that was free a moment ago.
fn free_port() -> u16 {
    TcpListener::bind((Ipv4Addr::LOCALHOST, 0))
        .unwrap()
        .local_addr()
        .unwrap()
        .port()
}
