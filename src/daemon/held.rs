//! Messages that came in while none can be taken: the record can't be written, or the outbox is
//! full.
//!
//! Bounded. Normally the broker stops by itself when the receive window is full. Where it does
//! not, what does not fit here is not kept: a guaranteed message stays with the broker,
//! unacknowledged, and comes again with the next connection; one without guarantee is dropped and
//! counted.

use crate::broker::Message;
use holdtrue_engine::time::Timestamp;
use std::collections::VecDeque;

/// Bytes of topics and payloads held at most. Generous, since some brokers ignore the receive
/// window while they send what queued up (Mosquitto 2.0.11), and each new connection has its price.
const BYTES_MAX: usize = 16 << 20;
/// Messages held at most; with their own size this is about as much again.
const MESSAGES_MAX: usize = 100_000;

/// The waiting messages.
pub(super) struct Held {
    messages: VecDeque<(Message, Timestamp)>,
    bytes: usize,
    /// A guaranteed message of this connection was left with the broker. None that came after it
    /// may be taken, or readings would be taken out of order.
    overrun: bool,
    dropped: u64,
}

impl Held {
    pub(super) fn new() -> Self {
        Self {
            messages: VecDeque::new(),
            bytes: 0,
            overrun: false,
            dropped: 0,
        }
    }

    /// Holds a message, or leaves it with the broker, or drops it.
    pub(super) fn push(&mut self, message: Message, received: Timestamp) {
        let size = message.payload.len() + message.topic.len();
        let fits = self.messages.len() < MESSAGES_MAX && self.bytes + size <= BYTES_MAX;
        let guaranteed = message.ticket.is_guaranteed();
        if fits && !(guaranteed && self.overrun) {
            self.bytes += size;
            self.messages.push_back((message, received));
        } else if guaranteed {
            self.overrun = true;
        } else {
            self.dropped += 1;
        }
    }

    /// The oldest message, with its received time.
    pub(super) fn pop(&mut self) -> Option<(Message, Timestamp)> {
        let (message, received) = self.messages.pop_front()?;
        self.bytes -= message.payload.len() + message.topic.len();
        Some((message, received))
    }

    /// Whether nothing waits.
    pub(super) fn is_empty(&self) -> bool {
        self.messages.is_empty()
    }

    /// Whether a new connection is needed to get what was left with the broker.
    pub(super) fn is_overrun(&self) -> bool {
        self.overrun
    }

    /// Messages without guarantee that were dropped.
    pub(super) fn dropped(&self) -> u64 {
        self.dropped
    }

    /// The connection is over: the broker sends every guaranteed message again.
    pub(super) fn forget_guaranteed(&mut self) {
        self.messages
            .retain(|(message, _)| !message.ticket.is_guaranteed());
        self.bytes = self
            .messages
            .iter()
            .map(|(it, _)| it.payload.len() + it.topic.len())
            .sum();
        self.overrun = false;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::broker::Ticket;
    use bytes::Bytes;

    fn message(packet: u16, size: usize) -> Message {
        Message {
            topic: String::new(),
            payload: Bytes::from(vec![0; size]),
            retained: false,
            reply_to: None,
            ticket: Ticket::for_test(packet),
        }
    }

    #[test]
    fn after_one_guaranteed_message_was_left_none_that_follows_is_held() {
        let mut held = Held::new();
        held.push(message(1, BYTES_MAX - 1), Timestamp(0));
        for packet in 2..=4 {
            held.push(message(packet, 1), Timestamp(0));
        }
        assert!(held.is_overrun());
        held.pop().unwrap();
        held.push(message(9, 1), Timestamp(0));
        let rest: Vec<Ticket> = std::iter::from_fn(|| held.pop())
            .map(|it| it.0.ticket)
            .collect();
        assert_eq!(rest, [Ticket::for_test(2)]);
        held.forget_guaranteed();
        assert!(!held.is_overrun());
    }

    #[test]
    fn bytes_are_bounded_and_what_has_no_guarantee_is_counted() {
        let mut held = Held::new();
        held.push(message(0, BYTES_MAX), Timestamp(0));
        held.push(message(0, 1), Timestamp(0));
        assert_eq!((held.dropped(), held.is_overrun()), (1, false));
        held.push(message(1, 1), Timestamp(0));
        assert!(held.is_overrun());
        held.forget_guaranteed();
        assert!(
            held.pop().is_some(),
            "what has no guarantee does not come again and stays"
        );
        held.push(message(1, BYTES_MAX), Timestamp(0));
        assert!(!held.is_overrun(), "room was not given back");
    }
}
