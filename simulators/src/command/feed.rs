//! `plant feed`: a recording to a broker.

use super::Failure;
use super::broker::Target;
use crate::feed::FeedError;
use crate::feed::field::{Constant, Field, Kind};
use crate::feed::rows::{Mapping, Rows};
use crate::feed::table::{FileForm, Table};
use clap::Args;
use holdtrue_text::time_form::TimeForm;
use std::path::PathBuf;

/// Feeds a recording.
#[derive(Debug, Args)]
pub(super) struct Feed {
    /// The recording; .csv, or JSON lines (.jsonl, .ndjson)
    file: PathBuf,
    /// Topic; {COLUMN} stands for the row's cell
    #[arg(long)]
    topic: String,
    /// Column that becomes a member of the payload; kind number (default), text or time.
    /// Without any, all columns are sent as they are
    #[arg(long = "field", value_name = "KEY=COLUMN[:KIND]")]
    fields: Vec<Field>,
    /// Member that every payload gets
    #[arg(long = "constant", value_name = "KEY=JSON")]
    constants: Vec<Constant>,
    /// How times are read: rfc3339 (default), date, epoch, epoch-ms, or a pattern such as
    /// "%d.%m.%Y %H:%M" (UTC unless it has an offset)
    #[arg(long)]
    time_format: Option<TimeForm>,
    /// Form of the file, if its name does not tell
    #[arg(long, value_parser = ["csv", "jsonl"])]
    format: Option<String>,
    /// Separator of a CSV file
    #[arg(long, default_value = ",", value_parser = separator)]
    separator: u8,
    /// Only so many rows
    #[arg(long)]
    rows: Option<usize>,
    #[command(flatten)]
    target: Target,
}

impl Feed {
    pub(super) fn carry_out(self) -> Result<(), Failure> {
        let timed = self.fields.is_empty() || self.fields.iter().any(|it| it.kind == Kind::Time);
        if self.target.speed.is_some() && !timed {
            return Err(Failure::Usage(
                "--speed needs a --field of kind time".to_owned(),
            ));
        }
        self.target.link()?;
        let table = Table::open(&self.file, self.form()?).map_err(|error| failure(&error))?;
        let mapping = Mapping {
            topic: self.topic,
            fields: self.fields,
            constants: self.constants,
            time_form: self.time_format,
        };
        let mut rows = Rows::new(table, mapping).map_err(|error| failure(&error))?;
        let messages = rows.by_ref().take(self.rows.unwrap_or(usize::MAX));
        let delivered = self.target.deliver(messages, None)?;
        for reason in &rows.reasons {
            eprintln!("plant: {}, {reason}", self.file.display());
        }
        self.target.report(delivered, rows.left_out)
    }

    /// The file's form, as told or by its name.
    fn form(&self) -> Result<FileForm, Failure> {
        let by_name = self.file.extension().and_then(std::ffi::OsStr::to_str);
        match self.format.as_deref().or(by_name) {
            Some("csv") => Ok(FileForm::Csv {
                separator: self.separator,
            }),
            Some("jsonl" | "ndjson") => Ok(FileForm::JsonLines),
            _ => Err(Failure::Usage(format!(
                "{}: the name does not tell the form; say --format csv or --format jsonl",
                self.file.display()
            ))),
        }
    }
}

fn failure(error: &FeedError) -> Failure {
    match error {
        FeedError::File { .. } => Failure::outside(error),
        FeedError::Usage(text) => Failure::Usage(text.clone()),
    }
}

/// One character, or the word tab.
fn separator(text: &str) -> Result<u8, String> {
    match (text, text.as_bytes()) {
        ("tab", _) => Ok(b'\t'),
        (_, [one]) => Ok(*one),
        _ => Err("must be one character, or the word tab".to_owned()),
    }
}
