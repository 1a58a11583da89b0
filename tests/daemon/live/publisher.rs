//! A publisher that knows which of its messages the broker acknowledged, over broker restarts.

use rumqttc::{AsyncClient, Event, EventLoop, Incoming, MqttOptions, Outgoing, QoS};
use std::collections::{BTreeMap, BTreeSet, VecDeque};
use std::time::Duration;

/// Publishes payloads in order, a few at a time, on one topic.
pub(crate) struct Publisher {
    client: AsyncClient,
    events: EventLoop,
    topic: String,
    unsent: VecDeque<usize>,
    in_flight: BTreeMap<u16, usize>,
    acknowledged: BTreeSet<usize>,
}

impl Publisher {
    /// For the broker at `port`.
    pub(crate) fn new(port: u16, topic: &str) -> Self {
        let mut options = MqttOptions::new("test-publisher", "127.0.0.1", port);
        options
            .set_clean_session(true)
            .set_keep_alive(Duration::from_secs(5));
        let (client, events) = AsyncClient::new(options, 8);
        Self {
            client,
            events,
            topic: topic.to_owned(),
            unsent: VecDeque::new(),
            in_flight: BTreeMap::new(),
            acknowledged: BTreeSet::new(),
        }
    }

    /// Publishes all payloads, at most `window` unacknowledged; calls `meanwhile` with the number
    /// of acknowledged ones. Returns the positions of those that the broker acknowledged: what was
    /// on its way when a connection broke is not sent again and may or may not have arrived.
    pub(crate) async fn publish_all(
        mut self,
        payloads: &[String],
        window: usize,
        mut meanwhile: impl FnMut(usize),
    ) -> BTreeSet<usize> {
        let mut next = 0;
        let limit = tokio::time::Instant::now() + super::LIMIT;
        loop {
            while next < payloads.len() && self.unsent.len() + self.in_flight.len() < window {
                let payload = payloads[next].clone();
                if self
                    .client
                    .try_publish(&self.topic, QoS::AtLeastOnce, false, payload)
                    .is_err()
                {
                    break;
                }
                self.unsent.push_back(next);
                next += 1;
            }
            if next == payloads.len() && self.unsent.is_empty() && self.in_flight.is_empty() {
                return self.acknowledged;
            }
            match tokio::time::timeout_at(limit, self.events.poll())
                .await
                .unwrap()
            {
                Ok(Event::Outgoing(Outgoing::Publish(packet))) => {
                    let position = self.unsent.pop_front().unwrap();
                    self.in_flight.insert(packet, position);
                }
                Ok(Event::Incoming(Incoming::PubAck(answer))) => {
                    self.acknowledged
                        .extend(self.in_flight.remove(&answer.pkid));
                    meanwhile(self.acknowledged.len());
                }
                Ok(_) => {}
                Err(_) => {
                    // Of what was on its way, nobody knows. The client must not send it again.
                    self.events.clean();
                    self.events.pending.clear();
                    self.events.state.events.clear();
                    self.unsent.clear();
                    self.in_flight.clear();
                    tokio::time::sleep(Duration::from_millis(50)).await;
                }
            }
        }
    }
}
