//! `holdtrue verify`: is a record whole and as it was written?

use super::Ending;
use crate::record::{Archive, Digest, Verdict, verify};
use clap::Args;
use holdtrue_simulators::command::progress;
use serde_json::json;
use std::io::Write;
use std::path::PathBuf;

/// Arguments.
#[derive(Debug, Args)]
pub(super) struct Verify {
    /// The record's folder.
    #[arg(value_name = "RECORD")]
    record: PathBuf,
    /// A link that was kept elsewhere (`chain.digest` of a state document): it must be in the
    /// record. Only so does it show that the newest part was cut off.
    #[arg(long, value_name = "DIGEST")]
    head: Option<Digest>,
    /// One JSON object on standard output instead of text.
    #[arg(long)]
    json: bool,
}

impl Verify {
    /// Verifies.
    pub(super) fn run(&self) -> Ending {
        let found = Archive::open(&self.record).and_then(|archive| {
            let bar = progress::bar(Some(archive.days().len() as u64), "files");
            verify(&archive, self.head, || bar.inc(1))
        });
        let verdict = match found {
            Ok(verdict) => verdict,
            Err(error) => {
                eprintln!("error: {error}");
                return Ending::Failed;
            }
        };
        let text = if self.json {
            as_json(&verdict)
        } else {
            as_text(&verdict)
        };
        if let Err(error) = std::io::stdout().write_all(text.as_bytes()) {
            eprintln!("error: {error}");
            return Ending::Failed;
        }
        if verdict.faults.is_empty() {
            Ending::Done
        } else {
            Ending::No
        }
    }
}

fn as_text(verdict: &Verdict) -> String {
    let mut lines: Vec<String> = verdict
        .faults
        .iter()
        .map(|fault| format!("WRONG: {fault}"))
        .collect();
    let range = match (verdict.from, verdict.to) {
        (Some(from), Some(to)) if from != to => format!("{from} to {to}"),
        (Some(only), _) => only.to_string(),
        _ => String::new(),
    };
    lines.push(format!(
        "files: {} ({range}), links that hold: {}, inputs: {}",
        verdict.files, verdict.links, verdict.inputs
    ));
    if verdict.removed > 0 {
        lines.push(format!(
            "{} older files were removed for age or size, as the record says",
            verdict.removed
        ));
    }
    for name in &verdict.unsealed {
        lines.push(format!("{name} is not sealed yet: its links speak for it"));
    }
    lines.push(format!(
        "newest link: number {}, {}",
        verdict.head.batch, verdict.head.digest
    ));
    lines.push(match verdict.faults.len() {
        0 => "the record is whole".to_owned(),
        1 => "the record is not whole".to_owned(),
        faults => format!("the record is not whole: {faults} things are wrong"),
    });
    lines.join("\n") + "\n"
}

fn as_json(verdict: &Verdict) -> String {
    let faults: Vec<String> = verdict.faults.iter().map(ToString::to_string).collect();
    let unsealed: Vec<String> = verdict.unsealed.iter().map(ToString::to_string).collect();
    let document = json!({
        "whole": verdict.faults.is_empty(),
        "faults": faults,
        "files": verdict.files,
        "from": verdict.from.map(|name| name.to_string()),
        "to": verdict.to.map(|name| name.to_string()),
        "unsealed": unsealed,
        "removed": verdict.removed,
        "links": verdict.links,
        "inputs": verdict.inputs,
        "head": { "batch": verdict.head.batch, "digest": verdict.head.digest.to_string() },
    });
    format!("{document:#}\n")
}
