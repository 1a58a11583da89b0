//! From the record to the engine's state, at the start: the newest saved state that is sound, and
//! the inputs after it taken once more.

use super::saved;
use crate::record::{
    ARITHMETIC_REVISION, Archive, Day, Record, RecordError, STATE_REVISION, Said, Told,
};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output};
use holdtrue_engine::setup::{ChannelId, Setup};
use holdtrue_engine::time::{self, Timestamp};
use serde::{Deserialize, Serialize};
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

/// Why the engine's state can't be restored.
#[derive(Debug, thiserror::Error)]
pub enum RestoreError {
    /// The record can't be used.
    #[error(transparent)]
    Record(#[from] RecordError),
    /// The engine says something else than it said when the record was written, though its
    /// arithmetic is the same. Going on would make the record untrue.
    #[error(
        "replay of the record differs at input {position}: recorded {recorded}, now {now}. Another \
         build of the same version wrote the record, or the record was changed or is damaged. \
         Start the build that wrote it, or move the record folder aside to start anew, and keep it"
    )]
    Differs {
        /// Position of the input.
        position: i64,
        /// What the record says that followed.
        recorded: String,
        /// What follows now.
        now: String,
    },
}

/// What the record leads to.
pub(super) struct Restored {
    /// The engine in the state in which it was.
    pub(super) engine: Engine,
    /// The configuration in force; without channels if the record is empty.
    pub(super) setup: Setup,
    /// Recorded rows that the engine asked for and has not been given.
    pub(super) wanted: Vec<Wanted>,
    /// Position of the last input before the saved state that it began from.
    pub(super) saved_input: i64,
    /// Mean size of a part of that state.
    pub(super) part_bytes: u64,
    /// Inputs after which another version of the program had said something else.
    differing: u64,
    /// The newest received time.
    newest: Option<Timestamp>,
}

/// Why a replay did not come to its end.
enum Ended {
    Stopped,
    Failed(RestoreError),
}

impl From<RecordError> for Ended {
    fn from(error: RecordError) -> Self {
        Self::Failed(error.into())
    }
}

/// Rows that the engine asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Wanted {
    /// Whose rows.
    pub channel: ChannelId,
    /// From (inclusive).
    pub from: Timestamp,
    /// To (exclusive).
    pub to: Timestamp,
}

/// Where the inputs begin that are taken once more.
struct Beginning {
    engine: Engine,
    wanted: Vec<Wanted>,
    /// The place of its file among the archive's.
    day: usize,
    /// The position of the last input before.
    after: i64,
    /// Mean size of a part of the saved state.
    part_bytes: u64,
    /// Nothing saved can be used: the engine begins anew with the readings that are kept, and says
    /// other things at first than it said then.
    anew: bool,
}

/// Restores the engine. Nothing is published. `None` when `stop` was set meanwhile.
///
/// # Errors
/// When the record can't be read, or when this same program once said something else.
pub(super) fn restore(
    record: &Record,
    now: Timestamp,
    stop: &AtomicBool,
) -> Result<Option<Restored>, RestoreError> {
    let archive = record.archive()?;
    if archive.days().is_empty() {
        return Ok(Some(Restored {
            engine: Engine::new(),
            setup: Setup::default(),
            wanted: Vec::new(),
            saved_input: 0,
            part_bytes: 0,
            differing: 0,
            newest: None,
        }));
    }
    let began = Instant::now();
    let beginning = match newest_state(&archive)? {
        Some(beginning) => beginning,
        None => anew(&archive)?,
    };
    let after = beginning.after;
    let Some(restored) = go_on(beginning, &archive, record.last_input(), stop)? else {
        return Ok(None);
    };
    check_clock(now, restored.newest);
    if restored.differing > 0 {
        tracing::warn!(
            inputs = restored.differing,
            "inputs judged otherwise than before"
        );
    }
    tracing::info!(
        inputs = record.last_input(),
        saved_after = after,
        taken_again = record.last_input() - after,
        channels = restored.setup.channels.len(),
        took = ?began.elapsed(),
        folder = %archive.folder().display(),
        "record read, state restored"
    );
    Ok(Some(restored))
}

/// The newest saved state that is sound; `None` if none is.
fn newest_state(archive: &Archive) -> Result<Option<Beginning>, RestoreError> {
    for (place, name) in archive.days().iter().enumerate().rev() {
        let day = archive.day(*name)?;
        if day.opening().state != STATE_REVISION {
            tracing::warn!(
                file = %name,
                "another version saved the state here; it is built anew from the readings"
            );
            return Ok(None);
        }
        for (batch, after) in day.saved_states()? {
            let assembled = match day.state_after(batch) {
                Ok(state) => {
                    saved::assemble(&state).map(|whole| (whole, saved::part_bytes(&state)))
                }
                Err(error) if error.is_damage() => Err(error.to_string()),
                Err(error) => return Err(error.into()),
            };
            match assembled {
                Ok(((mut engine, wanted), part_bytes)) => {
                    // Only what is in the file that is written to can be built upon.
                    if place + 1 == archive.days().len() {
                        engine.mark_saved();
                    }
                    return Ok(Some(Beginning {
                        engine,
                        wanted,
                        day: place,
                        after,
                        part_bytes,
                        anew: false,
                    }));
                }
                Err(why) => tracing::error!(
                    file = %name, batch, why,
                    "a saved state can't be used; going back to the one before. Look at the disk, \
                     and at the record with `holdtrue verify`"
                ),
            }
        }
    }
    Ok(None)
}

/// An engine that begins with the oldest readings that are kept.
fn anew(archive: &Archive) -> Result<Beginning, RestoreError> {
    let day = archive.day(archive.days()[0])?;
    let after = day.opening().first_input - 1;
    let setup = day.setup_after(after)?;
    let mut engine = Engine::new();
    engine.step(&Input::Setup(Box::new(setup)), &mut Vec::new());
    tracing::warn!(
        file = %day.name(),
        "no saved state can be used; the state is built anew from all readings that are kept"
    );
    Ok(Beginning {
        engine,
        wanted: Vec::new(),
        day: 0,
        after,
        part_bytes: 0,
        anew: true,
    })
}

/// Takes the inputs after the beginning.
fn go_on(
    beginning: Beginning,
    archive: &Archive,
    of: i64,
    stop: &AtomicBool,
) -> Result<Option<Restored>, RestoreError> {
    let mut restored = Restored {
        setup: beginning.engine.setup().clone(),
        engine: beginning.engine,
        wanted: beginning.wanted,
        saved_input: beginning.after,
        part_bytes: beginning.part_bytes,
        differing: 0,
        newest: None,
    };
    let mut outputs = Vec::new();
    let mut told = Instant::now();
    let mut after = beginning.after;
    for name in &archive.days()[beginning.day..] {
        let day = archive.day(*name)?;
        let same_arithmetic = day.opening().arithmetic == ARITHMETIC_REVISION;
        let ended = day.walk::<Ended>(archive, after, i64::MAX, |row| {
            if row.position % LOOK_EVERY == 0 {
                if stop.load(Ordering::Relaxed) {
                    return Err(Ended::Stopped);
                }
                if told.elapsed() >= PROGRESS_EVERY {
                    told = Instant::now();
                    tracing::info!("reading the record: input {} of {of}", row.position);
                }
            }
            after = row.position;
            outputs.clear();
            restored.engine.step(row.input, &mut outputs);
            if !beginning.anew {
                let differs = compare(&row, &outputs).map_err(Ended::Failed);
                note_difference(differs, same_arithmetic, &day, &mut restored.differing)?;
            }
            note_wanted(row.input, &outputs, &mut restored.wanted);
            restored.newest = restored.newest.max(received(row.input));
            Ok(())
        });
        match ended {
            Ok(()) => {}
            Err(Ended::Stopped) => return Ok(None),
            Err(Ended::Failed(error)) => return Err(error),
        }
    }
    restored.setup = restored.engine.setup().clone();
    Ok(Some(restored))
}

/// A difference is an error where the arithmetic is the same, else to be expected.
fn note_difference(
    compared: Result<(), Ended>,
    same_arithmetic: bool,
    day: &Day,
    differing: &mut u64,
) -> Result<(), Ended> {
    match compared {
        Err(Ended::Failed(RestoreError::Differs { position, .. })) if !same_arithmetic => {
            if *differing == 0 {
                tracing::warn!(
                    position,
                    written_by = day.opening().program,
                    "another version of holdtrue wrote this part of the record and drew other \
                     conclusions from it; going on with those of this version"
                );
            }
            *differing += 1;
            Ok(())
        }
        other => other,
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
pub fn note_wanted(input: &Input, outputs: &[Output], wanted: &mut Vec<Wanted>) {
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

fn compare(row: &Told<'_>, outputs: &[Output]) -> Result<(), RestoreError> {
    let text = |said: &Said| said.body.clone();
    let same = outputs.len() == row.outputs.len();
    let mut place = 0;
    for (output, recorded) in outputs.iter().zip(row.outputs) {
        if crate::record::output_text(output) != recorded.body {
            break;
        }
        place += 1;
    }
    if same && place == outputs.len() {
        return Ok(());
    }
    let show = |text: Option<String>| text.map_or("nothing".to_owned(), |text| shorten(&text));
    Err(RestoreError::Differs {
        position: row.position,
        recorded: show(row.outputs.get(place).map(text)),
        now: show(outputs.get(place).map(crate::record::output_text)),
    })
}

fn shorten(text: &str) -> String {
    match text.char_indices().nth(SHOWN_CHARACTERS) {
        Some((end, _)) => format!("{} …", &text[..end]),
        None => text.to_owned(),
    }
}
