//! The command line: one file per subcommand.
//!
//! Modules in reading order:
//! - [`check`]: everything that is wrong with a configuration
//! - `run`: the daemon, until it is told to stop
//! - `demo`: an invented plant held true on this machine
//! - `import`: recordings become a record
//! - `export`: a view of a record as CSV
//! - `tell`: an order to a running daemon
//! - `verify`: whether a record is whole
//! - `replay`: a record run again, as an audit or with another configuration
//! - `log`: what an operator reads while the daemon runs

pub mod check;
mod commissioning;

#[cfg(feature = "demo")]
mod demo;

mod export;
mod import;
mod log;
mod replay;
mod run;
mod tell;
mod verify;
mod when;

use clap::{Parser, Subcommand};
use std::path::PathBuf;
use std::process::ExitCode;

/// Help of `--log`.
const LOG_HELP: &str = "Which log lines are shown: \"debug\", or \"info,holdtrue::broker=debug\" \
    [default: the variable RUST_LOG, else \"info,rumqttc=error\"]";

/// How a command ended; each has its exit code.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ending {
    /// 0: done.
    Done,
    /// 1: done, but the answer is no.
    No,
    /// 2: wrong usage or configuration.
    Wrong,
    /// 3: the outside failed: broker, disk.
    Failed,
}

impl From<Ending> for ExitCode {
    fn from(ending: Ending) -> Self {
        Self::from(match ending {
            Ending::Done => 0,
            Ending::No => 1,
            Ending::Wrong => 2,
            Ending::Failed => 3,
        })
    }
}

/// Keeps deployed sensors true between calibrations: fits the drift of each sensor against its
/// reference and publishes corrections with uncertainty, and alarms, over MQTT.
///
/// It advises. It is no part of a safety function.
#[derive(Debug, Parser)]
#[command(name = "holdtrue", version, arg_required_else_help = true)]
pub struct Arguments {
    /// How log lines look on standard error.
    #[arg(long, global = true, value_name = "FORM", default_value = "text")]
    log_format: log::Format,
    // A doc comment would need backticks, which a terminal shows.
    #[arg(long, global = true, value_name = "FILTER", help = LOG_HELP)]
    log: Option<String>,
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    /// Hold an invented plant true on this machine: broker, plant and daemon in one, no
    /// configuration needed.
    #[cfg(feature = "demo")]
    #[command(after_help = "Example:\n  holdtrue demo --days 60\n\n\
        Exit code: 0 held true (or ended by Ctrl-C), 1 not held true, 2 wrong usage, 3 a part \
        failed.")]
    Demo(demo::Demo),
    /// Run the daemon until it is told to stop (Ctrl-C, SIGTERM).
    #[command(
        after_help = "Example:\n  holdtrue run --config /etc/holdtrue/holdtrue.toml\n\n\
        Exit code: 0 stopped when told to, 1 the record says otherwise than this program would,\n\
        2 configuration refused, 3 the outside failed (broker, disk)."
    )]
    Run {
        /// The configuration file.
        #[arg(long, value_name = "FILE")]
        config: PathBuf,
    },
    /// Say everything that is wrong with a configuration, with line and column.
    #[command(
        after_help = "Example:\n  holdtrue check --config /etc/holdtrue/holdtrue.toml\n\n\
        Exit code: 0 sound (warnings may be shown), 2 refused."
    )]
    Check {
        /// The configuration file.
        #[arg(long, value_name = "FILE")]
        config: PathBuf,
        /// One JSON object on standard output instead of text.
        #[arg(long)]
        json: bool,
    },
    /// Make a record from recordings (CSV, JSON lines, SenML), so that a year of history can be
    /// tried before going live.
    #[command(
        after_help = "Example:\n  holdtrue import 2025.csv lab.csv --config holdtrue.toml \\\n    \
        --record trial --time at --map pH=intake/ph-1 --map \"lab pH=reference:lab/ph\"\n\n\
        Exit code: 0 done, 1 done but rows were left out, 2 refused and nothing written, 3 a file\n\
        or the record failed."
    )]
    Import(Box<import::Import>),
    /// Write a view of a record as CSV: readings, pairs, corrections, alarms …
    #[command(
        after_help = "Example:\n  holdtrue export /var/lib/holdtrue corrections \
        --channel intake/ph-1 --from 2026-03-01 --out ph-1.csv\n\n\
        Exit code: 0 done, 2 wrong usage, 3 the record or the output failed."
    )]
    Export(export::Export),
    /// Give a running daemon an order over the broker, and wait for its answer.
    Tell(Box<tell::Tell>),
    /// Say whether a record is whole and as it was written: seals, links, missing files.
    #[command(after_help = "Example:\n  holdtrue verify /var/lib/holdtrue\n\n\
        Exit code: 0 whole, 1 not whole (the first broken link of each file is named), 2 wrong \
        usage, 3 the folder can't be read.")]
    Verify(verify::Verify),
    /// Run the engine again over a record and compare every output bit for bit; with --config, try
    /// another configuration on the recorded readings.
    #[command(after_help = "Examples:\n  holdtrue replay /var/lib/holdtrue\n  \
        holdtrue replay /var/lib/holdtrue --from 2026-12-01 --to 2026-12-03\n  \
        holdtrue replay /var/lib/holdtrue --config candidate.toml\n\n\
        Exit code: 0 all identical (or tried), 1 different, or written by another arithmetic, 2 \
        wrong\nusage or configuration, 3 the folder can't be read.")]
    Replay(replay::Replay),
}

impl Command {
    /// Which log lines are shown when nobody says which.
    fn usual_log(&self) -> &'static str {
        match self {
            // The demo plants faults; its table tells what became of them.
            #[cfg(feature = "demo")]
            Self::Demo(_) => "error",
            Self::Import(_) => "warn",
            _ => log::DEFAULT,
        }
    }
}

/// Does what the command line says.
#[must_use]
pub fn run(arguments: Arguments) -> Ending {
    let usual = arguments.command.usual_log();
    if let Err(message) = log::set_up(arguments.log_format, arguments.log.as_deref(), usual) {
        eprintln!("error: {message}");
        return Ending::Wrong;
    }
    match arguments.command {
        #[cfg(feature = "demo")]
        Command::Demo(demo) => demo.run(),
        Command::Run { config } => run::run(&config),
        Command::Check { config, json } => check::run(&config, json, &mut std::io::stdout()),
        Command::Import(import) => import.run(),
        Command::Export(export) => export.run(),
        Command::Tell(tell) => tell.run(),
        Command::Verify(verify) => verify.run(),
        Command::Replay(replay) => replay.run(),
    }
}
