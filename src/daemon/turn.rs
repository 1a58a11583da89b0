//! The loop that everything happens in.
//!
//! One turn: hand over what may go, wait for the broker or the clock, take what came, commit when
//! it is time. Commits block the loop on purpose: nothing may overtake them, and the connection
//! survives a disk that is slow for a few seconds.

use super::held::Held;
use super::report::{LoopFigures, StateRhythm, state_document};
use super::shell::Shell;
use super::{Error, now};
use crate::broker::{BackOff, Event, Link, Lost, Message, Ticket, Token, Will};
use crate::configuration::Configuration;
use crate::document::state::{Doing, StateDocument};
use crate::document::topic::Topics;
use crate::record::RecordError;
use holdtrue_engine::event::Input;
use holdtrue_engine::time::Timestamp;
use std::collections::BTreeSet;
use std::future::Future;
use std::time::Duration;
use tokio::time::Instant;

/// A batch with this many inputs is committed even if few messages brought them (packs).
const BATCH_INPUTS_MAX: usize = 10_000;
/// The engine is asked at most this often when it wants its next tick: asking walks all channels.
const TICK_ASK_EVERY: Duration = Duration::from_millis(250);
/// How long the goodbye waits for the broker to take what waits in the outbox, for the last state
/// document, and for the goodbye itself.
const DRAIN_LIMIT: Duration = Duration::from_secs(5);
const LAST_STATE_LIMIT: Duration = Duration::from_secs(2);
const GOODBYE_LIMIT: Duration = Duration::from_secs(2);
/// Short-lived connections in a row after which a shared client name is suspected.
const SUSPICIOUS_FAILURES: u32 = 4;

/// The daemon at work.
pub(super) struct Daemon {
    shell: Shell,
    link: Link,
    client_id: String,
    held: Held,
    /// Messages taken since the last commit; their acknowledgements wait for it.
    tickets: Vec<Ticket>,
    messages_max: usize,
    commit_every: Duration,
    /// When the oldest thing came that the next commit will write.
    news_since: Option<Instant>,
    pause: Option<Pause>,
    rhythm: StateRhythm,
    figures: LoopFigures,
    refused_topics: BTreeSet<String>,
    /// When the engine wants a tick, as of the last time it was asked.
    next_tick: Option<Timestamp>,
    tick_asked: Instant,
}

/// The record can't be written.
struct Pause {
    why: String,
    back_off: BackOff,
    retry: Instant,
}

impl Daemon {
    /// Opens the record, restores the engine, prepares the link.
    pub(super) fn start(configuration: Configuration) -> Result<Self, Error> {
        let shell = Shell::start(&configuration, now())?;
        let (node, fingerprint) = (shell.setup.node.clone(), shell.setup.fingerprint.clone());
        let client_id = configuration.broker.client_id.clone();
        tracing::info!(
            node,
            broker = %format_args!("{}:{}", configuration.broker.host, configuration.broker.port),
            client_id,
            "holdtrue {} starts",
            env!("CARGO_PKG_VERSION")
        );
        let link = Link::new(configuration.broker, move || Will {
            topic: Topics::new(&node).state(),
            payload: StateDocument::new(&node, &fingerprint, Doing::Lost, now()).to_json(),
        })?;
        let window = link.receive_window();
        Ok(Self {
            shell,
            client_id,
            held: Held::new(),
            tickets: Vec::new(),
            messages_max: usize::from(window / 2).max(1),
            commit_every: configuration.record.commit,
            news_since: None,
            pause: None,
            rhythm: StateRhythm::new(),
            figures: LoopFigures::default(),
            refused_topics: BTreeSet::new(),
            next_tick: None,
            tick_asked: Instant::now(),
            link,
        })
    }

    /// Works until `shutdown` completes.
    pub(super) async fn run(mut self, shutdown: impl Future<Output = ()>) {
        tokio::pin!(shutdown);
        self.ask_tick();
        loop {
            self.hand_over();
            let wake = self.next_wake();
            tokio::select! {
                biased;
                () = &mut shutdown => break,
                event = self.link.next() => self.handle(event),
                () = tokio::time::sleep_until(wake) => {}
            }
            self.do_what_is_due();
        }
        self.finish().await;
    }

    fn handle(&mut self, event: Event) {
        match event {
            Event::Message(message) => self.take_or_hold(message),
            Event::Answered(token, refused) => self.settle(token, refused),
            Event::Connected { session_present } => self.greet(session_present),
            Event::Subscribed { refused } => self.note_subscribed(&refused),
            Event::Lost(lost) => self.note_lost(&lost),
            // The next turn hands over.
            Event::Ready => {}
        }
    }

    fn may_take(&self) -> bool {
        self.pause.is_none() && !self.shell.outbox.is_full()
    }

    fn take_or_hold(&mut self, message: Message) {
        let received = now();
        if self.may_take() && self.held.is_empty() && !self.held.is_overrun() {
            self.take(&message, received);
        } else {
            self.held.push(message, received);
        }
    }

    fn take(&mut self, message: &Message, received: Timestamp) {
        self.shell
            .take_message(&message.topic, &message.payload, message.retained, received);
        self.tickets.push(message.ticket);
        self.news_since.get_or_insert_with(Instant::now);
        if self.tickets.len() >= self.messages_max || self.shell.uncommitted() >= BATCH_INPUTS_MAX {
            self.commit();
        }
    }

    fn do_what_is_due(&mut self) {
        let clock = Instant::now();
        match &self.pause {
            Some(pause) if clock >= pause.retry => self.commit(),
            Some(_) => {}
            None => {
                self.tick();
                if self
                    .news_since
                    .is_some_and(|since| clock >= since + self.commit_every)
                {
                    self.commit();
                }
            }
        }
        while self.may_take() {
            let Some((message, received)) = self.held.pop() else {
                break;
            };
            self.take(&message, received);
        }
        if self.may_take() && self.held.is_overrun() {
            let lost = self
                .link
                .reconnect("to get again what had to stay with the broker");
            self.note_lost(&lost);
        }
        if self.shell.has_news() {
            self.news_since.get_or_insert(clock);
        }
    }

    fn tick(&mut self) {
        if self.tick_asked.elapsed() >= TICK_ASK_EVERY {
            self.ask_tick();
        }
        let now = now();
        if self.next_tick.is_some_and(|wanted| wanted <= now) {
            self.shell.take(&Input::Tick { now }, &[]);
            self.ask_tick();
        }
    }

    fn ask_tick(&mut self) {
        self.next_tick = self.shell.engine.next_tick();
        self.tick_asked = Instant::now();
    }

    fn next_wake(&self) -> Instant {
        let clock = Instant::now();
        let tick = self.next_tick.map(|wanted| {
            let wait = u64::try_from(wanted.since(now()).0).unwrap_or(0);
            // A tick that was just taken may want the next one at once; that is no reason to spin.
            clock + Duration::from_nanos(wait).max(Duration::from_millis(1))
        });
        let asked = self.tick_asked + TICK_ASK_EVERY;
        let working = self.pause.is_none();
        let times = [
            self.pause.as_ref().map(|pause| pause.retry),
            self.news_since
                .map(|since| since + self.commit_every)
                .filter(|_| working),
            tick.filter(|_| working),
            // New readings change what the engine wants; they are news, so a turn comes anyway.
            self.news_since.map(|_| asked).filter(|_| working),
            self.rhythm.due().filter(|_| self.link.room() > 0),
        ];
        times
            .into_iter()
            .flatten()
            .min()
            .unwrap_or(clock + Duration::from_hours(1))
    }

    /// Writes the batch; then its messages are acknowledged and its documents may go.
    fn commit(&mut self) {
        match self.shell.commit() {
            Ok(()) => {
                self.news_since = None;
                for ticket in self.tickets.drain(..) {
                    self.link.acknowledge(ticket);
                }
                if let Some(pause) = self.pause.take() {
                    tracing::info!(cause = pause.why, "record can be written again; going on");
                    self.rhythm.change();
                }
                self.ask_tick();
            }
            Err(error) => self.pause_for(&error),
        }
    }

    fn pause_for(&mut self, error: &RecordError) {
        let why = error.to_string();
        let pause = self.pause.get_or_insert_with(|| {
            tracing::error!(
                why,
                "the record can't be written: nothing is taken or acknowledged until it can, the \
                 broker queues. Is the disk full or read-only?"
            );
            self.rhythm.change();
            Pause {
                why: why.clone(),
                back_off: BackOff::default(),
                retry: Instant::now(),
            }
        });
        pause.why = why;
        let wait = pause.back_off.next_pause();
        pause.retry = Instant::now() + wait;
        tracing::debug!(next_try = ?wait, "record still can't be written");
    }

    /// Hands documents and the state document to the link, as long as it has room.
    fn hand_over(&mut self) {
        // Acknowledgements first: until they have gone, the link takes no document.
        self.link.send_waiting();
        // The state goes first: it is the one that must come through when much waits.
        if self.rhythm.due().is_some_and(|due| due <= Instant::now()) {
            self.hand_over_state();
        }
        self.hand_over_documents();
    }

    fn hand_over_documents(&mut self) {
        while self.link.room() > 0 {
            let Some((number, document)) = self.shell.outbox.next_to_hand() else {
                return;
            };
            let expiry = match document.expires.map(seconds_until) {
                Some(None) => {
                    self.shell.settle(number);
                    continue;
                }
                Some(seconds) => seconds,
                None => None,
            };
            if !self.link.fits(&document.topic, &document.payload) {
                self.refuse(number, "larger than the broker's packet limit");
                continue;
            }
            let token = Token::Document(number);
            let (topic, payload) = (&document.topic, &document.payload);
            if !self
                .link
                .publish(token, topic, payload, document.retain, expiry)
            {
                return;
            }
            self.shell.outbox.set_handed(number);
        }
    }

    fn hand_over_state(&mut self) {
        let (doing, why) = match &self.pause {
            Some(pause) => (Doing::RecordPaused, Some(pause.why.clone())),
            None => (Doing::Running, None),
        };
        if self.publish_state(doing, why) {
            self.rhythm.handed();
        }
    }

    fn publish_state(&mut self, doing: Doing, why: Option<String>) -> bool {
        if self.link.room() == 0 {
            return false;
        }
        let figures = LoopFigures {
            messages_dropped: self.held.dropped(),
            ..self.figures
        };
        let (document, mut standing) = state_document(&self.shell, doing, why, figures, now());
        let topic = Topics::new(&self.shell.setup.node).state();
        let mut payload = document.clone().with(standing.clone()).to_json();
        if !self.link.fits(&topic, &payload) {
            standing.channels = None;
            payload = document.with(standing).to_json();
        }
        self.link
            .publish(Token::State, &topic, &payload, true, None)
    }

    fn settle(&mut self, token: Token, refused: Option<String>) {
        match (token, refused) {
            (Token::State, refused) => {
                self.rhythm.answered();
                if let Some(why) = refused {
                    tracing::error!(why, "the broker refuses the state document");
                }
            }
            (Token::Document(number), None) => drop(self.shell.settle(number)),
            (Token::Document(number), Some(why)) => self.refuse(number, &why),
        }
    }

    fn refuse(&mut self, number: i64, why: &str) {
        self.figures.documents_refused += 1;
        let Some(document) = self.shell.settle(number) else {
            return;
        };
        // Once for each topic: a missing permission concerns every document. Bounded by the
        // configuration's channels and alarms.
        if self.refused_topics.insert(document.topic.clone()) {
            tracing::error!(
                topic = document.topic,
                why,
                "the broker refuses a document; it and those like it stay in the record only. May \
                 this client publish there?"
            );
        }
    }

    fn greet(&mut self, session_present: bool) {
        self.figures.connections += 1;
        tracing::info!(session_present, "connected to the broker");
        let filters = self.shell.filters().to_vec();
        let confirmed = self.shell.record.subscriptions().unwrap_or_else(|error| {
            tracing::warn!(%error, "subscribing anew");
            BTreeSet::new()
        });
        let wanted: BTreeSet<String> = filters.iter().cloned().collect();
        if !session_present {
            self.link.subscribe(&filters, &[]);
        } else if wanted != confirmed {
            let old: Vec<String> = confirmed.difference(&wanted).cloned().collect();
            self.link.subscribe(&filters, &old);
        }
        if !session_present && self.pause.is_none() {
            match self.shell.publish_standing(now()) {
                Ok(0) => {}
                Ok(documents) => tracing::info!(
                    documents,
                    "the broker has lost our session; publishing all retained documents again"
                ),
                Err(error) => tracing::warn!(%error, "retained documents not published again"),
            }
        }
        self.rhythm.change();
    }

    fn note_subscribed(&mut self, refused: &[(String, String)]) {
        for (filter, why) in refused {
            tracing::error!(filter, why, "the broker refuses this subscription");
        }
        let without = |filter: &&String| !refused.iter().any(|(refused, _)| refused == *filter);
        let confirmed: BTreeSet<String> = self
            .shell
            .filters()
            .iter()
            .filter(without)
            .cloned()
            .collect();
        tracing::info!(filters = confirmed.len(), "subscribed");
        if let Err(error) = self.shell.record.set_subscriptions(&confirmed) {
            tracing::warn!(%error, "subscriptions not noted; the next start subscribes again");
        }
    }

    fn note_lost(&mut self, lost: &Lost) {
        self.shell.outbox.hand_again();
        self.held.forget_guaranteed();
        self.rhythm.answered();
        let next_try = lost.next_try;
        if lost.taken_over {
            tracing::error!(
                client_id = self.client_id,
                ?next_try,
                "another client with our client_id took the session: two daemons must not share \
                 one; give each its own [broker] client_id"
            );
        } else {
            tracing::warn!(why = lost.why, ?next_try, "no connection to the broker");
        }
        if !lost.taken_over && lost.failures == SUSPICIOUS_FAILURES && self.figures.connections > 1
        {
            tracing::warn!(
                client_id = self.client_id,
                "connections break again and again; does another client use our client_id?"
            );
        }
    }

    /// The orderly end: record, publish, wait for the broker, say goodbye.
    async fn finish(mut self) {
        self.commit();
        let limit = Instant::now() + DRAIN_LIMIT;
        self.wait_for(limit, |daemon| {
            daemon.shell.outbox.len() == 0 && daemon.link.outstanding() == 0
        })
        .await;
        let why = self.pause.as_ref().map(|pause| pause.why.clone());
        if self.publish_state(Doing::Stopped, why) {
            self.rhythm.handed();
            let limit = Instant::now() + LAST_STATE_LIMIT;
            self.wait_for(limit, |daemon| !daemon.rhythm.is_on_its_way())
                .await;
        }
        self.link.goodbye(GOODBYE_LIMIT).await;
        self.commit();
        if self.pause.is_some() {
            tracing::error!(
                messages = self.tickets.len(),
                "ending without a record of the last messages; the broker still has them"
            );
        }
        tracing::info!(outbox = self.shell.outbox.len(), "goodbye");
    }

    /// Lets the link work until `done` or `limit`, or until there is no connection. Messages that
    /// come in are left with the broker.
    async fn wait_for(&mut self, limit: Instant, done: impl Fn(&Self) -> bool) {
        while self.link.is_connected() && !done(self) {
            self.link.send_waiting();
            self.hand_over_documents();
            match tokio::time::timeout_at(limit, self.link.next()).await {
                Ok(Event::Message(_)) => {}
                Ok(event) => self.handle(event),
                Err(_) => return,
            }
        }
    }
}

/// Whole seconds until `instant`, rounded up; `None` when it has passed.
fn seconds_until(instant: Timestamp) -> Option<u32> {
    let left = u64::try_from(instant.since(now()).0)
        .ok()
        .filter(|left| *left > 0)?;
    Some(u32::try_from(left.div_ceil(1_000_000_000)).unwrap_or(u32::MAX))
}
