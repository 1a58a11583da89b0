//! Documents that the broker has not acknowledged, in the order of issue.
//!
//! Mirrors the record's outbox: what is added or removed here goes into the batch as well.

use crate::document::Document;
use crate::record::{Batch, Numbered, Settled};
use std::collections::BTreeMap;
use std::ops::Bound;

/// How many documents may wait before no message is taken until the broker has taken some. The one
/// message that fills it may go beyond, by what it causes. While the broker is away, what time
/// alone causes (alarms, notices) then pushes out an older document of its topic, or the oldest
/// passing one; with a broker that takes documents nothing is ever pushed out.
const WAITING_MAX: usize = 4096;

/// The outbox.
pub struct Outbox {
    waiting: BTreeMap<i64, Document>,
    /// Number of the newest document.
    newest: i64,
    /// Documents up to this number are on the disk and may go.
    released: i64,
    /// Documents up to this number were handed to the present connection.
    handed: i64,
    /// There is no connection to the broker.
    away: bool,
    pushed_out: u64,
}

impl Outbox {
    /// From what the record holds.
    #[must_use]
    pub fn new(recorded: Vec<Numbered>) -> Self {
        let waiting: BTreeMap<i64, Document> = recorded
            .into_iter()
            .map(|it| (it.number, it.document))
            .collect();
        let last = waiting.keys().next_back().copied().unwrap_or(0);
        Self {
            waiting,
            newest: last,
            released: last,
            handed: 0,
            away: true,
            pushed_out: 0,
        }
    }

    /// Makes room for a document that time alone caused, if there is none and the broker is away.
    pub fn make_room_for(&mut self, document: &Document, batch: &mut Batch) {
        if self.is_full() && self.away {
            self.push_out(document, batch);
        }
    }

    /// Adds a document, to the batch as well. It may go once [`Outbox::release`] was called.
    pub fn add(&mut self, document: Document, batch: &mut Batch) {
        self.newest = batch.add_document(document.clone());
        self.waiting.insert(self.newest, document);
    }

    fn push_out(&mut self, newer: &Document, batch: &mut Batch) {
        let same_topic = |document: &Document| document.retain && document.topic == newer.topic;
        let older = self
            .waiting
            .iter()
            .find(|(_, document)| same_topic(document))
            .or_else(|| self.waiting.iter().find(|(_, document)| !document.retain))
            .map(|(number, _)| *number);
        if let Some(number) = older {
            self.pushed_out += 1;
            self.remove(number, Settled::PushedOut, batch);
        }
    }

    /// The batch with everything added so far is on the disk.
    pub fn release(&mut self) {
        self.released = self.newest;
    }

    /// The oldest document that may go and was not handed over.
    #[must_use]
    pub fn next_to_hand(&self) -> Option<(i64, &Document)> {
        let new = (Bound::Excluded(self.handed), Bound::Included(self.released));
        let (number, document) =
            (self.handed < self.released).then(|| self.waiting.range(new).next())??;
        Some((*number, document))
    }

    /// Everything up to this one was handed over.
    pub fn set_handed(&mut self, number: i64) {
        self.handed = number;
    }

    /// There is a connection.
    pub fn note_here(&mut self) {
        self.away = false;
    }

    /// The connection is gone: all must be handed over again.
    pub fn note_away(&mut self) {
        self.handed = 0;
        self.away = true;
    }

    /// This one and all after it must be handed over again; all, so that an older document of a
    /// topic does not overtake a newer one.
    pub fn hand_again_from(&mut self, number: i64) {
        self.handed = self.handed.min(number - 1);
    }

    /// The broker has this document; older ones that it would replace there are worth nothing now.
    /// Unless one of them was handed over once more meanwhile: that will replace this one there, so
    /// this one must go again, too.
    pub fn accepted(&mut self, number: i64, batch: &mut Batch) {
        if self.is_to_be_replaced(number) {
            return;
        }
        let Some(accepted) = self
            .remove(number, Settled::Taken, batch)
            .filter(|it| it.retain)
        else {
            return;
        };
        let older: Vec<i64> = self
            .waiting
            .range(..number)
            .filter(|(_, it)| it.retain && it.topic == accepted.topic)
            .map(|(number, _)| *number)
            .collect();
        for number in older {
            self.remove(number, Settled::Overtaken, batch);
        }
    }

    /// Whether this one is to go again, and an older one of its topic already went again.
    fn is_to_be_replaced(&self, number: i64) -> bool {
        let Some(document) = self.waiting.get(&number).filter(|it| it.retain) else {
            return false;
        };
        let mut under_way = self.waiting.range(..=self.handed);
        number > self.handed
            && under_way.any(|(_, older)| older.retain && older.topic == document.topic)
    }

    /// Removes a document, from the record as well with the next commit.
    pub fn remove(&mut self, number: i64, how: Settled, batch: &mut Batch) -> Option<Document> {
        let removed = self.waiting.remove(&number);
        if removed.is_some() {
            batch.settle(number, how);
        }
        removed
    }

    /// Whether a document for this topic waits.
    #[must_use]
    pub fn holds_topic(&self, topic: &str) -> bool {
        self.waiting
            .values()
            .any(|document| document.topic == topic)
    }

    /// All that wait, in order.
    #[must_use]
    pub fn all(&self) -> Vec<Numbered> {
        let all = self.waiting.iter();
        all.map(|(number, document)| Numbered {
            number: *number,
            document: document.clone(),
        })
        .collect()
    }

    /// Documents waiting.
    #[must_use]
    pub fn len(&self) -> usize {
        self.waiting.len()
    }

    /// Whether no more should be caused by taking messages.
    #[must_use]
    pub fn is_full(&self) -> bool {
        self.waiting.len() >= WAITING_MAX
    }

    /// Whether none waits.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.waiting.is_empty()
    }

    /// How many were pushed out while it was full.
    #[must_use]
    pub fn pushed_out(&self) -> u64 {
        self.pushed_out
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::record::{Record, Turn};
    use holdtrue_engine::setup::Setup;
    use holdtrue_engine::time::Timestamp;

    fn document(topic: &str, retain: bool) -> Document {
        Document {
            topic: topic.to_owned(),
            payload: vec![b'1'],
            retain,
            expires: None,
            correlation: None,
        }
    }

    fn record() -> (tempfile::TempDir, Record) {
        let folder = tempfile::tempdir().unwrap();
        let record = Record::open(folder.path()).unwrap();
        (folder, record)
    }

    #[test]
    fn nothing_goes_before_its_release_and_all_again_after_a_loss() {
        let (_folder, mut record) = record();
        let batch = record.batch();
        let mut outbox = Outbox::new(Vec::new());
        assert!(outbox.next_to_hand().is_none());
        outbox.add(document("a", true), batch);
        assert!(outbox.next_to_hand().is_none(), "not on the disk yet");
        outbox.release();
        outbox.add(document("b", true), batch);
        assert_eq!(outbox.next_to_hand().unwrap().0, 1);
        outbox.set_handed(1);
        assert!(outbox.next_to_hand().is_none());
        outbox.release();
        assert_eq!(outbox.next_to_hand().unwrap().1.topic, "b");
        outbox.note_away();
        assert_eq!(outbox.next_to_hand().unwrap().0, 1);
        outbox.remove(1, Settled::Taken, batch).unwrap();
        assert_eq!(outbox.next_to_hand().unwrap().0, 2);
        assert!(outbox.remove(1, Settled::Taken, batch).is_none());
    }

    #[test]
    fn a_full_outbox_without_a_broker_pushes_out_the_older_of_the_topic_or_the_oldest_passing_one()
    {
        let (_folder, mut record) = record();
        let batch = record.batch();
        let mut outbox = Outbox::new(Vec::new());
        outbox.add(document("kept", true), batch);
        outbox.add(document("alarm", true), batch);
        for _ in 2..WAITING_MAX {
            outbox.add(document("notice", false), batch);
        }
        assert!(outbox.is_full());
        for newer in [document("alarm", true), document("notice", false)] {
            outbox.make_room_for(&newer, batch);
            outbox.add(newer, batch);
        }
        assert_eq!((outbox.len(), outbox.pushed_out()), (WAITING_MAX, 2));
        outbox.release();
        let first: Vec<i64> = std::iter::from_fn(|| {
            let number = outbox.next_to_hand()?.0;
            outbox.set_handed(number);
            Some(number)
        })
        .take(2)
        .collect();
        assert_eq!(
            first,
            [1, 4],
            "the old alarm (2) and the oldest notice (3) are gone"
        );
    }

    #[test]
    fn nothing_is_pushed_out_by_a_message_or_while_the_broker_is_here() {
        let (_folder, mut record) = record();
        let batch = record.batch();
        let mut outbox = Outbox::new(Vec::new());
        for _ in 0..WAITING_MAX + 5000 {
            outbox.add(document("corrected", false), batch);
        }
        outbox.note_here();
        let notice = document("notice", false);
        outbox.make_room_for(&notice, batch);
        assert_eq!((outbox.len(), outbox.pushed_out()), (WAITING_MAX + 5000, 0));
        outbox.note_away();
        outbox.make_room_for(&notice, batch);
        assert_eq!(outbox.pushed_out(), 1);
    }

    #[test]
    fn what_the_broker_could_not_take_goes_again_in_order_unless_a_newer_one_arrived() {
        let (_folder, mut record) = record();
        let batch = record.batch();
        let mut outbox = Outbox::new(Vec::new());
        for topic in ["a", "b", "a"] {
            outbox.add(document(topic, true), batch);
        }
        outbox.release();
        outbox.set_handed(3);
        outbox.hand_again_from(1);
        assert_eq!(outbox.next_to_hand().unwrap().0, 1);
        // The answer to the third comes in; the first would replace it by something older.
        outbox.accepted(3, batch);
        assert_eq!(outbox.next_to_hand().unwrap().0, 2);
        assert_eq!(outbox.len(), 1);
    }

    #[test]
    fn a_late_answer_does_not_end_what_an_older_one_will_replace_at_the_broker() {
        let (_folder, mut record) = record();
        let batch = record.batch();
        let mut outbox = Outbox::new(Vec::new());
        for topic in ["a", "b", "a"] {
            outbox.add(document(topic, true), batch);
        }
        outbox.release();
        outbox.set_handed(3);
        outbox.hand_again_from(1);
        outbox.set_handed(1);
        // The first goes again, and only then comes the answer to the third, which must follow it.
        outbox.accepted(3, batch);
        outbox.accepted(1, batch);
        outbox.set_handed(2);
        assert_eq!(outbox.next_to_hand().unwrap().0, 3);
        outbox.set_handed(3);
        outbox.accepted(3, batch);
        assert_eq!(outbox.len(), 1, "only the second waits for its answer");
    }

    #[test]
    fn numbers_go_on_after_a_restart() {
        let folder = tempfile::tempdir().unwrap();
        let mut record = Record::open(folder.path()).unwrap();
        let turn = Turn {
            now: Timestamp(0),
            day: Timestamp(0),
            setup: &Setup::default(),
            state: Vec::new(),
            waiting: Vec::new(),
        };
        record.turn(turn).unwrap();
        let mut outbox = Outbox::new(Vec::new());
        for topic in ["a", "b"] {
            outbox.add(document(topic, true), record.batch());
        }
        outbox.remove(1, Settled::Taken, record.batch()).unwrap();
        record.commit(Timestamp(1)).unwrap();
        drop(record);

        let mut record = Record::open(folder.path()).unwrap();
        let mut outbox = Outbox::new(record.outbox().unwrap());
        assert_eq!(outbox.len(), 1);
        assert_eq!(
            outbox.next_to_hand().unwrap().0,
            2,
            "it is on the disk already"
        );
        outbox.add(document("c", true), record.batch());
        outbox.release();
        outbox.set_handed(2);
        assert_eq!(outbox.next_to_hand().unwrap().0, 3);
    }
}
