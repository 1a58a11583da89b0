//! The trial: what another configuration would have made of the recorded readings.
//!
//! The engine begins anew with it, makes its own ticks (deadlines fire at their own instants,
//! before later input) and is supplied with what it asks for from the record, as far as that had
//! come by then.

use super::account::{Account, Accounts, AlarmAt};
use super::feed::Feed;
use super::{Range, ReplayError};
use crate::keeper::{SUPPLIED_MAX, Wanted, note_wanted, sources_of};
use crate::record::{Archive, Day, RecordError, Told};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Input, Output, Supplied};
use holdtrue_engine::setup::Setup;
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeMap;

/// Progress is told after so many inputs.
const TELL_EVERY: u64 = 1000;

/// Alarms with the name of what they stand on.
pub type Raised = Vec<(String, AlarmAt)>;

/// Two runs over the same readings.
pub struct Trial {
    /// Recorded inputs that were given to the engine.
    pub inputs: u64,
    /// Recorded readings that the other configuration has no channel or source for.
    pub unused: u64,
    /// By channel: what the record says came of it, and what comes of it with the other
    /// configuration.
    pub channels: BTreeMap<String, (Account, Account)>,
    /// Alarms of references and of the node: recorded, and with the other configuration.
    pub others: (Raised, Raised),
}

/// The run of the other configuration.
struct Run<'a> {
    archive: &'a Archive,
    setup: &'a Setup,
    engine: Engine,
    wanted: Vec<Wanted>,
    accounts: Accounts,
    outputs: Vec<Output>,
    inputs: u64,
    unused: u64,
}

/// Why a file's replay did not come to its end.
enum Ended {
    /// The range is over.
    Here,
    Failed(ReplayError),
}

impl From<RecordError> for Ended {
    fn from(error: RecordError) -> Self {
        Self::Failed(error.into())
    }
}

/// Tries another configuration over the part of a record in `range`. `progress` is told of every
/// thousand inputs.
///
/// # Errors
/// When the record can't be read.
pub fn trial(
    archive: &Archive,
    range: Range,
    setup: &Setup,
    progress: &mut dyn FnMut(u64),
) -> Result<Trial, ReplayError> {
    let mut run = Run {
        archive,
        setup,
        engine: Engine::new(),
        wanted: Vec::new(),
        accounts: Accounts::default(),
        outputs: Vec::new(),
        inputs: 0,
        unused: 0,
    };
    let mut recorded = Accounts::default();
    run.step(&Input::Setup(Box::new(setup.clone())));
    let mut told = 0;
    for name in range.files(archive)? {
        let day = archive.day(name)?;
        let after = day.opening().first_input - 1;
        let mut then = day.setup_after(after)?;
        let mut feed = Feed::new(&then, setup);
        let ended = day.walk::<Ended>(archive, after, i64::MAX, |row| {
            told += 1;
            if told % TELL_EVERY == 0 {
                progress(TELL_EVERY);
            }
            let instant = instant(row.input);
            if instant.is_some_and(|it| it > range.to) {
                return Err(Ended::Here);
            }
            if instant.is_some_and(|it| it < range.from) {
                return Ok(());
            }
            note_recorded(&row, &then, &mut recorded)?;
            if let Input::Setup(setup_then) = row.input {
                then = (**setup_then).clone();
                feed = Feed::new(&then, setup);
            }
            run.take(&row, &feed, &day)
        });
        match ended {
            Ok(()) => {}
            Err(Ended::Here) => break,
            Err(Ended::Failed(error)) => return Err(error),
        }
    }
    Ok(run.against(recorded))
}

/// When an input came; `None` for what does not come from outside.
fn instant(input: &Input) -> Option<Timestamp> {
    match input {
        Input::Reading(reading) => Some(reading.received),
        Input::Gate(gate) => Some(gate.received),
        Input::Refused(refused) => Some(refused.received),
        Input::Order(order) => Some(order.received),
        Input::Tick { now } => Some(*now),
        Input::Setup(_) | Input::Supplied(_) => None,
    }
}

/// Notes what the record says followed from an input.
fn note_recorded(row: &Told<'_>, setup: &Setup, accounts: &mut Accounts) -> Result<(), Ended> {
    for said in row.outputs {
        let output: Output = serde_json::from_str(&said.body).map_err(|error| {
            Ended::Failed(ReplayError::State {
                file: format!("input {}", row.position),
                why: format!("an output of it can't be read: {error}"),
            })
        })?;
        accounts.note(&output, setup);
    }
    Ok(())
}

impl Run<'_> {
    /// Takes a recorded input, after the deadlines that come before it.
    fn take(&mut self, row: &Told<'_>, feed: &Feed, day: &Day) -> Result<(), Ended> {
        if let Input::Reading(reading) = row.input
            && !feed.knows(reading.source)
        {
            self.unused += 1;
        }
        let Some(input) = feed.convert(row.input) else {
            return Ok(());
        };
        if let Some(arrived) = instant(&input) {
            self.pass_time(arrived);
        }
        self.inputs += 1;
        self.step(&input);
        self.answer_wanted(row.position, day)
    }

    /// Lets deadlines fire up to an instant, each at its own.
    fn pass_time(&mut self, until: Timestamp) {
        let mut last = None;
        while let Some(now) = self.engine.next_tick().filter(|tick| *tick < until) {
            // A deadline that a tick does not settle would come for ever.
            if last == Some(now) {
                break;
            }
            last = Some(now);
            self.step(&Input::Tick { now });
        }
    }

    fn step(&mut self, input: &Input) {
        let mut outputs = std::mem::take(&mut self.outputs);
        outputs.clear();
        self.engine.step(input, &mut outputs);
        note_wanted(input, &outputs, &mut self.wanted);
        for output in &outputs {
            self.accounts.note(output, self.setup);
        }
        self.outputs = outputs;
    }

    /// Gives the engine the rows that it asked for, as far as they had come.
    fn answer_wanted(&mut self, position: i64, day: &Day) -> Result<(), Ended> {
        for wanted in self.wanted.clone() {
            let Wanted { channel, from, to } = wanted;
            let sources = sources_of(channel, self.setup);
            let readings = self.archive.readings(
                day,
                self.setup,
                &sources,
                (from, to),
                position,
                SUPPLIED_MAX,
            )?;
            self.step(&Input::Supplied(Supplied {
                channel,
                from,
                to,
                readings,
            }));
        }
        Ok(())
    }

    fn against(self, recorded: Accounts) -> Trial {
        let mut channels: BTreeMap<String, (Account, Account)> = BTreeMap::new();
        for (name, account) in recorded.by_channel {
            channels.entry(name).or_default().0 = account;
        }
        for (name, account) in self.accounts.by_channel {
            channels.entry(name).or_default().1 = account;
        }
        Trial {
            inputs: self.inputs,
            unused: self.unused,
            channels,
            others: (recorded.others, self.accounts.others),
        }
    }
}
