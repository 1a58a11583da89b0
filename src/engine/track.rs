//! The recent readings of one source in order of their phenomenon time: remembers what came before
//! (duplicates), says what comes too late, and answers what was measured around an instant.
//!
//! Bounded: at most [`CAPACITY`] readings. When it is full the oldest is forgotten, and whatever is
//! not newer than a forgotten reading counts as late from then on, so that a repeated message can
//! never slip in again. Whoever needs more than is kept asks the record and looks at a
//! [`Track::joined`] one.

use crate::event::{Reading, RefusedReason};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};
use std::cmp::Ordering;
use std::collections::VecDeque;

/// Most readings that one track keeps.
pub(crate) const CAPACITY: usize = 4096;

/// How many of the newest readings are looked at before all are searched.
const BESIDE: usize = 4;

/// One remembered reading.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Sample {
    /// Phenomenon time.
    pub(crate) time: Timestamp,
    /// From when on waiting for stragglers counts: live, when it was taken; in recordings, its
    /// phenomenon time.
    pub(crate) arrived: Timestamp,
    /// The value.
    pub(crate) value: f64,
    /// The sender's running number.
    pub(crate) sequence: Option<i64>,
}

impl Sample {
    /// Order by time, then by what tells two readings of one instant apart; the order of arrival
    /// plays no part.
    fn order(&self, other: &Self) -> Ordering {
        (self.time, self.sequence)
            .cmp(&(other.time, other.sequence))
            .then_with(|| self.value.total_cmp(&other.value))
    }

    /// Whether both are the same message: same time, and same running number, or same value where
    /// there is none.
    fn repeats(&self, time: Timestamp, sequence: Option<i64>, value: f64) -> bool {
        self.time == time
            && match (self.sequence, sequence) {
                (Some(a), Some(b)) => a == b,
                (None, None) => same_value(self.value, value),
                _ => false,
            }
    }
}

/// The recent readings of one source.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Track {
    samples: VecDeque<Sample>,
    /// Readings that nobody is to see, because they are quarantined: remembered so that a repeated
    /// message is known, and until they are released.
    aside: VecDeque<Sample>,
    /// Phenomenon time of the newest reading ever taken.
    newest: Option<Timestamp>,
    /// Phenomenon time of the newest forgotten reading.
    forgotten: Option<Timestamp>,
}

impl Track {
    /// Phenomenon time of the newest reading ever taken.
    pub(crate) fn newest(&self) -> Option<Timestamp> {
        self.newest
    }

    /// Phenomenon time of the newest reading that was forgotten: nothing is known about this
    /// instant and before.
    pub(crate) fn forgotten(&self) -> Option<Timestamp> {
        self.forgotten
    }

    /// Whether the reading may be taken: not later than `lateness` behind this source's own newest
    /// reading, and not seen before. (Behind its own newest, not behind now: a backlog after an
    /// outage is old but in order.)
    pub(crate) fn check(&self, reading: &Reading, lateness: Duration) -> Result<(), RefusedReason> {
        let too_old = self
            .newest
            .is_some_and(|newest| reading.phenomenon < newest.minus(lateness));
        let beyond_memory = self
            .forgotten
            .is_some_and(|edge| reading.phenomenon <= edge);
        if self.holds(reading) {
            return Err(RefusedReason::Duplicate);
        }
        if too_old || beyond_memory {
            return Err(RefusedReason::Late);
        }
        Ok(())
    }

    /// Whether the same message is remembered.
    pub(crate) fn holds(&self, reading: &Reading) -> bool {
        range(
            &self.aside,
            reading.phenomenon,
            reading.phenomenon.plus(Duration(1)),
        )
        .chain(self.at(reading.phenomenon))
        .any(|sample| sample.repeats(reading.phenomenon, reading.sequence, reading.value))
    }

    /// Takes a reading.
    pub(crate) fn insert(&mut self, sample: Sample) {
        put(&mut self.samples, sample);
        self.note(sample.time);
    }

    /// Takes the newest reading, however many there are.
    pub(crate) fn append(&mut self, sample: Sample) {
        self.samples.push_back(sample);
        self.newest = self.newest.max(Some(sample.time));
    }

    /// Takes a reading that nobody is to see.
    pub(crate) fn insert_aside(&mut self, sample: Sample) {
        put(&mut self.aside, sample);
        self.note(sample.time);
    }

    /// Sets aside the readings that are quarantined now, and puts those back that are no longer.
    pub(crate) fn sort_out(&mut self, is_quarantined: impl Fn(Timestamp) -> bool) {
        let all = std::mem::take(&mut self.samples);
        let (aside, mut seen): (VecDeque<Sample>, VecDeque<Sample>) = all
            .into_iter()
            .partition(|sample| is_quarantined(sample.time));
        let (mut still, back): (VecDeque<Sample>, VecDeque<Sample>) =
            std::mem::take(&mut self.aside)
                .into_iter()
                .partition(|sample| is_quarantined(sample.time));
        for sample in aside {
            put(&mut still, sample);
        }
        for sample in back {
            put(&mut seen, sample);
        }
        (self.samples, self.aside) = (seen, still);
    }

    fn note(&mut self, time: Timestamp) {
        self.newest = self.newest.max(Some(time));
        if self.samples.len() + self.aside.len() > CAPACITY {
            self.forget_oldest();
        }
    }

    /// Forgets what is older than `time`.
    pub(crate) fn forget_before(&mut self, time: Timestamp) {
        while self.oldest().is_some_and(|oldest| oldest < time) {
            self.forget_oldest();
        }
    }

    /// Forgets what is newer than `time`, as if it had never come: its clock was wrong.
    pub(crate) fn forget_after(&mut self, time: Timestamp) {
        if self.newest.is_none_or(|newest| newest <= time) {
            return;
        }
        let keep = self.samples.partition_point(|held| held.time <= time);
        self.samples.truncate(keep);
        let keep = self.aside.partition_point(|held| held.time <= time);
        self.aside.truncate(keep);
        self.forgotten = self.forgotten.map(|edge| edge.min(time));
        let newest = [self.samples.back(), self.aside.back()];
        let newest = newest.into_iter().flatten().map(|held| held.time).max();
        self.newest = newest.or(self.forgotten);
    }

    /// A track of what is known of `[from, to)` once rows from the record have been added to those
    /// in memory, each message once. As large as what was supplied.
    pub(crate) fn joined(&self, rows: &[Sample], from: Timestamp, to: Timestamp) -> Self {
        let mut samples: Vec<Sample> = self.range(from, to).copied().collect();
        samples.extend(rows.iter().filter(|row| from <= row.time && row.time < to));
        samples.sort_by(Sample::order);
        samples.dedup_by(|next, kept| next.repeats(kept.time, kept.sequence, kept.value));
        Self {
            newest: samples.last().map(|newest| newest.time),
            forgotten: None,
            aside: VecDeque::new(),
            samples: samples.into(),
        }
    }

    /// All readings of exactly this instant.
    pub(crate) fn at(&self, time: Timestamp) -> impl Iterator<Item = &Sample> {
        self.range(time, time.plus(Duration(1)))
    }

    /// All readings with `from <= time < to`, in order.
    pub(crate) fn range(&self, from: Timestamp, to: Timestamp) -> impl Iterator<Item = &Sample> {
        range(&self.samples, from, to)
    }

    /// All readings, in order.
    pub(crate) fn all(&self) -> impl Iterator<Item = &Sample> {
        self.samples.iter()
    }

    /// The last reading at or before `time`.
    pub(crate) fn last_until(&self, time: Timestamp) -> Option<&Sample> {
        let end = place(&self.samples, |held| held.time <= time);
        end.checked_sub(1).map(|index| &self.samples[index])
    }

    /// The first reading after `time`.
    pub(crate) fn first_after(&self, time: Timestamp) -> Option<&Sample> {
        let start = place(&self.samples, |held| held.time <= time);
        self.samples.get(start)
    }

    /// Phenomenon time of the oldest reading remembered.
    fn oldest(&self) -> Option<Timestamp> {
        let oldest = [self.samples.front(), self.aside.front()];
        oldest.into_iter().flatten().map(|held| held.time).min()
    }

    fn forget_oldest(&mut self) {
        let (seen, aside) = (self.samples.front(), self.aside.front());
        let hidden_first = match (seen, aside) {
            (Some(seen), Some(aside)) => aside.time < seen.time,
            (seen, _) => seen.is_none(),
        };
        let oldest = if hidden_first {
            self.aside.pop_front()
        } else {
            self.samples.pop_front()
        };
        if let Some(sample) = oldest {
            self.forgotten = self.forgotten.max(Some(sample.time));
        }
    }
}

/// Puts a reading where it belongs.
fn put(samples: &mut VecDeque<Sample>, sample: Sample) {
    let place = place(samples, |held| held.order(&sample) != Ordering::Greater);
    samples.insert(place, sample);
}

/// All readings with `from <= time < to`, in order.
fn range(
    samples: &VecDeque<Sample>,
    from: Timestamp,
    to: Timestamp,
) -> impl Iterator<Item = &Sample> {
    let start = place(samples, |held| held.time < from);
    let end = place(samples, |held| held.time < to);
    samples.range(start..end.max(start))
}

/// How many of the first readings satisfy `goes_before`. Nearly everything asked for stands at or
/// beside the newest; looking there first saves a search through memory long out of cache.
fn place(samples: &VecDeque<Sample>, goes_before: impl Fn(&Sample) -> bool) -> usize {
    let newest = samples.iter().rev().take(BESIDE);
    let after = newest.take_while(|held| !goes_before(held)).count();
    if after < BESIDE {
        samples.len() - after
    } else {
        samples.partition_point(goes_before)
    }
}

/// Whether both are the same number: bit by bit, but zero has one sign.
fn same_value(a: f64, b: f64) -> bool {
    (a + 0.0).to_bits() == (b + 0.0).to_bits()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::event::Source;
    use crate::setup::ChannelId;

    fn reading(time: i64, value: f64, sequence: Option<i64>) -> Reading {
        Reading {
            source: Source::Indication(ChannelId(0)),
            received: Timestamp(time),
            phenomenon: Timestamp(time),
            value,
            sequence,
            excluded: false,
        }
    }

    fn take(track: &mut Track, time: i64, value: f64, sequence: Option<i64>) {
        track.insert(Sample {
            time: Timestamp(time),
            arrived: Timestamp(time),
            value,
            sequence,
        });
    }

    /// However many there are, and whether it stands at the newest end or not.
    #[test]
    fn what_is_asked_for_is_found_wherever_it_stands() {
        for count in 0..12 {
            let mut track = Track::default();
            // Every other one comes late; each instant has two readings.
            for place in (0..count).step_by(2).chain((1..count).step_by(2)) {
                for value in [1.0, 0.0] {
                    track.insert(Sample {
                        time: Timestamp(10 * place),
                        arrived: Timestamp(0),
                        value,
                        sequence: None,
                    });
                }
            }
            let held: Vec<(i64, f64)> = track.samples.iter().map(|s| (s.time.0, s.value)).collect();
            let in_order = (0..count).flat_map(|place| [(10 * place, 0.0), (10 * place, 1.0)]);
            assert_eq!(held, in_order.collect::<Vec<_>>());
            for time in -1..=10 * count {
                let until = held.iter().rfind(|(at, _)| *at <= time);
                let after = held.iter().find(|(at, _)| *at > time);
                let told = |s: &Sample| (s.time.0, s.value);
                let asked = Timestamp(time);
                assert_eq!(track.last_until(asked).map(told), until.copied());
                assert_eq!(track.first_after(asked).map(told), after.copied());
                let here = held.iter().filter(|(at, _)| *at == time).count();
                assert_eq!(track.at(asked).count(), here);
            }
        }
    }

    #[test]
    fn a_duplicate_is_the_same_number_or_else_the_same_value() {
        let mut track = Track::default();
        take(&mut track, 10, 1.0, None);
        take(&mut track, 20, 1.0, Some(7));
        let cases = [
            (reading(10, 1.0, None), Err(RefusedReason::Duplicate)),
            (reading(10, 2.0, None), Ok(())),
            (reading(20, 9.0, Some(7)), Err(RefusedReason::Duplicate)),
            (reading(20, 1.0, Some(8)), Ok(())),
            (reading(21, 1.0, Some(7)), Ok(())),
        ];
        for (reading, expected) in cases {
            assert_eq!(
                track.check(&reading, Duration(100)),
                expected,
                "{reading:?}"
            );
        }
    }

    #[test]
    fn late_is_measured_behind_the_newest_of_the_same_source() {
        let mut track = Track::default();
        take(&mut track, 100, 1.0, None);
        assert_eq!(track.check(&reading(90, 1.0, None), Duration(10)), Ok(()));
        assert_eq!(
            track.check(&reading(89, 1.0, None), Duration(10)),
            Err(RefusedReason::Late)
        );
    }

    #[test]
    fn a_full_track_forgets_the_oldest_and_calls_it_late() {
        let mut track = Track::default();
        for time in (0..).take(CAPACITY + 1) {
            take(&mut track, time, 0.0, None);
        }
        assert_eq!(track.samples.len(), CAPACITY);
        let far = Duration(i64::MAX);
        assert_eq!(
            track.check(&reading(0, 5.0, None), far),
            Err(RefusedReason::Late)
        );
        assert_eq!(track.check(&reading(1, 5.0, None), far), Ok(()));
    }

    #[test]
    fn the_order_of_arrival_leaves_no_trace() {
        let mut one = Track::default();
        let mut two = Track::default();
        let rows = [(3, 1.0), (1, 2.0), (2, 3.0), (2, 1.0)];
        for (time, value) in rows {
            take(&mut one, time, value, None);
        }
        for (time, value) in rows.iter().rev() {
            take(&mut two, *time, *value, None);
        }
        assert_eq!(one, two);
    }

    #[test]
    fn rows_from_the_record_join_those_in_memory_once() {
        let mut track = Track::default();
        for time in [10, 20, 30] {
            take(&mut track, time, 1.0, None);
        }
        let row = |time, value| Sample {
            time: Timestamp(time),
            arrived: Timestamp(0),
            value,
            sequence: None,
        };
        let rows = [
            row(20, 1.0),
            row(5, 2.0),
            row(20, 3.0),
            row(4, 9.0),
            row(30, 9.0),
        ];
        let joined = track.joined(&rows, Timestamp(5), Timestamp(30));
        let seen: Vec<(i64, f64)> = joined.samples.iter().map(|s| (s.time.0, s.value)).collect();
        assert_eq!(seen, [(5, 2.0), (10, 1.0), (20, 1.0), (20, 3.0)]);
        assert_eq!(joined.newest(), Some(Timestamp(20)));
    }

    #[test]
    fn what_is_set_aside_is_unseen_but_known_and_comes_back() {
        let mut track = Track::default();
        for time in [10, 20, 30] {
            take(&mut track, time, 1.0, None);
        }
        let before = track.clone();
        track.sort_out(|time| time.0 >= 20);
        assert_eq!(track.all().count(), 1);
        assert!(track.first_after(Timestamp(10)).is_none());
        assert_eq!(track.newest(), Some(Timestamp(30)));
        assert_eq!(
            track.check(&reading(20, 1.0, None), Duration(100)),
            Err(RefusedReason::Duplicate)
        );
        track.sort_out(|_| false);
        assert_eq!(track, before);
        track.sort_out(|time| time.0 == 10);
        track.forget_before(Timestamp(20));
        track.sort_out(|_| false);
        assert_eq!(track.all().count(), 2, "what is aside grows old, too");
    }

    #[test]
    fn neighbours_of_an_instant() {
        let mut track = Track::default();
        take(&mut track, 10, 1.0, None);
        take(&mut track, 20, 2.0, None);
        let value = |sample: Option<&Sample>| sample.map(|s| s.value);
        assert_eq!(value(track.last_until(Timestamp(9))), None);
        assert_eq!(value(track.last_until(Timestamp(10))), Some(1.0));
        assert_eq!(value(track.first_after(Timestamp(10))), Some(2.0));
        assert_eq!(value(track.first_after(Timestamp(20))), None);
    }
}
