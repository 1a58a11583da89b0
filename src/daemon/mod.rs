//! The daemon: everything around the engine, in one order that never changes.
//!
//! Receive, decode, step the engine, record inputs and outputs together, publish, acknowledge. The
//! engine decides; nothing here does. One task owns the engine, the record and the outbox; a second
//! one polls the broker.
//!
//! Modules in reading order:
//! - `shell`: the engine with its record and outbox (`crate::keeper`), and what turns messages into
//!   inputs
//! - `turn`: the loop that everything happens in
//! - `session`, `memory`: connections that come and go, and what a broker may have forgotten
//! - `handing`, `refusals`: documents on their way, and what the broker says to them
//! - `paused`: the record can't be written
//! - `ending`: the orderly end
//! - `settling`: no ticks before the broker has sent what it kept
//! - `held`: messages that wait while nothing can be taken
//! - `report`: the `state` document

mod ending;
mod handing;
mod held;
mod memory;
mod paused;
mod refusals;
mod report;
mod session;
mod settling;
mod shell;
mod turn;

use crate::broker::TlsError;
use crate::configuration::Configuration;
use crate::keeper::RestoreError;
use crate::record::RecordError;
use holdtrue_engine::time::Timestamp;
use shell::Shell;
use std::future::Future;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{SystemTime, UNIX_EPOCH};

/// Why the daemon could not start or go on. All of these are the outside's failures.
#[derive(Debug, thiserror::Error)]
pub enum Error {
    /// The record can't be used.
    #[error(transparent)]
    Record(#[from] RecordError),
    /// The engine's state can't be restored.
    #[error(transparent)]
    Restore(#[from] RestoreError),
    /// Encryption can't be set up.
    #[error(transparent)]
    Tls(#[from] TlsError),
}

/// Runs the daemon until `shutdown` completes; then it records and publishes what it has, says
/// goodbye and returns.
///
/// # Errors
/// When the record or the certificates can't be used at the start. A broker that is away and a
/// record that can't be written later are no errors: the daemon waits for them.
pub async fn run(
    configuration: Configuration,
    shutdown: impl Future<Output = ()>,
) -> Result<(), Error> {
    tokio::pin!(shutdown);
    let stop = Arc::new(AtomicBool::new(false));
    let stopped = Arc::clone(&stop);
    // A thread of its own: reading a long record takes minutes, and being told to stop must work.
    let mut opening = tokio::task::spawn_blocking(move || {
        let shell = Shell::start(&configuration, &stopped)?;
        Ok::<_, Error>(shell.map(|shell| (configuration, shell)))
    });
    let opened = tokio::select! {
        opened = &mut opening => opened,
        () = &mut shutdown => {
            stop.store(true, Ordering::Relaxed);
            tracing::info!("stopping before the record was read");
            opening.await.map(|opened| opened.map(|_| None))
        }
    };
    let opened = opened.unwrap_or_else(|ended| std::panic::resume_unwind(ended.into_panic()))?;
    if let Some((configuration, shell)) = opened {
        turn::Daemon::start(configuration, shell)?
            .run(shutdown)
            .await;
    }
    Ok(())
}

/// The clock. The only place that reads it.
fn now() -> Timestamp {
    let nanos = match SystemTime::now().duration_since(UNIX_EPOCH) {
        Ok(after) => i64::try_from(after.as_nanos()).unwrap_or(i64::MAX),
        Err(before) => i64::try_from(before.duration().as_nanos()).map_or(i64::MIN, |it| -it),
    };
    Timestamp(nanos)
}
