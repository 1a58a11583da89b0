//! From the record to the engine's state, at the start.

use super::Error;
use crate::record::Record;
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output};
use holdtrue_engine::setup::{ChannelId, Setup};
use holdtrue_engine::time::Timestamp;

/// Progress is logged after so many inputs.
const PROGRESS_EVERY: i64 = 500_000;
/// So much of a differing text is shown.
const SHOWN_CHARACTERS: usize = 300;

/// What the record leads to.
pub(super) struct Restored {
    /// The engine in the state in which it was.
    pub(super) engine: Engine,
    /// The configuration in force; `None` with an empty record.
    pub(super) setup: Option<Setup>,
    /// Recorded rows that the engine asked for and has not been given.
    pub(super) wanted: Vec<Wanted>,
    /// Inputs after which another version of the program had said something else.
    pub(super) differing: u64,
}

/// Rows that the engine asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Wanted {
    pub(super) channel: ChannelId,
    pub(super) from: Timestamp,
    pub(super) to: Timestamp,
}

/// Replays the record. Nothing is published.
///
/// # Errors
/// When the record can't be read, or when this same program once said something else.
pub(super) fn restore(record: &Record) -> Result<Restored, Error> {
    let mut restored = Restored {
        engine: Engine::new(),
        setup: None,
        wanted: Vec::new(),
        differing: 0,
    };
    let mut outputs = Vec::new();
    record.replay::<Error>(|row| {
        outputs.clear();
        restored.engine.step(&row.input, &mut outputs);
        compare(
            record,
            row.position,
            &row.outputs,
            &outputs,
            &mut restored.differing,
        )?;
        note_wanted(&row.input, &outputs, &mut restored.wanted);
        if let Input::Setup(setup) = row.input {
            restored.setup = Some(*setup);
        }
        if row.position % PROGRESS_EVERY == 0 {
            tracing::info!(inputs = row.position, "reading the record");
        }
        Ok(())
    })?;
    Ok(restored)
}

/// Keeps the list of what the engine asked for and was not given.
pub(super) fn note_wanted(input: &Input, outputs: &[Output], wanted: &mut Vec<Wanted>) {
    if let Input::Supplied(supplied) = input {
        let answered = Wanted {
            channel: supplied.channel,
            from: supplied.from,
            to: supplied.to,
        };
        if let Some(first) = wanted.iter().position(|it| *it == answered) {
            wanted.remove(first);
        }
    }
    // Positions mean other channels after a change of configuration.
    if let Input::Setup(_) = input {
        wanted.clear();
    }
    wanted.extend(outputs.iter().filter_map(|output| match output {
        Output::Wanted { channel, from, to } => Some(Wanted {
            channel: *channel,
            from: *from,
            to: *to,
        }),
        _ => None,
    }));
}

fn compare(
    record: &Record,
    position: i64,
    recorded: &[String],
    outputs: &[Output],
    differing: &mut u64,
) -> Result<(), Error> {
    let now: Vec<String> = outputs.iter().map(crate::record::output_text).collect();
    if now == recorded {
        return Ok(());
    }
    let program = record.program_at(position)?;
    if program.as_deref() != Some(env!("CARGO_PKG_VERSION")) {
        if *differing == 0 {
            tracing::warn!(
                position,
                written_by = program.as_deref().unwrap_or("unknown"),
                "another version of holdtrue wrote this part of the record and drew other \
                 conclusions from it; going on with those of this version"
            );
        }
        *differing += 1;
        return Ok(());
    }
    let place = now
        .iter()
        .zip(recorded)
        .position(|(now, recorded)| now != recorded);
    let place = place.unwrap_or(now.len().min(recorded.len()));
    let show = |texts: &[String]| {
        texts
            .get(place)
            .map_or("nothing".to_owned(), |text| shorten(text))
    };
    Err(Error::ReplayDiffers {
        position,
        recorded: show(recorded),
        now: show(&now),
    })
}

fn shorten(text: &str) -> String {
    match text.char_indices().nth(SHOWN_CHARACTERS) {
        Some((end, _)) => format!("{} …", &text[..end]),
        None => text.to_owned(),
    }
}

/// Opens the record and restores the engine from it.
pub(super) fn open(folder: &std::path::Path) -> Result<(Record, Restored), Error> {
    let record = Record::open(folder)?;
    let restored = restore(&record)?;
    if restored.differing > 0 {
        tracing::warn!(
            inputs = restored.differing,
            "inputs judged otherwise than before"
        );
    }
    let inputs = record.next_input() - 1;
    tracing::info!(inputs, folder = %folder.display(), "record read, state restored");
    Ok((record, restored))
}
