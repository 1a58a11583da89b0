//! `holdtrue demo`: an invented plant held true on this machine, and whether it was.

use super::Ending;
use crate::demo::{self, DemoError, DemoOptions};
use clap::Args;
use std::path::PathBuf;

/// Arguments of the demo.
#[derive(Debug, Args)]
pub(super) struct Demo {
    /// End after so many days of the plant's time (20 to 120), as fast as it goes, and judge the
    /// result. Without it the demo runs a day a second until Ctrl-C.
    #[arg(long)]
    days: Option<f64>,
    /// Decides everything that the plant does.
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Keep the record in this folder, which must be empty or not exist: to look into it, verify
    /// and replay it. Without it the record goes with the demo.
    #[arg(long, value_name = "FOLDER")]
    record: Option<PathBuf>,
    /// The result as JSON.
    #[arg(long)]
    json: bool,
    /// Expect an alarm that nothing raises: proves that the answer can be no.
    #[arg(long, hide = true)]
    expect_the_impossible: bool,
}

impl Demo {
    /// Runs it.
    pub(super) fn run(&self) -> Ending {
        let options = DemoOptions {
            days: self.days,
            seed: self.seed,
            record: self.record.clone(),
            json: self.json,
            expect_the_impossible: self.expect_the_impossible,
        };
        match demo::run(&options) {
            // Ctrl-C comes at any time, also before a fault could be noticed: only a whole run is
            // judged by its exit code.
            Ok(good) if good || self.days.is_none() => Ending::Done,
            Ok(_) => Ending::No,
            Err(error) => {
                eprintln!("error: {error}");
                match error {
                    DemoError::Usage(_) => Ending::Wrong,
                    DemoError::Part(..) => Ending::Failed,
                }
            }
        }
    }
}
