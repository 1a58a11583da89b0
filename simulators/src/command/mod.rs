//! The command line of `plant`: one file per command.
//!
//! Exit codes: 0 done; 1 done, but rows were left out, messages refused or limits broken; 2 wrong
//! usage; 3 the outside (broker, disk) failed.

mod broker;
mod feed;
mod list;
pub mod progress;
mod publish;
mod run;
mod score;
mod write;

pub use score::ending;

use clap::{Parser, Subcommand};
use std::fmt;
use std::process::ExitCode;

/// Invented plants with known truth, and recordings, to files or to an MQTT broker.
#[derive(Debug, Parser)]
#[command(version, about, long_about = None, arg_required_else_help = true)]
pub struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    /// Lists the scenarios with the ranges that their parameters are drawn from
    #[command(after_help = "Example:\n  plant list\n  plant list linear --json")]
    List(list::List),
    /// Writes a scenario's readings, its truth and a fitting configuration to a folder
    #[command(after_help = "Example:\n  plant write harrow-mere --seed 7 --days 60 --out mere")]
    Write(write::Write),
    /// Publishes a scenario's readings to a broker
    #[command(after_help = "Example:\n  plant publish linear --seed 7 --days 30 \
        --broker mqtt://127.0.0.1:1883 --speed 86400")]
    Publish(publish::Publish),
    /// Feeds a recording (CSV or JSON lines) to a broker, row by row in the file's order
    #[command(
        after_help = "Example:\n  plant feed record.csv --broker mqtt://127.0.0.1:1883 \
        --topic bench/resistor \\\n    --field at=date:time --time-format date \
        --field value=ohm --field seq=seq --constant reference=0"
    )]
    Feed(feed::Feed),
    /// Drives the engine, without a broker, through faults with known truth and holds it to limits
    #[command(
        after_help = "Example:\n  plant score --short\n  plant score --scenario step stuck \
        --seeds 100 --seed-base 5000 --json\n  \
        plant score --study steps --seeds 100\n\n\
        Exit code: 0 all limits hold, 1 a limit is broken, 2 wrong usage"
    )]
    Score(score::Score),
}

/// Why a command did not end well.
#[derive(Debug)]
pub enum Failure {
    /// Done, but not all of it.
    Incomplete(String),
    /// The request makes no sense.
    Usage(String),
    /// Broker or disk.
    Outside(String),
}

impl Failure {
    /// The process's exit code.
    #[must_use]
    pub fn exit_code(&self) -> ExitCode {
        ExitCode::from(match self {
            Self::Incomplete(_) => 1,
            Self::Usage(_) => 2,
            Self::Outside(_) => 3,
        })
    }

    /// The outside failed: `error` with what caused it.
    fn outside(error: &dyn std::error::Error) -> Self {
        let mut text = error.to_string();
        let mut cause = error.source();
        while let Some(deeper) = cause {
            text = format!("{text}: {deeper}");
            cause = deeper.source();
        }
        Self::Outside(text)
    }
}

impl fmt::Display for Failure {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Incomplete(text) | Self::Usage(text) | Self::Outside(text) => out.write_str(text),
        }
    }
}

/// Carries out a command.
///
/// # Errors
/// With the exit code that fits, and a sentence for the user.
pub fn run(arguments: Arguments) -> Result<(), Failure> {
    match arguments.command {
        Command::List(list) => list.carry_out(),
        Command::Write(write) => write.carry_out(),
        Command::Publish(publish) => publish.carry_out(),
        Command::Feed(feed) => feed.carry_out(),
        Command::Score(score) => score.carry_out(),
    }
}

/// Prints a line to standard output; a closed pipe (`plant list | head`) is no failure.
fn say(line: &str) {
    use std::io::Write;
    let _ = writeln!(std::io::stdout(), "{line}");
}

/// Prints a value as JSON.
fn say_json(value: &impl serde::Serialize) -> Result<(), Failure> {
    let text = serde_json::to_string_pretty(value).map_err(|error| Failure::outside(&error))?;
    say(&text);
    Ok(())
}
