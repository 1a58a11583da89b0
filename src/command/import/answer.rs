//! What an import tells: in words, or as one JSON object.

use super::{Done, Failure};
use crate::document::state::RefusedCount;
use crate::document::topic::subject_name;
use crate::import::into_record::Imported;
use crate::import::problem::{Problem, Problems};
use crate::import::survey::Extent;
use holdtrue_engine::setup::Setup;
use serde::Serialize;
use std::collections::BTreeMap;
use std::io::{self, Write};

/// The answer as a program reads it.
#[derive(Serialize)]
struct Answer<'a> {
    /// Whether the record was written.
    imported: bool,
    /// Why not, where nothing was to be read.
    #[serde(skip_serializing_if = "Option::is_none")]
    error: Option<&'a str>,
    files: Vec<FileAnswer>,
    columns: Vec<ColumnAnswer<'a>>,
    /// What no column is, though a channel needs it.
    lacking: Vec<String>,
    /// How many values or rows can't be read.
    unreadable: u64,
    /// The first of them.
    problems: &'a [Problem],
    /// What the engine was told; 0 if nothing was written.
    inputs: u64,
    /// How often it said what.
    outputs: BTreeMap<&'a str, u64>,
    /// What it refused since the record began.
    refused: Vec<RefusedCount>,
}

#[derive(Serialize)]
struct FileAnswer {
    file: String,
    #[serde(flatten)]
    extent: ExtentAnswer,
    /// How far a value comes behind a later one, at most.
    out_of_order_seconds: f64,
    /// On which line that is.
    out_of_order_line: Option<u64>,
}

#[derive(Serialize)]
struct ColumnAnswer<'a> {
    column: &'a str,
    is: String,
    #[serde(flatten)]
    extent: ExtentAnswer,
}

#[derive(Serialize)]
struct ExtentAnswer {
    values: u64,
    excluded: u64,
    first: Option<String>,
    last: Option<String>,
}

impl Done {
    /// Writes what was read and what became of it.
    pub(super) fn tell(&self, json: bool, out: &mut impl Write) -> io::Result<()> {
        if json {
            return write_json(&self.answer(), out);
        }
        let answer = self.answer();
        for file in &answer.files {
            let ExtentAnswer { values, .. } = file.extent;
            writeln!(
                out,
                "file    {}: {values} values{}",
                file.file,
                span(&file.extent)
            )?;
            if let Some(line) = file.out_of_order_line {
                let seconds = file.out_of_order_seconds;
                writeln!(
                    out,
                    "        out of order by up to {seconds} s (line {line}); put in order"
                )?;
            }
        }
        for column in &answer.columns {
            let ExtentAnswer {
                values, excluded, ..
            } = column.extent;
            writeln!(
                out,
                "column  {}, {}: {values} values{}{}",
                column.column,
                column.is,
                match excluded {
                    0 => String::new(),
                    some => format!(", {some} excluded by their status"),
                },
                span(&column.extent)
            )?;
        }
        for lacking in &answer.lacking {
            writeln!(out, "warning: nothing is mapped to {lacking}")?;
        }
        if answer.unreadable > 0 {
            let left_out = &self.survey.problems;
            writeln!(out, "left out, {} in all:\n{left_out}", answer.unreadable)?;
        }
        for refused in &answer.refused {
            writeln!(out, "refused {refused}")?;
        }
        if self.imported.is_some() {
            let said = answer.outputs.iter();
            let said: Vec<String> = said
                .map(|(kind, count)| format!("{kind} {count}"))
                .collect();
            writeln!(out, "record  {} inputs; {}", answer.inputs, said.join(", "))?;
        } else {
            writeln!(out, "nothing written")?;
        }
        Ok(())
    }

    fn answer(&self) -> Answer<'_> {
        let Self {
            configuration,
            mapping,
            survey,
            imported,
        } = self;
        let setup = &configuration.setup;
        let told = imported.as_ref();
        let files = survey.files.iter().map(|file| FileAnswer {
            file: file.source.path.display().to_string(),
            extent: extent(&file.extent),
            out_of_order_seconds: file.disorder.seconds(),
            out_of_order_line: (file.disorder_line > 0).then_some(file.disorder_line),
        });
        let columns = mapping.columns.iter().zip(&survey.columns).enumerate();
        let columns = columns.map(|(index, (column, found))| ColumnAnswer {
            column: &column.name,
            is: mapping.shown(index, &configuration.setup),
            extent: extent(found),
        });
        Answer {
            imported: imported.is_some(),
            error: None,
            files: files.collect(),
            columns: columns.collect(),
            lacking: mapping.lacking(&configuration.setup),
            unreadable: survey.problems.count,
            problems: &survey.problems.named,
            inputs: told.map_or(0, |told| told.inputs),
            outputs: told.map(outputs).unwrap_or_default(),
            refused: told.map(|told| refused(told, setup)).unwrap_or_default(),
        }
    }
}

/// How often the engine said what.
fn outputs(imported: &Imported) -> BTreeMap<&str, u64> {
    let counts = imported.outputs.iter();
    counts
        .map(|(kind, count)| (kind.as_str(), *count))
        .collect()
}

fn refused(imported: &Imported, setup: &Setup) -> Vec<RefusedCount> {
    let counts = imported.refused.iter();
    let named = counts.filter_map(|it| {
        let name = subject_name(it.subject, setup)?;
        Some(RefusedCount::new(it.subject, name, it.reason, it.count))
    });
    named.collect()
}

impl Failure {
    /// Writes why nothing was imported: words to standard error, an object to `out`.
    pub(super) fn tell(&self, json: bool, out: &mut impl Write) -> io::Result<()> {
        let nothing = Problems::default();
        let (error, problems) = match self {
            Self::Refused(text) | Self::Differs(text) | Self::Outside(text) => {
                (Some(text.as_str()), &nothing)
            }
            Self::Unreadable(problems) => (None, problems),
        };
        if json {
            let answer = Answer {
                imported: false,
                error,
                files: Vec::new(),
                columns: Vec::new(),
                lacking: Vec::new(),
                unreadable: problems.count,
                problems: &problems.named,
                inputs: 0,
                outputs: BTreeMap::new(),
                refused: Vec::new(),
            };
            return write_json(&answer, out);
        }
        match error {
            Some(text) => eprintln!("error: {text}"),
            None => eprintln!(
                "{problems}\n\nnothing imported: {} values or rows can't be read; say how they \
                 are written, mend them, or leave them out with --skip-bad",
                problems.count
            ),
        }
        Ok(())
    }
}

fn write_json(answer: &Answer<'_>, out: &mut impl Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, answer)?;
    writeln!(out)
}

fn extent(extent: &Extent) -> ExtentAnswer {
    ExtentAnswer {
        values: extent.count,
        excluded: extent.excluded,
        first: extent.first.map(|at| at.to_string()),
        last: extent.last.map(|at| at.to_string()),
    }
}

/// ", from … to …", where there is anything.
fn span(extent: &ExtentAnswer) -> String {
    match (&extent.first, &extent.last) {
        (Some(first), Some(last)) => format!(", {first} to {last}"),
        _ => String::new(),
    }
}
