//! What the tests of the whole daemon share: a real Mosquitto, the real binary, and a reader of
//! everything published. Each has its own folder and port and is ended by its own process number.

#![allow(
    dead_code,
    reason = "each test file uses its own part of what all of them share"
)]
#![allow(
    clippy::unwrap_used,
    clippy::missing_panics_doc,
    reason = "a test says what went wrong by panicking"
)]

pub(crate) mod holdtrue;
pub(crate) mod listener;
pub(crate) mod load;
pub(crate) mod mosquitto;
pub(crate) mod publisher;
pub(crate) mod schemas;

use std::time::{Duration, Instant};

/// No condition may take longer than this, also on a busy machine.
pub(crate) const LIMIT: Duration = Duration::from_mins(1);

/// Waits until `found` gives something.
pub(crate) fn wait_for<T>(what: &str, mut found: impl FnMut() -> Option<T>) -> T {
    let limit = Instant::now() + LIMIT;
    loop {
        if let Some(found) = found() {
            return found;
        }
        assert!(
            Instant::now() < limit,
            "waited {LIMIT:?} in vain for: {what}"
        );
        std::thread::sleep(Duration::from_millis(10));
    }
}

/// Sends a signal to one process that this test started.
pub(crate) fn signal(name: &str, process: u32) {
    let status = std::process::Command::new("kill")
        .args([&format!("-{name}"), &process.to_string()])
        .status()
        .unwrap();
    assert!(status.success(), "no process {process}");
}
