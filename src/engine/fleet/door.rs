//! The door: what may come in. Everything behind it is finite, timely, not seen before and meant to
//! be used.

use super::{Fleet, longest};
use crate::event::{Gate, Output, PairFate, Reading, RefusedReason, Rejection, Source};
use crate::setup::{Clock, ReferenceKind};
use crate::time::{Duration, Timestamp};

/// How far sender's and receiver's clocks may differ: a live time further ahead than this is
/// refused.
pub(super) const CLOCKS_DIFFER: Duration = Duration::from_seconds(300);

/// 2200-01-01T00:00:00Z: no recording reaches this far, and time arithmetic stays clear of its end
/// (2262).
const FAR_FUTURE: Timestamp = Timestamp(7_258_118_400_000_000_000);

/// Largest magnitude of a value. No quantity in any unit comes near it, and its square summed over
/// a window stays finite.
const LARGEST: f64 = 1e100;

impl Fleet {
    /// Whether a reading may come in, and what now is once it has. `timely` is false for rows from
    /// the record; with `leap`, a recording's time may be as far ahead of now as it likes.
    pub(super) fn admit(
        &self,
        reading: &Reading,
        timely: bool,
        leap: bool,
    ) -> Result<Timestamp, RefusedReason> {
        if !self.is_known(reading.source) {
            return Err(RefusedReason::UnknownTopic);
        }
        if !reading.value.is_finite() || reading.value.abs() > LARGEST {
            return Err(RefusedReason::NotFinite);
        }
        let now = self.admit_time(reading.phenomenon, reading.received, leap)?;
        let (track, lateness) = match reading.source {
            Source::Indication(id) => {
                let index = id.0 as usize;
                (
                    &self.indications[index],
                    self.setup.channels[index].lateness,
                )
            }
            Source::Reference(id) => {
                let users = self.routes.reference_users(id);
                (
                    &self.references[id.0 as usize].values,
                    longest(users.iter().map(|&user| self.setup.channels[user].lateness)),
                )
            }
        };
        if timely {
            let ahead = self.ahead(track.newest(), now);
            track.check(reading, Duration(lateness.0.saturating_add(ahead.0)))?;
        } else if track.holds(reading) {
            return Err(RefusedReason::Duplicate);
        }
        if reading.excluded {
            return Err(RefusedReason::StatusExcluded);
        }
        self.admit_range(reading)?;
        Ok(now)
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
        let users = self.routes.reference_users(gate.reference);
        let lateness = longest(users.iter().map(|&user| self.setup.channels[user].lateness));
        let history = &self.references[index].gate;
        let ahead = self.ahead(history.newest(), now);
        history.check(gate, Duration(lateness.0.saturating_add(ahead.0)))?;
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
        let id = setup.reference.0 as usize;
        let ReferenceKind::Constant { value, gated } = self.setup.references[id].kind else {
            return None;
        };
        if gated && !self.references[id].gate.is_open(reading.phenomenon) {
            return None;
        }
        let (lowest, highest) = setup.screening.range?;
        Some(Output::Pair(PairFate {
            channel,
            phenomenon: reading.phenomenon,
            indication: reading.value,
            reference: value + 0.0,
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
