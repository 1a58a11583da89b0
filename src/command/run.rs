//! `holdtrue run`: the daemon, until SIGTERM or Ctrl-C.

use super::Ending;
use crate::keeper::RestoreError;
use crate::{configuration, daemon};
use std::io;
use std::path::Path;
use tokio::signal::unix::{SignalKind, signal};

/// Runs the daemon with a configuration file.
pub(super) fn run(path: &Path) -> Ending {
    let configuration = match configuration::load(path) {
        Ok(configuration) => configuration,
        Err(problems) => {
            eprintln!("{problems}");
            return Ending::Wrong;
        }
    };
    for warning in &configuration.warnings {
        tracing::warn!("{}", warning.line_for(&path.display().to_string()));
    }
    // One thread: a worker beside the one that polls the broker cost five times the processor time.
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build();
    let ended = runtime.and_then(|runtime| {
        runtime.block_on(async {
            let shutdown = told_to_stop()?;
            // On the heap: the daemon's whole state is in this future.
            Ok(Box::pin(daemon::run(configuration, shutdown)).await)
        })
    });
    match ended {
        Ok(Ok(())) => Ending::Done,
        Ok(Err(error @ daemon::Error::Restore(RestoreError::Differs { .. }))) => {
            tracing::error!("{error}");
            Ending::No
        }
        Ok(Err(error)) => failed(&error),
        Err(error) => failed(&error),
    }
}

/// Ends when the process is told to stop. The signals are caught from the call on.
fn told_to_stop() -> io::Result<impl Future<Output = ()>> {
    let mut terminate = signal(SignalKind::terminate())?;
    let mut interrupt = signal(SignalKind::interrupt())?;
    Ok(async move {
        let name = tokio::select! {
            _ = terminate.recv() => "SIGTERM",
            _ = interrupt.recv() => "Ctrl-C",
        };
        tracing::info!("told to stop by {name}");
    })
}

/// Says what failed, with the causes that are linked to it, unless its own words have them.
fn failed(error: &dyn std::error::Error) -> Ending {
    let mut text = error.to_string();
    let mut cause = error.source();
    while let Some(error) = cause {
        let because = error.to_string();
        if !text.contains(&because) {
            text = format!("{text}: {because}");
        }
        cause = error.source();
    }
    tracing::error!("{text}");
    Ending::Failed
}
