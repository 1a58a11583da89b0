//! How often something was refused, by subject and reason. Kept apart from the engine's state: a
//! refused input changes these and nothing else.

use crate::event::{RefusedReason, Subject};
use serde::{Deserialize, Serialize};

/// All counters that are not zero, ordered by subject and reason.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(transparent)]
pub struct Counters {
    counts: Vec<Count>,
}

/// How often one subject met one reason.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Count {
    /// Whose input it was (or would have been).
    pub subject: Subject,
    /// Why it was refused.
    pub reason: RefusedReason,
    /// How often since the record began.
    pub count: u64,
}

impl Counters {
    /// All counters that are not zero.
    #[must_use]
    pub fn all(&self) -> &[Count] {
        &self.counts
    }

    /// One counter.
    #[must_use]
    pub fn get(&self, subject: Subject, reason: RefusedReason) -> u64 {
        self.place(subject, reason)
            .map_or(0, |index| self.counts[index].count)
    }

    /// Counts one more.
    pub(crate) fn add(&mut self, subject: Subject, reason: RefusedReason) {
        match self.place(subject, reason) {
            Ok(index) => self.counts[index].count += 1,
            Err(index) => self.counts.insert(
                index,
                Count {
                    subject,
                    reason,
                    count: 1,
                },
            ),
        }
    }

    /// Moves every count to the subject's new position; subjects that are gone lose theirs.
    pub(crate) fn renumber(&mut self, new: impl Fn(Subject) -> Option<Subject>) {
        self.counts = std::mem::take(&mut self.counts)
            .into_iter()
            .filter_map(|count| new(count.subject).map(|subject| Count { subject, ..count }))
            .collect();
        self.counts
            .sort_by_key(|count| (count.subject, count.reason));
    }

    fn place(&self, subject: Subject, reason: RefusedReason) -> Result<usize, usize> {
        self.counts
            .binary_search_by_key(&(subject, reason), |count| (count.subject, count.reason))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::setup::ChannelId;

    #[test]
    fn counts_stay_apart_and_ordered() {
        let mut counters = Counters::default();
        let channel = Subject::Channel(ChannelId(3));
        counters.add(channel, RefusedReason::Late);
        counters.add(Subject::Node, RefusedReason::Late);
        counters.add(channel, RefusedReason::Late);
        assert_eq!(counters.get(channel, RefusedReason::Late), 2);
        assert_eq!(counters.get(Subject::Node, RefusedReason::Late), 1);
        assert_eq!(counters.get(Subject::Node, RefusedReason::Future), 0);
        assert!(
            counters
                .all()
                .is_sorted_by_key(|count| (count.subject, count.reason))
        );
    }

    #[test]
    fn renumbering_keeps_counts_of_those_that_stay() {
        let mut counters = Counters::default();
        counters.add(Subject::Channel(ChannelId(0)), RefusedReason::Late);
        counters.add(Subject::Channel(ChannelId(1)), RefusedReason::Late);
        counters.renumber(|subject| match subject {
            Subject::Channel(ChannelId(1)) => Some(Subject::Channel(ChannelId(0))),
            _ => None,
        });
        assert_eq!(counters.all().len(), 1);
        assert_eq!(
            counters.get(Subject::Channel(ChannelId(0)), RefusedReason::Late),
            1
        );
    }
}
