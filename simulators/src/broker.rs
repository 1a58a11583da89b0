//! Delivery to an MQTT broker: quality of service 1, bounded in flight, every message counted once
//! it is acknowledged.

use crate::message::Message;
use holdtrue_engine::time::Timestamp;
use rumqttc::v5::mqttbytes::QoS;
use rumqttc::v5::mqttbytes::v5::{Packet, PubAckReason};
use rumqttc::v5::{AsyncClient, Event, EventLoop, MqttOptions};
use std::collections::VecDeque;
use std::fmt;
use std::future::Future;
use std::pin::pin;
use std::time::Duration;
use tokio::time::{Instant, sleep, sleep_until};

/// Messages under way at once, sent or about to be. Small on purpose: some brokers lower the
/// permitted number, and the client library goes wrong above that.
const UNDER_WAY: usize = 16;
/// First and longest pause between two attempts to connect.
const BACK_OFF: (Duration, Duration) = (Duration::from_millis(200), Duration::from_secs(5));

/// Where the broker is and who we are.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Link {
    /// Host name or address.
    pub host: String,
    /// TCP port.
    pub port: u16,
    /// Client identifier.
    pub client_id: String,
    /// User name and password.
    pub login: Option<(String, String)>,
    /// Give up after this long without a connection.
    pub patience: Duration,
}

/// What is wrong with a broker URL.
#[derive(Debug, PartialEq, Eq)]
pub struct BadUrl(String);

impl fmt::Display for BadUrl {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(
            out,
            "broker URL {:?} is not of the form mqtt://HOST[:PORT]",
            self.0
        )
    }
}

impl std::error::Error for BadUrl {}

impl Link {
    /// A link from a URL `mqtt://HOST[:PORT]`; the port is 1883 by default, an IPv6 address stands
    /// in brackets.
    ///
    /// # Errors
    /// Another scheme, no host, or a port that is none.
    pub fn from_url(url: &str) -> Result<Self, BadUrl> {
        let bad = || BadUrl(url.to_owned());
        let rest = url.strip_prefix("mqtt://").ok_or_else(bad)?;
        let rest = rest.strip_suffix('/').unwrap_or(rest);
        let (host, port) = match rest.rsplit_once(':') {
            Some((host, port)) if !port.contains(']') => (host, port.parse().map_err(|_| bad())?),
            _ => (rest, 1883),
        };
        let bare = host
            .strip_prefix('[')
            .and_then(|host| host.strip_suffix(']'));
        let host = bare.unwrap_or(host);
        if host.is_empty() || host.contains(['/', '@', '[', ']']) {
            return Err(bad());
        }
        if bare.is_none() && host.contains(':') {
            return Err(bad());
        }
        Ok(Self {
            host: host.to_owned(),
            port,
            client_id: format!("plant-{}", std::process::id()),
            login: None,
            patience: Duration::from_secs(20),
        })
    }
}

/// How fast messages go out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Pace {
    /// As fast as the broker acknowledges.
    AsAcknowledged,
    /// By the messages' own times, this many times faster than real.
    Times(f64),
}

/// What became of the messages.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, serde::Serialize)]
pub struct Delivered {
    /// Handed to the broker.
    pub sent: u64,
    /// Acknowledged by it.
    pub acknowledged: u64,
    /// Of the acknowledged, those that it refused (no permission, quota).
    pub refused: u64,
}

/// The broker could not be reached for too long.
#[derive(Debug)]
pub struct Lost {
    /// What had become of the messages.
    pub delivered: Delivered,
    /// What the last attempt said.
    pub cause: String,
}

impl fmt::Display for Lost {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Delivered {
            sent, acknowledged, ..
        } = self.delivered;
        write!(
            out,
            "no connection to the broker ({}); {acknowledged} of {sent} messages acknowledged",
            self.cause
        )
    }
}

impl std::error::Error for Lost {}

/// Sends `messages` in order and waits for every acknowledgement. When `stop` completes, no further
/// message is taken, and what is under way is still waited for. `progress` is told of every
/// acknowledgement.
///
/// # Errors
/// When the broker can't be reached for as long as the link's patience.
pub async fn deliver(
    messages: impl Iterator<Item = Message>,
    link: &Link,
    pace: Pace,
    stop: impl Future<Output = ()>,
    progress: impl FnMut(&Delivered),
) -> Result<Delivered, Lost> {
    let (client, events) = connect(link);
    let mut delivery = Delivery {
        client,
        events,
        under_way: VecDeque::with_capacity(UNDER_WAY),
        connected: false,
        delivered: Delivered::default(),
        progress,
    };
    let mut clock = Clock { pace, began: None };
    let mut messages = messages.peekable();
    let mut stop = pin!(stop);
    let mut stopped = false;
    let mut outage = Outage::new(link.patience);
    loop {
        let mut due = None;
        if delivery.connected && !stopped {
            due = delivery.fill(&mut messages, &mut clock);
        }
        let ended = stopped || messages.peek().is_none();
        if ended && delivery.under_way.is_empty() {
            break;
        }
        tokio::select! {
            // A pause is only waited for while connected: giving up a poll would begin connecting
            // anew.
            () = wake_at(due), if delivery.connected && due.is_some() => {}
            () = &mut stop, if !stopped => stopped = true,
            event = delivery.events.poll() => match event {
                Ok(event) => {
                    if delivery.take(event) {
                        outage.over();
                    }
                }
                Err(error) => {
                    delivery.disconnected();
                    outage.wait(&error.to_string(), delivery.delivered).await?;
                }
            },
        }
    }
    delivery.say_goodbye().await;
    Ok(delivery.delivered)
}

/// The client with the settings that publishing needs.
fn connect(link: &Link) -> (AsyncClient, EventLoop) {
    let mut options = MqttOptions::new(&link.client_id, &link.host, link.port);
    options.set_keep_alive(Duration::from_secs(15));
    options.set_connection_timeout(5);
    options.set_outgoing_inflight_upper_limit(16);
    if let Some((user, password)) = &link.login {
        options.set_credentials(user, password);
    }
    AsyncClient::new(options, UNDER_WAY)
}

/// The messages under way and what has become of those before.
struct Delivery<P> {
    client: AsyncClient,
    events: EventLoop,
    /// Not yet acknowledged, oldest first; sent again when the broker has forgotten the session.
    under_way: VecDeque<Message>,
    connected: bool,
    delivered: Delivered,
    progress: P,
}

impl<P: FnMut(&Delivered)> Delivery<P> {
    /// Takes messages until enough are under way or the next is not due yet; then says when it is.
    fn fill(
        &mut self,
        messages: &mut std::iter::Peekable<impl Iterator<Item = Message>>,
        clock: &mut Clock,
    ) -> Option<Instant> {
        while self.under_way.len() < UNDER_WAY {
            let due = clock.due(messages.peek()?.at);
            if due.is_some_and(|due| due > Instant::now()) {
                return due;
            }
            let message = messages.next()?;
            self.send(&message);
            self.under_way.push_back(message);
            self.delivered.sent += 1;
        }
        None
    }

    /// Hands one message to the client.
    fn send(&self, message: &Message) {
        let payload = message.payload.clone();
        // The client's queue holds as many as may be under way, so it is never full here.
        let handed = self
            .client
            .try_publish(&message.topic, QoS::AtLeastOnce, false, payload);
        debug_assert!(
            handed.is_ok(),
            "the client's queue is as long as the list under way"
        );
    }

    /// Looks at one event; true if it is a new connection.
    fn take(&mut self, event: Event) -> bool {
        match event {
            Event::Incoming(Packet::ConnAck(answer)) => {
                self.connected = true;
                if !answer.session_present {
                    // The client forgot what was under way together with the broker.
                    for message in &self.under_way {
                        self.send(message);
                    }
                }
                return true;
            }
            Event::Incoming(Packet::PubAck(answer)) => self.acknowledged(answer.reason),
            _ => {}
        }
        false
    }

    /// The oldest message under way is acknowledged: brokers answer in order (MQTT 5.0, 4.6).
    fn acknowledged(&mut self, reason: PubAckReason) {
        if self.under_way.pop_front().is_none() {
            return;
        }
        self.delivered.acknowledged += 1;
        if !matches!(
            reason,
            PubAckReason::Success | PubAckReason::NoMatchingSubscribers
        ) {
            self.delivered.refused += 1;
        }
        (self.progress)(&self.delivered);
    }

    /// After a broken connection: takes the answers that had arrived before it broke.
    fn disconnected(&mut self) {
        self.connected = false;
        let left: Vec<Event> = self.events.state.events.drain(..).collect();
        for event in left {
            if matches!(event, Event::Incoming(Packet::PubAck(_))) {
                self.take(event);
            }
        }
    }

    /// Ends the connection properly; a broker that does not listen any more is no failure, since
    /// everything is acknowledged.
    async fn say_goodbye(&mut self) {
        if self.client.try_disconnect().is_err() {
            return;
        }
        let goodbye = async {
            while let Ok(event) = self.events.poll().await {
                if matches!(event, Event::Outgoing(rumqttc::Outgoing::Disconnect)) {
                    break;
                }
            }
        };
        let _ = tokio::time::timeout(Duration::from_secs(2), goodbye).await;
    }
}

/// When messages are due.
struct Clock {
    pace: Pace,
    began: Option<(Instant, Timestamp)>,
}

impl Clock {
    /// When a message with this time is due; `None`: at once.
    fn due(&mut self, at: Timestamp) -> Option<Instant> {
        let Pace::Times(speed) = self.pace else {
            return None;
        };
        let (began, first) = *self.began.get_or_insert_with(|| (Instant::now(), at));
        let seconds = (at.since(first).seconds() / speed).max(0.0);
        Some(began + Duration::try_from_secs_f64(seconds).unwrap_or(Duration::MAX / 4))
    }
}

/// Completes at `due`, or never.
async fn wake_at(due: Option<Instant>) {
    match due {
        Some(due) => sleep_until(due).await,
        None => std::future::pending().await,
    }
}

/// How long the connection has been away.
struct Outage {
    patience: Duration,
    since: Instant,
    pause: Duration,
}

impl Outage {
    fn new(patience: Duration) -> Self {
        Self {
            patience,
            since: Instant::now(),
            pause: BACK_OFF.0,
        }
    }

    /// The connection is back.
    fn over(&mut self) {
        self.pause = BACK_OFF.0;
    }

    /// Waits before the next attempt, unless it has taken too long.
    async fn wait(&mut self, cause: &str, delivered: Delivered) -> Result<(), Lost> {
        if self.pause == BACK_OFF.0 {
            self.since = Instant::now();
        }
        if self.since.elapsed() >= self.patience {
            return Err(Lost {
                delivered,
                cause: cause.to_owned(),
            });
        }
        sleep(self.pause).await;
        self.pause = (self.pause * 2).min(BACK_OFF.1);
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn urls_name_a_host_and_a_port() {
        let cases = [
            ("mqtt://127.0.0.1:1884", Some(("127.0.0.1", 1884))),
            ("mqtt://broker.local", Some(("broker.local", 1883))),
            ("mqtt://[::1]:1900/", Some(("::1", 1900))),
            ("mqtt://[::1]", Some(("::1", 1883))),
            ("http://127.0.0.1", None),
            ("mqtt://", None),
            ("mqtt://host:port", None),
            ("mqtt://::1", None),
            ("mqtt://host/path", None),
            ("127.0.0.1:1883", None),
        ];
        for (url, expected) in cases {
            let link = Link::from_url(url).ok();
            let found = link.as_ref().map(|link| (link.host.as_str(), link.port));
            assert_eq!(found, expected, "{url}");
        }
    }
}
