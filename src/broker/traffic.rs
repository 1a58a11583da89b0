//! What passes over the link: messages and what happened to it, documents and their names.

use super::client::Answer;
use bytes::Bytes;
use holdtrue_engine::event::ReplyTo;
use std::time::Duration;

/// What the broker publishes when the connection breaks.
#[derive(Clone, Debug)]
pub struct Will {
    /// Where.
    pub topic: String,
    /// What.
    pub payload: Vec<u8>,
}

/// What is published, with quality of service 1.
#[derive(Clone, Copy, Debug, Default)]
pub struct Publish<'a> {
    /// Where.
    pub topic: &'a str,
    /// What.
    pub payload: &'a [u8],
    /// Whether the broker keeps it for later subscribers.
    pub retain: bool,
    /// Seconds after which the broker drops it. MQTT 3.1.1 has no such thing, nor the following.
    pub expiry: Option<u32>,
    /// Where an answer is wanted.
    pub response_topic: Option<&'a str>,
    /// What its receiver knows it by: of an answer, what the question bore.
    pub correlation: Option<&'a [u8]>,
}

/// Names a document on its way.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Token {
    /// A document with its number in the outbox.
    Document(i64),
    /// The state document, which is not in the outbox.
    State,
    /// The alarm that nothing can be recorded; not in the outbox either.
    Alarm,
}

/// What is given back to acknowledge a message.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Ticket {
    pub(super) connection: u64,
    /// Packet identifier; 0: sent without delivery guarantee, nothing to acknowledge.
    pub(super) packet: u16,
}

impl Ticket {
    /// Whether the broker keeps the message until it is acknowledged.
    #[must_use]
    pub fn is_guaranteed(self) -> bool {
        self.packet != 0
    }

    /// Of the first connection.
    #[cfg(test)]
    pub(crate) fn for_test(packet: u16) -> Self {
        Self {
            connection: 1,
            packet,
        }
    }
}

/// A message that came in.
#[derive(Clone, Debug)]
pub struct Message {
    /// Its topic.
    pub topic: String,
    /// Its payload.
    pub payload: Bytes,
    /// The broker's memory, not a new message.
    pub retained: bool,
    /// Where its sender wants an answer, if it does.
    pub reply_to: Option<ReplyTo>,
    /// To acknowledge it.
    pub ticket: Ticket,
}

/// Why and how a connection ended.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Lost {
    /// What the library or the broker said.
    pub why: String,
    /// The broker says that another client with our name took the session.
    pub taken_over: bool,
    /// Attempts and short-lived connections in a row.
    pub failures: u32,
    /// When the next attempt is made.
    pub next_try: Duration,
}

/// What happened on the link.
#[derive(Clone, Debug)]
pub enum Event {
    /// A connection was made. Without a session, the broker has forgotten subscriptions.
    Connected {
        /// The broker still had our session.
        session_present: bool,
    },
    /// A message came in.
    Message(Message),
    /// The broker answered a document.
    Answered(Token, Answer),
    /// The broker answered all subscriptions; filters that it refused, and why.
    Subscribed {
        /// Refused filters.
        refused: Vec<(String, String)>,
    },
    /// What waited to be sent has gone; there is room for documents again.
    Ready,
    /// The connection is over; documents without answer must be handed over again.
    Lost(Lost),
}
