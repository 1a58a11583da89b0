//! The `plant` command: invented plants and recordings, to files or to a broker.

mod command;

use clap::Parser;
use std::process::ExitCode;

fn main() -> ExitCode {
    let arguments = command::Arguments::parse();
    match command::run(arguments) {
        Ok(()) => ExitCode::SUCCESS,
        Err(failure) => {
            eprintln!("plant: {failure}");
            failure.exit_code()
        }
    }
}
