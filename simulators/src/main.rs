//! The `plant` command: invented plants and recordings, to files or to a broker.

use clap::Parser;
use holdtrue_simulators::command;
use std::process::ExitCode;

fn main() -> ExitCode {
    match command::run(command::Arguments::parse()) {
        Ok(()) => ExitCode::SUCCESS,
        Err(failure) => {
            eprintln!("plant: {failure}");
            failure.exit_code()
        }
    }
}
