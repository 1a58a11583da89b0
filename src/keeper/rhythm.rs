//! When the engine's state is saved between the openings of days. A save costs disk, and spares the
//! next start from taking the inputs before it again.

use super::saved;
use crate::record::State;
use holdtrue_engine::engine::Engine;
use holdtrue_engine::time::{Duration, Timestamp};

/// A new file that could not be begun is tried again after this long.
const TURN_AGAIN_AFTER: Duration = Duration::from_seconds(10);

/// How much work a start may find, and what that may cost. The default is the daemon's;
/// simulations, whose days are short, save and turn more often.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Pace {
    /// In a recording a new file is begun once the one before has so many inputs.
    pub inputs_of_a_file: i64,
    /// A save is due after so many inputs in any case.
    pub inputs_max: i64,
    /// Earlier a save is due only after this long …
    pub save_every: Duration,
    /// … and when the inputs since the last one take as much disk as it will, at so many bytes
    /// each: so saving at most doubles what is written.
    pub bytes_of_an_input: u64,
}

impl Default for Pace {
    fn default() -> Self {
        Self {
            inputs_of_a_file: 20_000,
            // A start takes about as many in a second.
            inputs_max: 1_000_000,
            save_every: Duration::from_seconds(600),
            bytes_of_an_input: 50,
        }
    }
}

/// What was saved when.
pub(super) struct Rhythm {
    pace: Pace,
    saved: Timestamp,
    /// Position of the last input before the newest save.
    saved_input: i64,
    /// Looked at whether a save is worth it no earlier than this.
    look_again: Timestamp,
    /// Mean size of a part when all were saved last.
    part_bytes: u64,
    /// The batch at hand holds a save.
    in_batch: bool,
    turn_not_before: Timestamp,
}

impl Rhythm {
    /// At a start. `saved_input`: position of the last input before the state that it began from;
    /// `part_bytes`: mean size of a part of it.
    ///
    /// It is looked at once whether a save is worth it: a daemon that is killed again and again
    /// must not take longer from start to start.
    pub(super) fn new(now: Timestamp, saved_input: i64, part_bytes: u64) -> Self {
        let pace = Pace::default();
        Self {
            pace,
            saved: now,
            saved_input,
            look_again: now,
            part_bytes,
            in_batch: false,
            turn_not_before: Timestamp(i64::MIN),
        }
    }

    /// Goes on at another pace.
    pub(super) fn set_pace(&mut self, now: Timestamp, pace: Pace) {
        self.pace = pace;
        self.look_again = now.plus(pace.save_every);
    }

    /// Inputs after which a recording begins a new file.
    pub(super) fn inputs_of_a_file(&self) -> i64 {
        self.pace.inputs_of_a_file
    }

    /// Whether the state is to be saved with the batch at hand, which ends with input `last`.
    pub(super) fn is_save_due(&mut self, now: Timestamp, last: i64, engine: &Engine) -> bool {
        let inputs = last - self.saved_input;
        if self.in_batch || inputs == 0 {
            return false;
        }
        // Also when the clock went back.
        if inputs < self.pace.inputs_max && now < self.look_again && now >= self.saved {
            return false;
        }
        self.look_again = now.plus(self.pace.save_every);
        let bytes = (engine.changed().len() as u64).saturating_mul(self.part_bytes);
        let is_worth_it = inputs
            .unsigned_abs()
            .saturating_mul(self.pace.bytes_of_an_input)
            >= bytes;
        inputs >= self.pace.inputs_max || is_worth_it
    }

    /// A save goes into the batch at hand.
    pub(super) fn saving(&mut self, state: &State) {
        self.in_batch = true;
        self.note_size(state);
    }

    /// A save opens a file.
    pub(super) fn opening(&mut self, state: &State) {
        self.note_size(state);
    }

    fn note_size(&mut self, state: &State) {
        self.part_bytes = saved::part_bytes(state);
    }

    /// The batch is on the disk; whether a save was in it.
    pub(super) fn committed(&mut self, now: Timestamp, last: i64) -> bool {
        let saved = std::mem::take(&mut self.in_batch);
        if saved {
            self.saved = now;
            self.saved_input = last;
        }
        saved
    }

    /// A file was opened with the whole state.
    pub(super) fn turned(&mut self, now: Timestamp, last: i64) {
        self.saved = now;
        self.saved_input = last;
        self.look_again = now.plus(self.pace.save_every);
    }

    pub(super) fn turn_failed(&mut self, now: Timestamp) {
        self.turn_not_before = now.plus(TURN_AGAIN_AFTER);
    }

    pub(super) fn may_try_turn(&self, now: Timestamp) -> bool {
        now >= self.turn_not_before
    }
}
