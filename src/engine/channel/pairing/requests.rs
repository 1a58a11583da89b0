//! Readings that wait for rows from the record, and what is supplied to them.
//!
//! The shell answers every request once, by its `from` and `to`, however long that takes and after
//! whatever inputs; there is no patience to run out, since engine time says nothing about how long
//! the shell takes (a recording passes days between two commits).
//!
//! Bounded: at most [`REQUESTS_MAX`] wait; when it is full the oldest counts as missed.

use super::{Found, missed};
use crate::event::{Reading, Source};
use crate::setup::{ChannelId, InfluenceId};
use crate::time::Timestamp;
use crate::track::Sample;
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, VecDeque};

/// Most readings that wait for the record.
const REQUESTS_MAX: usize = 256;

/// On behalf of what rows are asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub(super) enum Asker {
    /// A reference value whose indications are no longer in memory.
    Reference,
    /// An indication whose reference values are no longer in memory.
    Indication,
}

/// A reading that waits for rows.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Request {
    pub(super) sample: Sample,
    pub(super) asker: Asker,
    /// First instant wanted.
    pub(super) from: Timestamp,
    /// First instant no longer wanted.
    pub(super) to: Timestamp,
}

/// All that wait, in the order in which they asked.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
#[serde(transparent)]
pub(super) struct Requests {
    waiting: VecDeque<Request>,
}

/// Rows of a channel from the record, as far as they may be used.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Rows {
    /// Its own indications.
    pub(super) own: Vec<Sample>,
    /// The values of its reference.
    pub(super) values: Vec<Sample>,
    /// The values of its influence quantities, by their source.
    pub(super) influences: BTreeMap<InfluenceId, Vec<Sample>>,
}

/// Rows supplied in answer to a request.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Answer {
    /// As in the request.
    pub(crate) from: Timestamp,
    /// As in the request.
    pub(crate) to: Timestamp,
    /// What the record holds there.
    pub(crate) rows: Rows,
}

impl Rows {
    /// Adds a row of this channel, of its reference or of an influence quantity; others (members of
    /// its group) serve no request.
    pub(crate) fn add(&mut self, channel: ChannelId, reading: &Reading) {
        let sample = Sample {
            time: reading.phenomenon,
            arrived: reading.phenomenon,
            value: reading.value,
            sequence: reading.sequence,
        };
        match reading.source {
            Source::Indication(id) if id == channel => self.own.push(sample),
            Source::Indication(_) => {}
            Source::Reference(_) => self.values.push(sample),
            Source::Influence(id) => self.influences.entry(id).or_default().push(sample),
        }
    }
}

impl Requests {
    /// Asks, and lets the reading wait.
    pub(super) fn ask(&mut self, request: Request, found: &mut Vec<Found>) {
        let Request { from, to, .. } = request;
        found.push(Found::Wanted { from, to });
        self.waiting.push_back(request);
        if self.waiting.len() > REQUESTS_MAX
            && let Some(oldest) = self.waiting.pop_front()
        {
            found.push(missed(&oldest.sample));
        }
    }

    /// Drops the reference values that wait and no longer count.
    pub(super) fn drop_waiting(&mut self, is_maker: impl Fn(Timestamp) -> bool) {
        self.waiting
            .retain(|request| request.asker == Asker::Indication || !is_maker(request.sample.time));
    }

    /// The readings that wait.
    pub(super) fn samples(&self) -> impl Iterator<Item = &Sample> {
        self.waiting.iter().map(|request| &request.sample)
    }

    /// Takes out those that asked for this; none if nobody did.
    pub(super) fn answered(&mut self, answer: &Answer) -> VecDeque<Request> {
        let (answered, waiting) = std::mem::take(&mut self.waiting)
            .into_iter()
            .partition(|request| request.from == answer.from && request.to == answer.to);
        self.waiting = waiting;
        answered
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn request(time: i64) -> Request {
        Request {
            sample: Sample {
                time: Timestamp(time),
                arrived: Timestamp(time),
                value: 0.0,
                sequence: None,
            },
            asker: Asker::Reference,
            from: Timestamp(time - 1),
            to: Timestamp(time + 1),
        }
    }

    fn answer(from: i64, to: i64) -> Answer {
        Answer {
            from: Timestamp(from),
            to: Timestamp(to),
            rows: Rows::default(),
        }
    }

    #[test]
    fn an_answer_reaches_only_those_that_asked_for_it() {
        let mut requests = Requests::default();
        let mut found = Vec::new();
        for time in [10, 20, 10] {
            requests.ask(request(time), &mut found);
        }
        assert_eq!(found.len(), 3);
        assert!(requests.answered(&answer(9, 12)).is_empty());
        assert_eq!(requests.answered(&answer(9, 11)).len(), 2);
        assert!(requests.answered(&answer(9, 11)).is_empty());
        assert_eq!(requests.answered(&answer(19, 21)), [request(20)]);
    }

    #[test]
    fn a_request_too_many_costs_the_oldest_and_is_told() {
        let mut requests = Requests::default();
        let mut found = Vec::new();
        for time in (0..).take(REQUESTS_MAX + 1) {
            requests.ask(request(time), &mut found);
        }
        let lost: Vec<_> = found
            .iter()
            .filter(|found| matches!(found, Found::Missed { .. }))
            .collect();
        assert_eq!(lost, [&missed(&request(0).sample)]);
        assert_eq!(requests.waiting.len(), REQUESTS_MAX);
    }
}
