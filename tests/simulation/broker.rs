//! The simulated broker: delivery at least once, with a session that outlives connections.
//!
//! It keeps what was not acknowledged and sends it again, in order, with the next connection; what
//! was on its way in either direction when a connection broke may be lost from some point on. It
//! may lose its session, and then has nothing of it, nor any retained document.

use crate::chance::Chance;
use crate::plant::Message;
use holdtrue::document::Document;
use holdtrue_engine::time::Timestamp;
use std::collections::{BTreeMap, BTreeSet, VecDeque};

/// How many messages are under way at once (receive maximum).
const WINDOW: usize = 24;

/// What the broker sends.
#[derive(Clone, Debug)]
pub(crate) enum Down {
    /// `again`: it was sent before.
    Message { message: Message, again: bool },
    /// A document was taken.
    Taken(i64),
    /// A document can't be taken now.
    NotNow(i64),
    /// The subscriptions hold.
    Subscribed,
}

/// What the daemon sends.
#[derive(Clone, Debug)]
pub(crate) enum Up {
    Acknowledge(u64),
    Publish { number: i64, document: Document },
    Subscribe,
}

/// A document that the broker took, and so the world has seen.
#[derive(Clone, Debug)]
pub(crate) struct Published {
    pub(crate) number: i64,
    pub(crate) document: Document,
}

/// The broker.
#[derive(Default)]
pub(crate) struct Broker {
    /// Of the session: messages not acknowledged, in order.
    queue: VecDeque<Message>,
    has_session: bool,
    subscribed: bool,
    connected: bool,
    /// How many of the queue were sent in this connection.
    sent: usize,
    sent_before: BTreeSet<u64>,
    down: VecDeque<Down>,
    up: VecDeque<Up>,
    retained: BTreeMap<String, Document>,
    /// Everything that the daemon acknowledged.
    pub(crate) acknowledged: Vec<Message>,
    /// Everything that the daemon published.
    pub(crate) published: Vec<Published>,
    /// Messages sent again.
    pub(crate) sent_again: u64,
}

impl Broker {
    /// A sensor publishes; without a subscription nobody is to get it.
    pub(crate) fn publish(&mut self, messages: Vec<Message>) {
        if self.subscribed {
            self.queue.extend(messages);
        }
    }

    pub(crate) fn is_connected(&self) -> bool {
        self.connected
    }

    /// Whether nothing of the session waits or is under way.
    pub(crate) fn is_at_rest(&self) -> bool {
        self.queue.is_empty() && self.down.is_empty() && self.up.is_empty()
    }

    /// A connection; whether the session was there.
    pub(crate) fn connect(&mut self) -> bool {
        assert!(!self.connected, "one connection at a time");
        self.connected = true;
        self.sent = 0;
        std::mem::replace(&mut self.has_session, true)
    }

    /// The connection breaks. What the daemon had sent may still arrive, up to some point.
    pub(crate) fn cut(&mut self, chance: &mut Chance) {
        if self.connected {
            let arrive = chance.below(self.up.len() + 1);
            self.hear(arrive, chance);
        }
        self.up.clear();
        self.down.clear();
        self.connected = false;
        self.sent = 0;
    }

    /// The broker starts anew without a memory.
    pub(crate) fn forget(&mut self) {
        assert!(!self.connected, "it ends its connections first");
        self.queue.clear();
        self.sent_before.clear();
        self.retained.clear();
        self.has_session = false;
        self.subscribed = false;
    }

    /// Works for a while; nothing is left undone if `all`.
    pub(crate) fn work(&mut self, all: bool, chance: &mut Chance) {
        if !self.connected {
            return;
        }
        let part = if all || !chance.one_in(3) {
            self.up.len()
        } else {
            chance.below(self.up.len() + 1)
        };
        self.hear(part, chance);
        if self.subscribed {
            while self.sent < self.queue.len().min(WINDOW) {
                let message = self.queue[self.sent].clone();
                let again = !self.sent_before.insert(message.number);
                self.sent_again += u64::from(again);
                self.down.push_back(Down::Message { message, again });
                self.sent += 1;
            }
        }
    }

    fn hear(&mut self, count: usize, chance: &mut Chance) {
        for _ in 0..count {
            match self.up.pop_front() {
                Some(Up::Acknowledge(number)) => {
                    let place = self.queue.iter().position(|it| it.number == number);
                    let place = place.expect("what is acknowledged is under way");
                    let message = self.queue.remove(place).expect("it is there");
                    self.sent -= 1;
                    self.acknowledged.push(message);
                }
                Some(Up::Publish { number, document }) => self.take(number, document, chance),
                Some(Up::Subscribe) => {
                    self.subscribed = true;
                    self.down.push_back(Down::Subscribed);
                }
                None => return,
            }
        }
    }

    fn take(&mut self, number: i64, document: Document, chance: &mut Chance) {
        if chance.one_in(150) {
            self.down.push_back(Down::NotNow(number));
            return;
        }
        if document.retain {
            if document.payload.is_empty() {
                self.retained.remove(&document.topic);
            } else {
                let kept = document.clone();
                self.retained.insert(document.topic.clone(), kept);
            }
        }
        self.published.push(Published { number, document });
        self.down.push_back(Down::Taken(number));
    }

    /// What comes next from the broker.
    pub(crate) fn receive(&mut self) -> Option<Down> {
        self.down.pop_front()
    }

    /// Sends something to the broker; without a connection it is gone.
    pub(crate) fn send(&mut self, up: Up) {
        if self.connected {
            self.up.push_back(up);
        }
    }

    /// The retained documents that hold at `now`, by topic.
    pub(crate) fn retained(&self, now: Timestamp) -> BTreeMap<&str, &[u8]> {
        let holds = |document: &Document| document.expires.is_none_or(|expires| expires > now);
        let held = self.retained.values().filter(|document| holds(document));
        held.map(|document| (document.topic.as_str(), document.payload.as_slice()))
            .collect()
    }
}
