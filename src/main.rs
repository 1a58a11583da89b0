//! The `holdtrue` command: reads the command line, does what it says, ends with its exit code.

use clap::Parser;
use holdtrue::command::{self, Arguments};
use std::process::ExitCode;

fn main() -> ExitCode {
    // Wrong usage ends inside, with exit code 2 and the help that fits.
    command::run(Arguments::parse()).into()
}
