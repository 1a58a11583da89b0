//! `holdtrue export`: a view of a record as CSV.

use super::Ending;
use super::when::When;
use crate::record::{Archive, Choice, RecordError, VIEWS, View};
use crate::replay::Range;
use clap::Args;
use holdtrue_engine::time::Timestamp;
use holdtrue_simulators::command::progress;
use rusqlite::types::ValueRef;
use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::PathBuf;

/// Columns by which a view's rows are chosen in time; the first that it has counts.
const TIMES: [&str; 4] = ["sampled", "issued", "at", "received"];
/// Columns that name the channel or reference that a row is about.
const NAMES: [&str; 3] = ["channel", "subject", "name"];

/// Arguments.
#[derive(Debug, Args)]
pub(super) struct Export {
    /// The record's folder.
    #[arg(value_name = "RECORD")]
    record: PathBuf,
    /// What is wanted; --list tells what there is.
    #[arg(value_name = "VIEW", required_unless_present = "list")]
    view: Option<String>,
    /// Say which views there are.
    #[arg(long, conflicts_with_all = ["view", "from", "to", "channel", "out"])]
    list: bool,
    #[command(flatten)]
    when: When,
    /// Only what is about this channel, reference or influence quantity.
    #[arg(long, value_name = "NAME")]
    channel: Option<String>,
    /// Write to a file instead of standard output.
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
}

/// Why an export ended before its end.
enum Failure {
    /// Nothing like that can be had.
    Wrong(String),
    /// The record, or where it goes to.
    Failed(String),
    /// The reader has gone: it has what it wanted.
    Gone,
}

impl Export {
    /// Exports.
    pub(super) fn run(&self) -> Ending {
        let done = if self.list { list() } else { self.carry_out() };
        match done {
            Ok(()) | Err(Failure::Gone) => Ending::Done,
            Err(Failure::Wrong(text)) => {
                eprintln!("error: {text}");
                Ending::Wrong
            }
            Err(Failure::Failed(text)) => {
                eprintln!("error: {text}");
                Ending::Failed
            }
        }
    }

    fn carry_out(&self) -> Result<(), Failure> {
        let wanted = self.view.as_deref().unwrap_or_default();
        let view = view(wanted)?;
        let archive = Archive::open(&self.record)?;
        let Some(first) = archive.days().first() else {
            let message = format!("{} holds no record", self.record.display());
            return Err(Failure::Wrong(message));
        };
        let columns = archive.day(*first)?.view_columns(view)?;
        let choice = self.choice(view, &columns)?;
        let out: Box<dyn Write> = match &self.out {
            None => Box::new(io::stdout().lock()),
            Some(path) => {
                let made = File::create(path);
                Box::new(
                    made.map_err(|error| Failure::Failed(format!("{}: {error}", path.display())))?,
                )
            }
        };
        let mut out = csv::Writer::from_writer(BufWriter::new(out));
        out.write_record(&columns)?;
        let bar = progress::bar(Some(archive.days().len() as u64), "files");
        let mut text = String::new();
        for name in archive.days() {
            archive.day(*name)?.view_rows(view, &choice, |cells| {
                for cell in cells {
                    text.clear();
                    write_cell(*cell, &mut text);
                    out.write_field(&text)?;
                }
                out.write_record(None::<&[u8]>).map_err(Failure::from)
            })?;
            bar.inc(1);
        }
        bar.finish_and_clear();
        out.flush()
            .map_err(|error| Failure::from(csv::Error::from(error)))
    }

    /// Which rows are wanted.
    fn choice(&self, view: &View, columns: &[String]) -> Result<Choice, Failure> {
        let column = |known: &[&str], flag: &str| {
            let found = known
                .iter()
                .find(|name| columns.iter().any(|it| it == *name));
            found.map(|name| (*name).to_owned()).ok_or_else(|| {
                let message = format!("the view {} has nothing to choose by {flag}", view.name);
                Failure::Wrong(message)
            })
        };
        let (range, all) = (self.when.range(), Range::default());
        let bound = |at: Timestamp, open: Timestamp, flag: &str| -> Result<_, Failure> {
            if at == open {
                return Ok(None);
            }
            Ok(Some((column(&TIMES, flag)?, as_in_views(at))))
        };
        let equal = match &self.channel {
            None => None,
            Some(name) => Some((column(&NAMES, "--channel")?, name.clone())),
        };
        Ok(Choice {
            equal,
            from: bound(range.from, all.from, "--from")?,
            to: bound(range.to, all.to, "--to")?,
        })
    }
}

fn list() -> Result<(), Failure> {
    let mut out = io::stdout().lock();
    let widest = VIEWS.iter().map(|view| view.name.len()).max().unwrap_or(0);
    for View { name, shows, .. } in VIEWS {
        writeln!(out, "{name:widest$}  {shows}").map_err(csv::Error::from)?;
    }
    Ok(())
}

fn view(wanted: &str) -> Result<&'static View, Failure> {
    VIEWS
        .iter()
        .find(|view| view.name == wanted)
        .ok_or_else(|| {
            let names: Vec<&str> = VIEWS.iter().map(|view| view.name).collect();
            Failure::Wrong(format!(
                "no view \"{wanted}\"; there are {}",
                names.join(", ")
            ))
        })
}

/// An instant as the views write it: always nine digits, so that texts are in the order of time.
fn as_in_views(at: Timestamp) -> String {
    const NANOS: i64 = 1_000_000_000;
    let second = Timestamp(at.0.div_euclid(NANOS) * NANOS).to_string();
    let nanos = at.0.rem_euclid(NANOS);
    format!("{}.{nanos:09}Z", second.trim_end_matches('Z'))
}

/// A cell as text: a number so that it reads back to the same bits, nothing as nothing.
fn write_cell(cell: ValueRef<'_>, text: &mut String) {
    use std::fmt::Write;
    // Writing to a String cannot fail.
    let _ = match cell {
        ValueRef::Null => Ok(()),
        ValueRef::Integer(number) => write!(text, "{number}"),
        ValueRef::Real(number) => write!(text, "{number:?}"),
        ValueRef::Text(bytes) => write!(text, "{}", String::from_utf8_lossy(bytes)),
        ValueRef::Blob(bytes) => bytes.iter().try_for_each(|byte| write!(text, "{byte:02x}")),
    };
}

impl From<RecordError> for Failure {
    fn from(error: RecordError) -> Self {
        Self::Failed(error.to_string())
    }
}

impl From<csv::Error> for Failure {
    fn from(error: csv::Error) -> Self {
        match error.kind() {
            csv::ErrorKind::Io(cause) if cause.kind() == io::ErrorKind::BrokenPipe => Self::Gone,
            _ => Self::Failed(format!("the rows can't be written: {error}")),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_read_back_to_the_same_bits() {
        for number in [0.1 + 0.2, 7.0, 1e300, f64::MIN_POSITIVE, -2.5e-7] {
            let mut text = String::new();
            write_cell(ValueRef::Real(number), &mut text);
            let back: f64 = text.parse().unwrap();
            assert_eq!(back.to_bits(), number.to_bits(), "{text}");
            assert!(text.len() < 25, "{text}");
        }
    }

    #[test]
    fn instants_are_ordered_as_texts() {
        let mut last = String::new();
        for nanos in [-1_500_000_000, -1, 0, 1, 999_999_999, 1_000_000_000] {
            let text = as_in_views(Timestamp(nanos));
            assert!(last < text, "{last} before {text}");
            let back: jiff::Timestamp = text.parse().unwrap();
            assert_eq!(back.as_nanosecond(), i128::from(nanos), "{text}");
            last = text;
        }
    }
}
