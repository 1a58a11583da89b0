//! The door: what may come in. Everything behind it is finite, timely, not seen before and meant to
//! be used.

use super::known::known_values;
use super::{Fleet, longest};
use crate::channel::{Holding, holding, jumps};
use crate::event::{Flag, Gate, Output, PairFate, Reading, RefusedReason, Rejection, Source};
use crate::setup::{Clock, ReferenceId, ReferenceKind};
use crate::time::{Duration, Timestamp};

/// How far sender's and receiver's clocks may differ: a live time further ahead than this is
/// refused.
pub(super) const CLOCKS_DIFFER: Duration = Duration::from_seconds(300);

/// 2200-01-01T00:00:00Z: no recording reaches this far, and time arithmetic stays clear of its end
/// (2262).
const FAR_FUTURE: Timestamp = Timestamp(7_258_118_400_000_000_000);

/// Largest magnitude of a value. No quantity in any unit comes near it, and its square summed over
/// a window stays finite.
pub(super) const LARGEST: f64 = 1e100;

impl Fleet {
    /// Whether a reading may come in, and what now is once it has. With `leap`, a recording's time
    /// may be as far ahead of now as it likes.
    pub(super) fn admit(&self, reading: &Reading, leap: bool) -> Result<Timestamp, RefusedReason> {
        self.admit_value(reading)?;
        let now = self.admit_time(reading.phenomenon, reading.received, leap)?;
        let (track, lateness) = match reading.source {
            Source::Indication(id) => {
                let index = id.0 as usize;
                (
                    &*self.indications[index],
                    self.setup.channels[index].lateness,
                )
            }
            Source::Reference(id) => (
                &self.references[id.0 as usize].values,
                self.reference_lateness(id),
            ),
            Source::Influence(id) => {
                let users = self.routes.influence_users(id);
                let lateness = users.iter().map(|&user| self.setup.channels[user].lateness);
                (&*self.influences[id.0 as usize], longest(lateness))
            }
        };
        let ahead = self.ahead(track.newest(), now);
        track.check(reading, Duration(lateness.0.saturating_add(ahead.0)))?;
        if reading.excluded {
            return Err(RefusedReason::StatusExcluded);
        }
        self.admit_range(reading)?;
        self.admit_alive(reading)?;
        Ok(now)
    }

    /// Whether a row from the record may be used: as [`Fleet::admit`], but however late, and
    /// whether or not it is in memory. The record also holds what was refused when it came.
    pub(super) fn may_be_supplied(&self, reading: &Reading) -> bool {
        let ahead = reading.phenomenon.since(reading.received) > CLOCKS_DIFFER;
        let was_ahead = self.setup.clock == Clock::Live && ahead;
        let in_time = 0 <= reading.phenomenon.0 && reading.phenomenon <= FAR_FUTURE;
        in_time
            && !was_ahead
            && !reading.excluded
            && self.admit_value(reading).is_ok()
            && self.admit_range(reading).is_ok()
    }

    /// How late a value or gate event of a reference may come: as its most patient channel allows.
    pub(super) fn reference_lateness(&self, id: ReferenceId) -> Duration {
        let users = self.routes.reference_users(id);
        longest(users.iter().map(|&user| self.setup.channels[user].lateness))
    }

    /// The same for a gate event, behind the newest of its gate, at `now`.
    pub(super) fn gate_lateness(&self, id: ReferenceId, now: Timestamp) -> Duration {
        let ahead = self.ahead(self.references[id.0 as usize].gate.newest(), now);
        Duration(self.reference_lateness(id).0.saturating_add(ahead.0))
    }

    fn admit_value(&self, reading: &Reading) -> Result<(), RefusedReason> {
        if !self.is_known(reading.source) {
            return Err(RefusedReason::UnknownTopic);
        }
        if !reading.value.is_finite() || reading.value.abs() > LARGEST {
            return Err(RefusedReason::NotFinite);
        }
        Ok(())
    }

    /// Whether a gate event may come in, and what now is once it has; `leap` as for readings.
    pub(super) fn admit_gate(&self, gate: &Gate, leap: bool) -> Result<Timestamp, RefusedReason> {
        let index = gate.reference.0 as usize;
        let gated = self.setup.references.get(index).is_some_and(|reference| {
            matches!(reference.kind, ReferenceKind::Constant { gated: true, .. })
        });
        if !gated {
            return Err(RefusedReason::UnknownTopic);
        }
        let now = self.admit_time(gate.phenomenon, gate.received, leap)?;
        let lateness = self.gate_lateness(gate.reference, now);
        self.references[index].gate.check(gate, lateness)?;
        Ok(now)
    }

    /// How far a source's newest time lies ahead of now. Live, lateness counts from now at most:
    /// one stamp of a clock some minutes fast must not shut out those that are right.
    fn ahead(&self, newest: Option<Timestamp>, now: Timestamp) -> Duration {
        match self.setup.clock {
            Clock::Live => newest.map_or(Duration::ZERO, |newest| {
                newest.since(now).max(Duration::ZERO)
            }),
            Clock::Readings => Duration::ZERO,
        }
    }

    fn is_known(&self, source: Source) -> bool {
        match source {
            Source::Indication(id) => (id.0 as usize) < self.channels.len(),
            Source::Reference(id) => self
                .setup
                .references
                .get(id.0 as usize)
                .is_some_and(|reference| reference.kind == ReferenceKind::Measured),
            Source::Influence(id) => (id.0 as usize) < self.influences.len(),
        }
    }

    fn admit_time(
        &self,
        phenomenon: Timestamp,
        received: Timestamp,
        leap: bool,
    ) -> Result<Timestamp, RefusedReason> {
        if phenomenon.0 < 0 {
            return Err(RefusedReason::NegativeTime);
        }
        let moved = match self.setup.clock {
            Clock::Live => received,
            Clock::Readings => phenomenon,
        };
        let now = self.now.map_or(moved, |now| now.max(moved));
        let ahead = match (self.setup.clock, self.now) {
            (Clock::Live, _) => phenomenon.since(now) > CLOCKS_DIFFER,
            (Clock::Readings, Some(before)) => {
                !leap && phenomenon.since(before) > self.routes.reach
            }
            (Clock::Readings, None) => false,
        };
        if ahead || phenomenon > FAR_FUTURE {
            return Err(RefusedReason::Future);
        }
        Ok(now)
    }

    /// The fate of an indication outside its range, where the reference value is known without
    /// waiting: a constant that holds at its instant.
    pub(super) fn fate_out_of_range(&self, reading: &Reading) -> Option<Output> {
        let Source::Indication(channel) = reading.source else {
            return None;
        };
        let setup = &self.setup.channels[channel.0 as usize];
        let instant = reading.phenomenon.minus(setup.lag);
        let value = match self.setup.references[setup.reference.0 as usize].kind {
            ReferenceKind::Constant {
                value,
                gated: false,
            } => value,
            _ => match holding(
                &known_values(&self.setup, &self.references, setup.reference),
                instant,
            ) {
                Holding::One(value) => value,
                Holding::None | Holding::Unknown => return None,
            },
        };
        let (lowest, highest) = setup.screening.range?;
        Some(Output::Pair(PairFate {
            channel,
            phenomenon: reading.phenomenon,
            indication: reading.value,
            reference: value + 0.0,
            flag: Flag::Fail,
            rejected: Some(Rejection {
                reason: RefusedReason::OutOfRange,
                value: reading.value,
                threshold: if reading.value < lowest {
                    lowest
                } else {
                    highest
                },
            }),
        }))
    }

    /// Whether an indication can be true: no change faster than the measurand makes. (A repetition
    /// of what counts as stuck is heard, and kept out afterwards.)
    fn admit_alive(&self, reading: &Reading) -> Result<(), RefusedReason> {
        let Source::Indication(id) = reading.source else {
            return Ok(());
        };
        let index = id.0 as usize;
        let setup = &self.setup.channels[index];
        let limit = setup.screening.max_rate.filter(|_| setup.screening.enabled);
        let jumps = limit.and_then(|limit| {
            let track = &self.indications[index];
            jumps(track, reading.phenomenon, reading.value, limit)
        });
        match jumps {
            Some(_) => Err(RefusedReason::TooFast),
            None => Ok(()),
        }
    }

    fn admit_range(&self, reading: &Reading) -> Result<(), RefusedReason> {
        let Source::Indication(id) = reading.source else {
            return Ok(());
        };
        let screening = &self.setup.channels[id.0 as usize].screening;
        match screening.range {
            Some((lowest, highest))
                if screening.enabled && !(lowest..=highest).contains(&reading.value) =>
            {
                Err(RefusedReason::OutOfRange)
            }
            _ => Ok(()),
        }
    }
}
