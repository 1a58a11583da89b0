//! Log lines: set up once, to standard error, for people or as JSON.

use std::io::IsTerminal;
use tracing_subscriber::EnvFilter;

/// What is shown unless a command has a default of its own. The MQTT library's warnings are left
/// out: what they tell is told by the daemon, once and with what to do.
pub(super) const DEFAULT: &str = "info,rumqttc=error";

/// How log lines look.
#[derive(Clone, Copy, Debug, PartialEq, Eq, clap::ValueEnum)]
pub(super) enum Format {
    /// For people.
    Text,
    /// One JSON object a line.
    Json,
}

/// Starts logging. `filter` as in `RUST_LOG`; without, that variable counts, else `usual`.
///
/// # Errors
/// What is wrong with the filter.
pub(super) fn set_up(format: Format, filter: Option<&str>, usual: &str) -> Result<(), String> {
    let told = filter
        .map(str::to_owned)
        .or_else(|| std::env::var("RUST_LOG").ok());
    let told = told
        .filter(|told| !told.trim().is_empty())
        .unwrap_or_else(|| usual.to_owned());
    let filter = EnvFilter::try_new(&told)
        .map_err(|error| format!("the log filter \"{told}\" can't be read: {error}"))?;
    let lines = tracing_subscriber::fmt()
        .with_env_filter(filter)
        .with_writer(std::io::stderr);
    // Inside a test or another program logging may be set up already; then that one stays.
    let _ = match format {
        Format::Text => {
            let coloured = std::io::stderr().is_terminal();
            lines.with_target(false).with_ansi(coloured).try_init()
        }
        Format::Json => lines.json().flatten_event(true).try_init(),
    };
    Ok(())
}
