//! Attaches influence quantities to pairs: interpolated to the pair's instant, or the mean over its
//! interval, by the same rules as indications.
//!
//! A pair waits until what is known of every quantity around it is settled, at most until a value
//! still to come would be too far away. Without one of its values it stays out of the fit, since a
//! fit must not mix rows that mean different things. Pairs leave in order of their time, so that
//! one whose values came at once does not overtake those before it.
//!
//! Bounded: at most [`WAITING_MAX`] pairs wait, and as many for the record; when it is full the
//! oldest stays out.

use super::interval::{self, LEAST_COVERAGE};
use super::look::{Look, look, mean};
use super::{AT_ONCE, Answer, Found, Pair, Scene, settles};
use crate::event::{RefusedReason, Rejection};
use crate::fit::basis::MAX_INFLUENCES;
use crate::time::{Duration, Timestamp};
use crate::track::Track;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Most pairs that wait for their influence quantities.
const WAITING_MAX: usize = 4096;
/// Most pairs that wait for rows from the record.
const ASKED_MAX: usize = 256;

/// The pairs that wait.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Attaching {
    /// Ordered by the pair's time.
    waiting: VecDeque<Waiting>,
    /// Those that wait for rows from the record, in the order in which they asked.
    asked: VecDeque<Waiting>,
    /// When time alone may let the first one out.
    due: Option<Timestamp>,
}

/// A pair that waits.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Waiting {
    pair: Pair,
    /// Now when it was found.
    found: Timestamp,
}

/// What is known of an influence quantity beside a pair.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Beside {
    Value(f64),
    /// It may still come, or change, until then.
    Open(Timestamp),
    /// It will never be known.
    Missing,
    /// It is no longer in memory.
    Forgotten,
}

impl Attaching {
    /// When time alone may let a pair out.
    pub(super) fn due(&self) -> Option<Timestamp> {
        self.due
    }

    /// Something that may let a pair out has come.
    pub(super) fn touch(&mut self) {
        if !self.waiting.is_empty() {
            self.due = Some(AT_ONCE);
        }
    }

    /// Takes the pairs out of what was found, and adds those that have all they wait for.
    pub(super) fn take(&mut self, found: &mut Vec<Found>, scene: &Scene<'_>) {
        let mut rest = Vec::with_capacity(found.len());
        for found in found.drain(..) {
            match found {
                Found::Pair(pair) => self.wait(pair, scene),
                other => rest.push(other),
            }
        }
        *found = rest;
        while self.waiting.len() > WAITING_MAX
            && let Some(oldest) = self.waiting.pop_front()
        {
            let missing = first_missing(&oldest, scene);
            found.push(unattached(&oldest.pair, missing, scene));
        }
        self.advance(scene, found);
    }

    /// Drops the pairs that wait and rest on something that no longer counts.
    pub(super) fn drop_waiting(&mut self, rests: impl Fn(&Pair) -> bool) {
        self.waiting.retain(|waiting| !rests(&waiting.pair));
        self.asked.retain(|waiting| !rests(&waiting.pair));
    }

    /// Whether a pair of this time waits.
    pub(super) fn holds(&self, time: Timestamp) -> bool {
        let mut pairs = self.waiting.iter().chain(&self.asked);
        pairs.any(|waiting| waiting.pair.time == time)
    }

    /// Rows that were asked for have come (or there are none).
    pub(super) fn take_supplied(
        &mut self,
        answer: &Answer,
        scene: &Scene<'_>,
        found: &mut Vec<Found>,
    ) {
        let (answered, asked): (VecDeque<Waiting>, _) = std::mem::take(&mut self.asked)
            .into_iter()
            .partition(|waiting| {
                around(&waiting.pair, scene.setup.max_gap) == (answer.from, answer.to)
            });
        self.asked = asked;
        for waiting in answered {
            let tracks = scene.setup.influences.iter().map(|influence| {
                let track = &scene.influences[influence.source.0 as usize];
                let rows = answer.rows.influences.get(&influence.source);
                track.joined(rows.map_or(&[], Vec::as_slice), answer.from, answer.to)
            });
            let mut values = [0.0; MAX_INFLUENCES];
            let mut missing = None;
            for (index, track) in tracks.enumerate() {
                match beside(&track, &waiting, Timestamp(i64::MAX), scene) {
                    Beside::Value(value) => values[index] = value,
                    _ => missing = missing.or(Some(index)),
                }
            }
            found.push(match missing {
                None => attached(&waiting.pair, values),
                Some(influence) => unattached(&waiting.pair, influence, scene),
            });
        }
    }

    fn wait(&mut self, pair: Pair, scene: &Scene<'_>) {
        let place = self
            .waiting
            .partition_point(|held| held.pair.time <= pair.time);
        let waiting = Waiting {
            pair,
            found: scene.now,
        };
        self.waiting.insert(place, waiting);
        self.due = Some(AT_ONCE);
    }

    /// Lets out, in order, the pairs that wait no longer.
    fn advance(&mut self, scene: &Scene<'_>, found: &mut Vec<Found>) {
        if self.due.is_none_or(|due| scene.now < due) {
            return;
        }
        self.due = None;
        while let Some(first) = self.waiting.front() {
            match resolve(first, scene) {
                Ok(values) => found.push(attached(&first.pair, values)),
                Err((_, Beside::Open(due))) => {
                    self.due = Some(due);
                    return;
                }
                Err((_, Beside::Forgotten)) => {
                    let (from, to) = around(&first.pair, scene.setup.max_gap);
                    found.push(Found::Wanted { from, to });
                    self.asked.push_back(*first);
                }
                Err((influence, _)) => found.push(unattached(&first.pair, influence, scene)),
            }
            self.waiting.pop_front();
            if self.asked.len() > ASKED_MAX
                && let Some(oldest) = self.asked.pop_front()
            {
                let missing = first_missing(&oldest, scene);
                found.push(unattached(&oldest.pair, missing, scene));
            }
        }
    }
}

/// The values of all influence quantities, or the place of the one that decides what becomes of the
/// pair: one that is missing before one that is forgotten before one that is awaited longest.
fn resolve(waiting: &Waiting, scene: &Scene<'_>) -> Result<[f64; MAX_INFLUENCES], (usize, Beside)> {
    let mut values = [0.0; MAX_INFLUENCES];
    let mut worst: Option<(usize, Beside)> = None;
    for (index, influence) in scene.setup.influences.iter().enumerate() {
        let track = &scene.influences[influence.source.0 as usize];
        let seen = beside(track, waiting, scene.now, scene);
        match (seen, worst) {
            (Beside::Value(value), _) => values[index] = value,
            (Beside::Missing, _) => return Err((index, seen)),
            (Beside::Open(due), Some((_, Beside::Open(before)))) if due <= before => {}
            (Beside::Open(_), Some((_, Beside::Forgotten))) => {}
            _ => worst = Some((index, seen)),
        }
    }
    worst.map_or(Ok(values), Err)
}

/// What is known at `now` of one influence quantity beside a pair.
fn beside(track: &Track, waiting: &Waiting, now: Timestamp, scene: &Scene<'_>) -> Beside {
    let (from, to) = waiting.pair.interval;
    let setup = scene.setup;
    // Past this, any value still to come would be too far away.
    let latest = to
        .max(waiting.found)
        .plus(setup.lateness)
        .plus(setup.max_gap);
    let (value, settled) = if from == to {
        at(track, from, scene)
    } else {
        over(track, (from, to), scene)
    };
    let settled = settled.map_or(latest, |settled| settled.min(latest));
    if now < settled {
        return Beside::Open(settled);
    }
    let edge = from.minus(setup.max_gap);
    let forgotten = track.forgotten().is_some_and(|newest| newest >= edge);
    match value {
        Some(value) => Beside::Value(value),
        None if forgotten && track.last_until(from).is_none() => Beside::Forgotten,
        None => Beside::Missing,
    }
}

/// The value at an instant, and when it is settled; `None` while only time can tell.
fn at(track: &Track, instant: Timestamp, scene: &Scene<'_>) -> (Option<f64>, Option<Timestamp>) {
    match look(track, instant, scene.setup.max_gap) {
        Look::Exact(value) => (Some(value), Some(AT_ONCE)),
        Look::Between { value, after } => (Some(value), Some(settles(&after, scene))),
        Look::Apart { after } => (None, Some(settles(&after, scene))),
        Look::Open => (None, None),
    }
}

/// The same for the mean over an interval, if its values cover enough of it.
fn over(
    track: &Track,
    (from, to): (Timestamp, Timestamp),
    scene: &Scene<'_>,
) -> (Option<f64>, Option<Timestamp>) {
    let beyond = track.first_after(to.minus(Duration(1)));
    let settled = beyond.map(|beyond| {
        let inside = track.range(from, to).map(|held| settles(held, scene)).max();
        settles(beyond, scene)
            .max(inside.unwrap_or(to))
            .max(to.plus(scene.setup.lateness))
    });
    let times = track.range(from, to).map(|held| held.time);
    let coverage = interval::coverage(times, from, to, scene.setup.max_gap);
    let mean = mean(track.range(from, to).map(|held| held.value));
    let value = mean.filter(|_| coverage >= LEAST_COVERAGE);
    (value.map(|(mean, _)| mean), settled)
}

/// The rows `[from, to)` that tell what acted on a pair.
fn around(pair: &Pair, max_gap: Duration) -> (Timestamp, Timestamp) {
    let (from, to) = pair.interval;
    (from.minus(max_gap), to.plus(max_gap).plus(Duration(1)))
}

fn attached(pair: &Pair, influences: [f64; MAX_INFLUENCES]) -> Found {
    Found::Pair(Pair {
        influences,
        ..*pair
    })
}

/// The first influence quantity that is not known beside a pair; the first of all if each is.
fn first_missing(waiting: &Waiting, scene: &Scene<'_>) -> usize {
    resolve(waiting, scene).map_or_else(|(influence, _)| influence, |_| 0)
}

fn unattached(pair: &Pair, influence: usize, scene: &Scene<'_>) -> Found {
    let source = scene.setup.influences[influence].source;
    let track = &scene.influences[source.0 as usize];
    let before = track.last_until(pair.time);
    let before = before.map(|held| pair.time.since(held.time).seconds());
    let after = track.first_after(pair.time);
    let after = after.map(|held| held.time.since(pair.time).seconds());
    Found::Unattached {
        pair: *pair,
        influence,
        rejection: Rejection {
            reason: RefusedReason::NoInfluence,
            // Where there is no value at all, none is near.
            value: before.into_iter().chain(after).fold(f64::MAX, f64::min),
            threshold: scene.setup.max_gap.seconds(),
        },
    }
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;
    use crate::channel::Rows;
    use crate::channel::testing::{Stage, channel_setup};
    use crate::setup::{ChannelInfluence, InfluenceId};
    use crate::track::Sample;

    /// A stage whose channel waits 10 s for stragglers, interpolates across 60 s, and has these
    /// influence quantities: (second, value).
    fn stage(tracks: &[&[(i64, f64)]]) -> Stage {
        let mut setup = channel_setup();
        setup.lateness = Duration::from_seconds(10);
        setup.max_gap = Duration::from_seconds(60);
        setup.influences = (0..)
            .zip(tracks)
            .map(|(id, _)| ChannelInfluence {
                source: InfluenceId(id),
                name: format!("quantity-{id}"),
                unit: None,
            })
            .collect();
        let mut stage = Stage::new(setup);
        stage.influences = tracks.iter().map(|rows| track(rows).into()).collect();
        stage
    }

    fn track(rows: &[(i64, f64)]) -> Track {
        let mut track = Track::default();
        for &(second, value) in rows {
            track.insert(sample(second, value));
        }
        track
    }

    fn sample(second: i64, value: f64) -> Sample {
        Sample {
            time: at(second),
            arrived: at(second),
            value,
            sequence: None,
        }
    }

    fn at(second: i64) -> Timestamp {
        Timestamp(0).plus(Duration::from_seconds(second))
    }

    fn pair(second: i64) -> Pair {
        Pair::at(at(second), 1.0, 2.0)
    }

    /// What comes out at this second when these pairs go in.
    fn take(
        attaching: &mut Attaching,
        stage: &mut Stage,
        now: i64,
        pairs: impl IntoIterator<Item = Pair>,
    ) -> Vec<Found> {
        let mut found: Vec<Found> = pairs.into_iter().map(Found::Pair).collect();
        stage.act(at(now), |scene, _| attaching.take(&mut found, scene));
        found
    }

    fn with(pair: Pair, influences: [f64; MAX_INFLUENCES]) -> Found {
        attached(&pair, influences)
    }

    #[test]
    fn a_value_beside_an_instant_is_interpolated_once_it_is_settled() {
        let mut stage = stage(&[&[(0, 10.0), (40, 30.0)]]);
        let mut attaching = Attaching::default();
        assert_eq!(take(&mut attaching, &mut stage, 49, [pair(30)]), []);
        assert_eq!(
            attaching.due(),
            Some(at(50)),
            "ten seconds behind the later value"
        );
        let found = take(&mut attaching, &mut stage, 50, []);
        assert_eq!(found, [with(pair(30), [25.0, 0.0])]);
        assert_eq!(attaching.due(), None);
    }

    #[test]
    fn an_exact_value_counts_at_once_but_overtakes_nobody() {
        let mut stage = stage(&[&[(0, 10.0), (40, 30.0)]]);
        let mut attaching = Attaching::default();
        let found = take(&mut attaching, &mut stage, 40, [pair(40)]);
        assert_eq!(found, [with(pair(40), [30.0, 0.0])]);
        assert_eq!(
            take(&mut attaching, &mut stage, 40, [pair(40), pair(20)]),
            []
        );
        let found = take(&mut attaching, &mut stage, 50, []);
        assert_eq!(
            found,
            [with(pair(20), [20.0, 0.0]), with(pair(40), [30.0, 0.0])]
        );
    }

    #[test]
    fn an_interval_has_the_mean_over_it_if_enough_is_covered() {
        let mut stage = stage(&[&[(0, 1.0), (40, 3.0), (80, 5.0), (120, 100.0)]]);
        let mut attaching = Attaching::default();
        let hour = Pair::over((at(0), at(120)), 1.0, 2.0);
        assert_eq!(take(&mut attaching, &mut stage, 129, [hour]), []);
        let found = take(&mut attaching, &mut stage, 130, []);
        assert_eq!(
            found,
            [with(hour, [3.0, 0.0])],
            "what begins the next interval stays out"
        );
        let thin = Pair::over((at(40), at(320)), 1.0, 2.0);
        assert_eq!(take(&mut attaching, &mut stage, 130, [thin]), []);
        assert_eq!(attaching.due(), Some(at(390)));
        let [Found::Unattached { rejection, .. }] = take(&mut attaching, &mut stage, 390, [])[..]
        else {
            panic!("three values cover half of it");
        };
        assert_eq!(rejection.reason, RefusedReason::NoInfluence);
    }

    #[test]
    fn without_a_value_near_enough_a_pair_stays_out() {
        let mut stage = stage(&[&[(0, 1.0), (100, 2.0), (200, 3.0)], &[(0, 7.0)]]);
        let mut attaching = Attaching::default();
        // 100 s lie between the neighbours: known as soon as the later one has settled.
        let found = take(&mut attaching, &mut stage, 110, [pair(30)]);
        let expected = Found::Unattached {
            pair: pair(30),
            influence: 0,
            rejection: Rejection {
                reason: RefusedReason::NoInfluence,
                value: 30.0,
                threshold: 60.0,
            },
        };
        assert_eq!(found, [expected]);
        // The second quantity fell silent: until 60 s and the lateness have passed it may come.
        assert_eq!(take(&mut attaching, &mut stage, 210, [pair(200)]), []);
        assert_eq!(attaching.due(), Some(at(280)));
        let [
            Found::Unattached {
                influence,
                rejection,
                ..
            },
        ] = take(&mut attaching, &mut stage, 280, [])[..]
        else {
            panic!("nothing came");
        };
        assert_eq!((influence, rejection.value), (1, 200.0));
    }

    #[test]
    fn values_no_longer_in_memory_are_asked_from_the_record() {
        let mut stage = stage(&[&[(0, 1.0), (40, 3.0), (500, 5.0)]]);
        stage.influences[0].forget_before(at(400));
        let mut attaching = Attaching::default();
        let found = take(&mut attaching, &mut stage, 510, [pair(20)]);
        let (from, to) = (at(-40), at(80).plus(Duration(1)));
        assert_eq!(found, [Found::Wanted { from, to }]);
        let mut found = Vec::new();
        let mut rows = Rows::default();
        rows.influences
            .insert(InfluenceId(0), vec![sample(0, 1.0), sample(40, 3.0)]);
        let answer = Answer { from, to, rows };
        stage.act(at(510), |scene, _| {
            attaching.take_supplied(&answer, scene, &mut found);
        });
        assert_eq!(found, [with(pair(20), [2.0, 0.0])]);
        found.clear();
        stage.act(at(510), |scene, _| {
            attaching.take_supplied(&answer, scene, &mut found);
        });
        assert_eq!(found, [], "answered once");
    }

    #[test]
    fn a_pair_too_many_costs_the_oldest() {
        let mut stage = stage(&[&[]]);
        let mut attaching = Attaching::default();
        let pairs = (0..).take(WAITING_MAX + 1).map(pair);
        let found = take(&mut attaching, &mut stage, 0, pairs);
        assert!(
            matches!(found[..], [Found::Unattached { pair: oldest, .. }] if oldest == pair(0)),
            "{found:?}"
        );
    }
}
