//! `holdtrue replay`: does the engine say again what the record says it said; or, with another
//! configuration, what would it have said?

mod side_by_side;

use super::Ending;
use super::when::When;
use crate::configuration;
use crate::record::Archive;
use crate::replay::{Audit, Difference, ReplayError, audit, trial};
use clap::Args;
use holdtrue_simulators::command::progress;
use indicatif::ProgressBar;
use serde_json::json;
use std::io::Write;
use std::path::{Path, PathBuf};

/// So much of a differing text is shown.
const SHOWN_CHARACTERS: usize = 400;

/// Arguments.
#[derive(Debug, Args)]
pub(super) struct Replay {
    /// The record's folder.
    #[arg(value_name = "RECORD")]
    record: PathBuf,
    #[command(flatten)]
    when: When,
    /// Try this configuration instead of the recorded one, and show side by side what comes of
    /// each channel. Nothing is published.
    #[arg(long, value_name = "FILE")]
    config: Option<PathBuf>,
    /// One JSON object on standard output instead of text.
    #[arg(long)]
    json: bool,
}

impl Replay {
    /// Replays.
    pub(super) fn run(&self) -> Ending {
        let archive = match Archive::open(&self.record) {
            Ok(archive) => archive,
            Err(error) => return failed(&error),
        };
        let bar = progress::bar(None, "inputs");
        let ending = match &self.config {
            None => self.audit(&archive, &bar),
            Some(path) => self.trial(&archive, path, &bar),
        };
        bar.finish_and_clear();
        ending
    }

    fn audit(&self, archive: &Archive, bar: &ProgressBar) -> Ending {
        let audit = match audit(archive, self.when.range(), &mut |count| bar.inc(count)) {
            Ok(audit) => audit,
            Err(error) => return refused(&error),
        };
        let text = if self.json {
            as_json(&audit)
        } else {
            as_text(&audit)
        };
        let ending = if audit.difference.is_none() {
            Ending::Done
        } else {
            Ending::No
        };
        show(&text, ending)
    }

    fn trial(&self, archive: &Archive, path: &Path, bar: &ProgressBar) -> Ending {
        let configuration = match configuration::load(path) {
            Ok(configuration) => configuration,
            Err(problems) => {
                eprintln!("{problems}");
                return Ending::Wrong;
            }
        };
        let setup = &configuration.setup;
        let mut tell = |count| bar.inc(count);
        let trial = match trial(archive, self.when.range(), setup, &mut tell) {
            Ok(trial) => trial,
            Err(error) => return refused(&error),
        };
        let text = if self.json {
            side_by_side::as_json(&trial)
        } else {
            side_by_side::as_text(&trial)
        };
        show(&text, Ending::Done)
    }
}

fn show(text: &str, ending: Ending) -> Ending {
    match std::io::stdout().write_all(text.as_bytes()) {
        Ok(()) => ending,
        Err(error) => failed(&error),
    }
}

fn failed(error: &dyn std::error::Error) -> Ending {
    eprintln!("error: {error}");
    Ending::Failed
}

/// What stands in the record is an answer; what can't be read is a failure.
fn refused(error: &ReplayError) -> Ending {
    eprintln!("error: {error}");
    match error {
        ReplayError::Arithmetic { .. } | ReplayError::State { .. } => Ending::No,
        ReplayError::Record(error) if error.is_damage() => Ending::No,
        ReplayError::Record(_) => Ending::Failed,
        ReplayError::Nothing { .. } => Ending::Wrong,
    }
}

fn as_text(audit: &Audit) -> String {
    let Audit {
        files,
        inputs,
        outputs,
        states,
        ..
    } = audit;
    match &audit.difference {
        None => format!(
            "{inputs} inputs in {files} files replayed\n{outputs} outputs, all identical; {states} \
             parts of saved states, all identical\n"
        ),
        Some(Difference::Output {
            file,
            input,
            recorded,
            now,
        }) => format!(
            "DIFFERENT: {file}, input {input}, after {outputs} identical outputs\n  \
             recorded: {}\n  now:      {}\n",
            shorten(recorded.as_deref()),
            shorten(now.as_deref())
        ),
        Some(Difference::State { file, input, part }) => format!(
            "DIFFERENT: {file}, the state of {part} saved after input {input} is not the one that \
             follows from the inputs; {outputs} outputs before it are identical\n"
        ),
    }
}

fn shorten(text: Option<&str>) -> String {
    let Some(text) = text else {
        return "nothing".to_owned();
    };
    match text.char_indices().nth(SHOWN_CHARACTERS) {
        Some((end, _)) => format!("{} …", &text[..end]),
        None => text.to_owned(),
    }
}

fn as_json(audit: &Audit) -> String {
    let difference = audit
        .difference
        .as_ref()
        .map(|difference| match difference {
            Difference::Output {
                file,
                input,
                recorded,
                now,
            } => json!({ "file": file, "input": input, "recorded": recorded, "now": now }),
            Difference::State { file, input, part } => {
                json!({ "file": file, "input": input, "state": part })
            }
        });
    let document = json!({
        "identical": audit.difference.is_none(),
        "files": audit.files,
        "inputs": audit.inputs,
        "outputs": audit.outputs,
        "states": audit.states,
        "difference": difference,
    });
    format!("{document:#}\n")
}
