//! From the record to the engine's state, at the start.

use super::Error;
use crate::record::{Record, RecordError};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output};
use holdtrue_engine::setup::{ChannelId, Setup};
use holdtrue_engine::time::{self, Timestamp};
use std::path::Path;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

/// Progress is logged this often.
const PROGRESS_EVERY: Duration = Duration::from_secs(5);
/// After so many inputs it is looked whether to stop or to log.
const LOOK_EVERY: i64 = 1000;
/// A clock that is earlier than the newest recorded received time by more than this is told of.
const CLOCK_BEHIND: time::Duration = time::Duration(120_000_000_000);
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
    /// The newest received time.
    newest: Option<Timestamp>,
}

/// Why a replay did not come to its end.
enum Ended {
    Stopped,
    Failed(Error),
}

impl From<RecordError> for Ended {
    fn from(error: RecordError) -> Self {
        Self::Failed(error.into())
    }
}

/// Rows that the engine asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Wanted {
    pub(super) channel: ChannelId,
    pub(super) from: Timestamp,
    pub(super) to: Timestamp,
}

/// Replays the record. Nothing is published. `None` when `stop` was set meanwhile.
///
/// # Errors
/// When the record can't be read, or when this same program once said something else.
fn restore(record: &Record, stop: &AtomicBool) -> Result<Option<Restored>, Error> {
    let mut restored = Restored {
        engine: Engine::new(),
        setup: None,
        wanted: Vec::new(),
        differing: 0,
        newest: None,
    };
    let mut outputs = Vec::new();
    let of = record.next_input() - 1;
    let mut told = Instant::now();
    let ended = record.replay::<Ended>(|row| {
        if row.position % LOOK_EVERY == 0 {
            if stop.load(Ordering::Relaxed) {
                return Err(Ended::Stopped);
            }
            if told.elapsed() >= PROGRESS_EVERY {
                told = Instant::now();
                tracing::info!("reading the record: input {} of {of}", row.position);
            }
        }
        outputs.clear();
        restored.engine.step(&row.input, &mut outputs);
        let differing = &mut restored.differing;
        compare(record, row.position, &row.outputs, &outputs, differing).map_err(Ended::Failed)?;
        note_wanted(&row.input, &outputs, &mut restored.wanted);
        restored.newest = restored.newest.max(received(&row.input));
        if let Input::Setup(setup) = row.input {
            restored.setup = Some(*setup);
        }
        Ok(())
    });
    match ended {
        Ok(()) => Ok(Some(restored)),
        Err(Ended::Stopped) => Ok(None),
        Err(Ended::Failed(error)) => Err(error),
    }
}

/// When an input was received; `None` for those that do not come from outside.
fn received(input: &Input) -> Option<Timestamp> {
    match input {
        Input::Reading(reading) => Some(reading.received),
        Input::Gate(gate) => Some(gate.received),
        Input::Refused(refused) => Some(refused.received),
        Input::Tick { now } => Some(*now),
        Input::Order(order) => Some(order.received),
        Input::Setup(_) | Input::Supplied(_) => None,
    }
}

/// Tells of a clock that went backwards while we were away.
fn check_clock(now: Timestamp, newest: Option<Timestamp>) {
    let behind = newest.map(|newest| newest.since(now));
    if let Some(behind) = behind.filter(|behind| *behind > CLOCK_BEHIND) {
        tracing::error!(
            seconds = behind.0 / 1_000_000_000,
            "the clock of this machine is earlier than the newest entry of the record: it is \
             wrong now, or was wrong then. Readings may be refused until it is set; is the time \
             service running?"
        );
    }
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

/// Opens the record and restores the engine from it. `None` when `stop` was set meanwhile.
pub(super) fn open(
    folder: &Path,
    now: Timestamp,
    stop: &AtomicBool,
) -> Result<Option<(Record, Restored)>, Error> {
    let record = Record::open(folder)?;
    let Some(restored) = restore(&record, stop)? else {
        return Ok(None);
    };
    check_clock(now, restored.newest);
    if restored.differing > 0 {
        tracing::warn!(
            inputs = restored.differing,
            "inputs judged otherwise than before"
        );
    }
    let inputs = record.next_input() - 1;
    tracing::info!(inputs, folder = %folder.display(), "record read, state restored");
    Ok(Some((record, restored)))
}
