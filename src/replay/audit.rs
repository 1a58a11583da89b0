//! The audit: the engine is given every recorded input from the state that a file opens with, and
//! every output and every saved state is compared bit for bit.

use super::{Range, ReplayError};
use crate::keeper::{Wanted, assemble, note_wanted, part_of};
use crate::record::{ARITHMETIC_REVISION, Archive, Day, RecordError, Said, State, Told};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::Output;
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeMap;

/// What an audit found.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Audit {
    /// Files replayed.
    pub files: usize,
    /// Inputs given to the engine.
    pub inputs: u64,
    /// Outputs compared.
    pub outputs: u64,
    /// Saved states compared, part by part.
    pub states: u64,
    /// The first difference; the audit ends there.
    pub difference: Option<Difference>,
}

/// Where a replay says something else.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Difference {
    /// An output.
    Output {
        /// The file.
        file: String,
        /// Position of the input.
        input: i64,
        /// What the record says; `None`: nothing.
        recorded: Option<String>,
        /// What the engine says now; `None`: nothing.
        now: Option<String>,
    },
    /// A part of a saved state.
    State {
        /// The file.
        file: String,
        /// Position of the last input before it.
        input: i64,
        /// The part.
        part: String,
    },
}

/// An engine on its way through a record.
struct Replica {
    engine: Engine,
    wanted: Vec<Wanted>,
}

/// The comparison at work.
struct Comparing<'a> {
    range: Range,
    audit: Audit,
    file: String,
    outputs: Vec<Output>,
    /// Kept to save allocations.
    text: Vec<u8>,
    progress: &'a mut dyn FnMut(u64),
}

/// Why a file's replay did not come to its end.
enum Ended {
    /// A difference, or the end of the range.
    Here,
    Failed(RecordError),
}

impl From<RecordError> for Ended {
    fn from(error: RecordError) -> Self {
        Self::Failed(error)
    }
}

/// Progress is told after so many inputs.
const TELL_EVERY: u64 = 1000;

/// Audits the part of a record in `range`. `progress` is told of every thousand inputs.
///
/// # Errors
/// When the record can't be read, or was written by another arithmetic.
pub fn audit(
    archive: &Archive,
    range: Range,
    progress: &mut dyn FnMut(u64),
) -> Result<Audit, ReplayError> {
    let mut comparing = Comparing {
        range,
        audit: Audit::default(),
        file: String::new(),
        outputs: Vec::new(),
        text: Vec::new(),
        progress,
    };
    let mut before: Option<Replica> = None;
    for name in range.files(archive)? {
        let day = archive.day(name)?;
        check_arithmetic(&day)?;
        comparing.file = name.to_string();
        let Some(replica) = comparing.file(archive, &day, before.take())? else {
            break;
        };
        before = Some(replica);
    }
    Ok(comparing.audit)
}

fn check_arithmetic(day: &Day) -> Result<(), ReplayError> {
    let opening = day.opening();
    if opening.arithmetic == ARITHMETIC_REVISION {
        return Ok(());
    }
    Err(ReplayError::Arithmetic {
        file: day.name().to_string(),
        program: opening.program.clone(),
        found: opening.arithmetic,
        known: ARITHMETIC_REVISION,
    })
}

impl Comparing<'_> {
    /// Replays a file; `None` when a difference was found or the range is over.
    fn file(
        &mut self,
        archive: &Archive,
        day: &Day,
        before: Option<Replica>,
    ) -> Result<Option<Replica>, ReplayError> {
        self.audit.files += 1;
        let mut saved = day.saved_states()?;
        let (first, opened) = saved.pop().unwrap_or((0, 0));
        let opening = day.state_after(first)?;
        if let Some(before) = before
            && !self.same_state(&before, &opening, opened)
        {
            return Ok(None);
        }
        let (engine, wanted) = assemble(&opening).map_err(|why| ReplayError::State {
            file: self.file.clone(),
            why,
        })?;
        let mut replica = Replica { engine, wanted };
        // Those in between, by the input after which they were saved.
        let saved: BTreeMap<i64, i64> = saved.into_iter().map(|(b, input)| (input, b)).collect();
        let ended = day.walk::<Ended>(archive, opened, i64::MAX, |row| {
            self.step(&mut replica, &row)?;
            if let Some(batch) = saved.get(&row.position) {
                let state = day.saved_with(*batch)?;
                if !self.same_state(&replica, &state, row.position) {
                    return Err(Ended::Here);
                }
            }
            Ok(())
        });
        match ended {
            Ok(()) => Ok(Some(replica)),
            Err(Ended::Here) => Ok(None),
            Err(Ended::Failed(error)) => Err(error.into()),
        }
    }

    /// Gives the engine one input and compares what it says.
    fn step(&mut self, replica: &mut Replica, row: &Told<'_>) -> Result<(), Ended> {
        self.outputs.clear();
        replica.engine.step(row.input, &mut self.outputs);
        note_wanted(row.input, &self.outputs, &mut replica.wanted);
        let now = replica.engine.now().unwrap_or(Timestamp(i64::MIN));
        if now > self.range.to {
            return Err(Ended::Here);
        }
        if now < self.range.from {
            return Ok(());
        }
        self.audit.inputs += 1;
        if self.audit.inputs.is_multiple_of(TELL_EVERY) {
            (self.progress)(TELL_EVERY);
        }
        let most = self.outputs.len().max(row.outputs.len());
        for place in 0..most {
            let recorded = row.outputs.get(place);
            if !self.same_output(place, recorded) {
                let text = crate::record::output_text;
                self.audit.difference = Some(Difference::Output {
                    file: self.file.clone(),
                    input: row.position,
                    recorded: recorded.map(|said| said.body.clone()),
                    now: self.outputs.get(place).map(text),
                });
                return Err(Ended::Here);
            }
            self.audit.outputs += 1;
        }
        Ok(())
    }

    fn same_output(&mut self, place: usize, recorded: Option<&Said>) -> bool {
        let (Some(output), Some(recorded)) = (self.outputs.get(place), recorded) else {
            return false;
        };
        self.text.clear();
        serde_json::to_writer(&mut self.text, output).is_ok()
            && self.text == recorded.body.as_bytes()
    }

    /// Whether the parts of a saved state are those of the engine.
    fn same_state(&mut self, replica: &Replica, saved: &State, input: i64) -> bool {
        for (part, bytes) in saved {
            let now = part_of(&replica.engine, &replica.wanted, part);
            if now.as_ref() != Some(bytes) {
                self.audit.difference = Some(Difference::State {
                    file: self.file.clone(),
                    input,
                    part: part.clone(),
                });
                return false;
            }
            self.audit.states += 1;
        }
        true
    }
}
