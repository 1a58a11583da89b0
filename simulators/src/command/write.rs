//! `plant write`: a run to files.

use super::run::Run;
use super::{Failure, progress, say, say_json};
use crate::write::{self, Form};
use clap::Args;
use std::path::PathBuf;

/// Writes a run.
#[derive(Debug, Args)]
pub(super) struct Write {
    #[command(flatten)]
    run: Run,
    /// Folder, made if missing
    #[arg(long)]
    out: PathBuf,
    /// Form of the readings file
    #[arg(long, value_parser = ["jsonl", "csv"], default_value = "jsonl")]
    format: String,
    /// What was done, as JSON
    #[arg(long)]
    json: bool,
}

impl Write {
    pub(super) fn carry_out(self) -> Result<(), Failure> {
        let plant = self.run.plant()?;
        let form = if self.format == "csv" {
            Form::Csv
        } else {
            Form::JsonLines
        };
        let bar = progress::bar(Some(plant.expected_samples()), "readings");
        let written = write::write(plant, form, &self.out, |count| bar.set_position(count))
            .map_err(|error| Failure::outside(&error))?;
        bar.finish_and_clear();
        if self.json {
            return say_json(&serde_json::json!({
                "readings": written.readings,
                "files": written.files,
            }));
        }
        say(&format!("{} readings", written.readings));
        for file in &written.files {
            say(&format!("{}", file.display()));
        }
        Ok(())
    }
}
