//! One session across connections: messages in, acknowledgements and documents out.

use super::back_off::BackOff;
use super::client::{self, Client, Full, Poller, Seen};
use super::tls::{self, TlsError};
use super::traffic::{Event, Lost, Message, Publish, Ticket, Token, Will};
use crate::configuration::{Broker, Protocol};
use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;
use std::time::Duration;
use tokio::sync::mpsc;
use tokio::task::JoinHandle;
use tokio::time::Instant;
use tokio_rustls::rustls::ClientConfig;

/// Publishes handed over and not yet answered. Below the library's own limit, so that its queue
/// never stops on their account.
const IN_FLIGHT_MAX: usize = 12;
/// Events between the polling task and us. When full, polling waits, and with it the network: the
/// broker keeps what does not fit.
const EVENTS_MAX: usize = 64;
/// Without an answer to any publish for this long, a new connection is made.
const ANSWER_LIMIT: Duration = Duration::from_secs(30);
/// A connection that lived this long was a success: pauses start short again.
const GOOD_LIFE: Duration = Duration::from_mins(1);
/// When the library's queue is full, the next attempt comes after this long at the latest.
const QUEUE_RETRY: Duration = Duration::from_millis(5);
/// Filters in one subscription packet; keeps it small for brokers with low packet limits.
const FILTERS_IN_PACKET: usize = 50;
/// Bytes of a publish packet beside topic, payload and what belongs to requests, at most (MQTT 5.0,
/// 3.3: header, identifier, the properties we use).
const PACKET_OVERHEAD: usize = 32;
/// What a broker with MQTT 3.1.1 sends without acknowledgement: it can't be told, and 20 is the
/// default of Mosquitto (`max_inflight_messages`).
const WINDOW_311: u16 = 20;

/// A subscription packet.
#[derive(Clone, Debug)]
enum Ask {
    Subscribe(Vec<String>),
    Unsubscribe(String),
}

/// The session.
pub struct Link {
    broker: Broker,
    tls: Option<Arc<ClientConfig>>,
    will: Option<Box<dyn Fn() -> Will + Send>>,
    /// The filter whose messages keep the retain flag that they were published with.
    as_published: Option<String>,
    /// Counts connections; what belongs to an older one is dropped.
    connection: u64,
    client: Option<Client>,
    polling: Option<JoinHandle<()>>,
    events: mpsc::Receiver<Seen>,
    connected: Option<Instant>,
    max_packet: Option<u32>,
    back_off: BackOff,
    next_try: Option<Instant>,
    /// Packet identifiers to acknowledge, in order of arrival; bounded by what came in.
    acknowledgements: VecDeque<u16>,
    /// Handed over, packet identifier not yet known; with `in_flight` at most [`IN_FLIGHT_MAX`].
    unsent: VecDeque<Token>,
    in_flight: BTreeMap<u16, Token>,
    /// When the broker last answered a publish, or had none to answer.
    answered: Instant,
    /// Subscription packets to send; bounded by the configuration.
    asks: VecDeque<Ask>,
    /// Filters in subscription packets not yet answered, in order.
    subscribing: VecDeque<Vec<String>>,
    refused_filters: Vec<(String, String)>,
    goodbye_said: bool,
}

impl Link {
    /// A link that will connect as soon as [`Link::next`] is called.
    ///
    /// # Errors
    /// When encryption is configured and its files can't be used.
    pub fn new(broker: Broker) -> Result<Self, TlsError> {
        let tls = broker.tls.as_ref().map(tls::client_config).transpose()?;
        Ok(Self {
            broker,
            tls,
            will: None,
            as_published: None,
            connection: 0,
            client: None,
            polling: None,
            events: mpsc::channel(1).1,
            connected: None,
            max_packet: None,
            back_off: BackOff::default(),
            next_try: Some(Instant::now()),
            acknowledgements: VecDeque::new(),
            unsent: VecDeque::new(),
            in_flight: BTreeMap::new(),
            answered: Instant::now(),
            asks: VecDeque::new(),
            subscribing: VecDeque::new(),
            refused_filters: Vec::new(),
            goodbye_said: false,
        })
    }

    /// Has the broker publish a will when the connection breaks; it is asked for at every
    /// connection.
    #[must_use]
    pub fn with_will(mut self, will: impl Fn() -> Will + Send + 'static) -> Self {
        self.will = Some(Box::new(will));
        self
    }

    /// Has messages that match `filter` bear the retain flag with which they were published, also
    /// those that come while we are subscribed. (MQTT 5.0, 3.8.3.1, *retain as published*.)
    #[must_use]
    pub fn with_retain_as_published(mut self, filter: String) -> Self {
        self.as_published = Some(filter);
        self
    }

    /// How many messages the broker sends before it waits for acknowledgements.
    #[must_use]
    pub fn receive_window(&self) -> u16 {
        match self.broker.protocol {
            Protocol::V5 => self.broker.receive_maximum,
            Protocol::V311 => self.broker.receive_maximum.min(WINDOW_311),
        }
    }

    /// Whether there is a connection now.
    #[must_use]
    pub fn is_connected(&self) -> bool {
        self.connected.is_some()
    }

    /// How many documents can be handed over now.
    #[must_use]
    pub fn room(&self) -> usize {
        if self.connected.is_none() || !self.acknowledgements.is_empty() {
            return 0;
        }
        IN_FLIGHT_MAX.saturating_sub(self.outstanding())
    }

    /// Documents handed over and not answered.
    #[must_use]
    pub fn outstanding(&self) -> usize {
        self.unsent.len() + self.in_flight.len()
    }

    /// Whether everything handed over has gone, and every document was answered.
    #[must_use]
    pub fn is_quiet(&self) -> bool {
        self.acknowledgements.is_empty() && self.asks.is_empty() && self.outstanding() == 0
    }

    /// Whether the broker takes a publish of this size; one above its limit would end the
    /// connection, again and again.
    #[must_use]
    pub fn fits(&self, publish: &Publish<'_>) -> bool {
        let request = publish.response_topic.map_or(0, str::len);
        let correlation = publish.correlation.map_or(0, <[u8]>::len);
        let size =
            publish.topic.len() + publish.payload.len() + request + correlation + PACKET_OVERHEAD;
        self.max_packet
            .is_none_or(|limit| u32::try_from(size).is_ok_and(|size| size <= limit))
    }

    /// Acknowledges a message. Tickets must be given back in the order of arrival; those of older
    /// connections are void, since the broker sends their messages again.
    pub fn acknowledge(&mut self, ticket: Ticket) {
        if ticket.connection == self.connection && ticket.is_guaranteed() {
            self.acknowledgements.push_back(ticket.packet);
        }
    }

    /// Hands a document over; false when there was no room.
    pub fn publish(&mut self, token: Token, publish: &Publish<'_>) -> bool {
        if self.room() == 0 {
            return false;
        }
        let Some(client) = &self.client else {
            return false;
        };
        if client.publish(publish).is_err() {
            return false;
        }
        if self.outstanding() == 0 {
            self.answered = Instant::now();
        }
        self.unsent.push_back(token);
        true
    }

    /// Subscribes to `filters` and ends the subscriptions to `old`.
    pub fn subscribe(&mut self, filters: &[String], old: &[String]) {
        if self.connected.is_some() {
            self.asks.extend(old.iter().cloned().map(Ask::Unsubscribe));
            self.asks.extend(
                filters
                    .chunks(FILTERS_IN_PACKET)
                    .map(|it| Ask::Subscribe(it.to_vec())),
            );
        }
    }

    /// Gives a working connection up and makes a new one, after the shortest pause: nothing failed.
    pub fn reconnect(&mut self, why: &str) -> Lost {
        self.drop_connection();
        self.back_off.reset();
        self.fail(why.to_owned(), false)
    }

    /// Waits for what happens next. Dropping the future loses nothing.
    pub async fn next(&mut self) -> Event {
        let mut was_full = false;
        loop {
            self.send_waiting();
            let full = !self.acknowledgements.is_empty() || !self.asks.is_empty();
            if was_full && !full {
                return Event::Ready;
            }
            was_full = full;
            let stalled = self.answered + ANSWER_LIMIT;
            tokio::select! {
                seen = self.events.recv(), if self.client.is_some() => {
                    let seen = seen.unwrap_or(Seen::Broken {
                        why: "the polling task ended".to_owned(),
                        taken_over: false,
                    });
                    if let Some(event) = self.handle(seen) {
                        return event;
                    }
                }
                () = sleep_until(self.next_try), if self.client.is_none() => self.connect(),
                () = tokio::time::sleep(QUEUE_RETRY), if full => {}
                () = tokio::time::sleep_until(stalled), if self.outstanding() > 0 => {
                    self.drop_connection();
                    let why = "the broker answers no publish any more".to_owned();
                    return Event::Lost(self.fail(why, false));
                }
            }
        }
    }

    /// Says goodbye and waits until that is on its way, at most for `limit`. What comes in
    /// meanwhile is not taken: the broker keeps it.
    pub async fn goodbye(&mut self, limit: Duration) {
        self.send_waiting();
        let said = self
            .client
            .as_ref()
            .is_some_and(|client| client.goodbye().is_ok());
        if said && self.is_connected() {
            let _ = tokio::time::timeout(limit, async {
                while !self.goodbye_said {
                    match self.events.recv().await {
                        Some(Seen::SaidGoodbye) => self.goodbye_said = true,
                        Some(Seen::Broken { .. }) | None => break,
                        Some(_) => {}
                    }
                }
                // The polling task ends after the goodbye and closes the connection.
                if let Some(polling) = self.polling.take() {
                    let _ = polling.await;
                }
            })
            .await;
        }
        self.drop_connection();
    }

    /// Cuts the connection without a goodbye: the broker publishes the will.
    pub fn cut(&mut self) {
        self.drop_connection();
        self.connected = None;
    }

    fn connect(&mut self) {
        self.connection += 1;
        let will = self.will.as_ref().map(|will| will());
        let (client, poller) = client::new(&self.broker, self.tls.clone(), will);
        let (sender, events) = mpsc::channel(EVENTS_MAX);
        self.client = Some(client);
        self.events = events;
        self.polling = Some(tokio::spawn(poll(poller, sender)));
        self.next_try = None;
    }

    fn drop_connection(&mut self) {
        if let Some(polling) = self.polling.take() {
            polling.abort();
        }
        self.client = None;
        self.acknowledgements.clear();
        self.unsent.clear();
        self.in_flight.clear();
        self.asks.clear();
        self.subscribing.clear();
        self.refused_filters.clear();
    }

    fn fail(&mut self, why: String, taken_over: bool) -> Lost {
        let lived = self.connected.take().map(|since| since.elapsed());
        // Two daemons with one client name would otherwise throw each other out five times a
        // second.
        if lived.is_some_and(|lived| lived >= GOOD_LIFE) {
            self.back_off.reset();
        }
        let pause = self.back_off.next_pause();
        self.next_try = Some(Instant::now() + pause);
        Lost {
            why,
            taken_over,
            failures: self.back_off.failures(),
            next_try: pause,
        }
    }

    /// Hands acknowledgements and subscriptions to the library, as many as its queue takes. Until
    /// all have gone there is no room for documents.
    pub fn send_waiting(&mut self) {
        let Some(client) = &self.client else { return };
        while let Some(packet) = self.acknowledgements.front() {
            if client.acknowledge(*packet).is_err() {
                return;
            }
            self.acknowledgements.pop_front();
        }
        while let Some(ask) = self.asks.pop_front() {
            let sent = match &ask {
                Ask::Subscribe(filters) => client.subscribe(filters, self.as_published.as_deref()),
                Ask::Unsubscribe(filter) => client.unsubscribe(filter),
            };
            match (sent, ask) {
                (Err(Full), ask) => return self.asks.push_front(ask),
                (Ok(()), Ask::Subscribe(filters)) => self.subscribing.push_back(filters),
                (Ok(()), Ask::Unsubscribe(_)) => {}
            }
        }
    }

    fn handle(&mut self, seen: Seen) -> Option<Event> {
        match seen {
            Seen::Connected {
                session_present,
                max_packet,
            } => {
                self.connected = Some(Instant::now());
                self.max_packet = max_packet;
                Some(Event::Connected { session_present })
            }
            Seen::Message {
                topic,
                payload,
                retained,
                reply_to,
                packet,
            } => {
                let ticket = Ticket {
                    connection: self.connection,
                    packet,
                };
                Some(Event::Message(Message {
                    topic,
                    payload,
                    retained,
                    reply_to,
                    ticket,
                }))
            }
            Seen::Sent { packet } => {
                let token = self.unsent.pop_front()?;
                self.in_flight.insert(packet, token)?;
                // The library holds the older publish back and sends this one in its place; whose
                // answer comes next can't be told any more.
                self.drop_connection();
                let why = format!("packet identifier {packet} was used twice");
                Some(Event::Lost(self.fail(why, false)))
            }
            Seen::Answered { packet, answer } => {
                self.answered = Instant::now();
                self.in_flight
                    .remove(&packet)
                    .map(|token| Event::Answered(token, answer))
            }
            Seen::Subscribed(answers) => self.handle_subscribed(answers),
            Seen::Broken { why, taken_over } => {
                self.drop_connection();
                Some(Event::Lost(self.fail(why, taken_over)))
            }
            Seen::SaidGoodbye | Seen::Nothing => None,
        }
    }

    fn handle_subscribed(&mut self, answers: Vec<Option<String>>) -> Option<Event> {
        let filters = self.subscribing.pop_front()?;
        for (filter, answer) in filters.into_iter().zip(answers) {
            self.refused_filters.extend(answer.map(|why| (filter, why)));
        }
        (self.subscribing.is_empty() && self.asks.is_empty()).then(|| Event::Subscribed {
            refused: std::mem::take(&mut self.refused_filters),
        })
    }
}

impl Drop for Link {
    fn drop(&mut self) {
        self.drop_connection();
    }
}

async fn sleep_until(instant: Option<Instant>) {
    match instant {
        Some(instant) => tokio::time::sleep_until(instant).await,
        None => std::future::pending().await,
    }
}

/// Polls one connection to its end. A task of its own, since a cancelled poll would start
/// connecting anew.
async fn poll(mut poller: Poller, events: mpsc::Sender<Seen>) {
    loop {
        let seen = poller.poll().await;
        let last = matches!(seen, Seen::Broken { .. } | Seen::SaidGoodbye);
        let matters = !matches!(seen, Seen::Nothing);
        if (matters && events.send(seen).await.is_err()) || last {
            return;
        }
    }
}
