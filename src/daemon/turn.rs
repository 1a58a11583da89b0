//! The loop that everything happens in.
//!
//! One turn: hand over what may go, wait for the broker or the clock, take what came, commit when
//! it is time. Commits block the loop on purpose: nothing may overtake them, and the connection
//! survives a disk that is slow for a few seconds.

use super::held::Held;
use super::memory::Memory;
use super::paused::Pause;
use super::refusals::Refusals;
use super::report::{LoopFigures, StateRhythm};
use super::settling::Settling;
use super::shell::Shell;
use super::{Error, now};
use crate::broker::{BackOff, Event, Link, Message, Will};
use crate::configuration::Configuration;
use crate::document::state::{Doing, StateDocument};
use crate::document::topic::Topics;
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
/// The daemon at work.
pub(super) struct Daemon {
    pub(super) shell: Shell,
    pub(super) link: Link,
    pub(super) client_id: String,
    pub(super) held: Held,
    pub(super) messages_max: usize,
    pub(super) commit_every: Duration,
    /// When the oldest thing came that the next commit will write.
    pub(super) news_since: Option<Instant>,
    pub(super) pause: Option<Pause>,
    pub(super) rhythm: StateRhythm,
    pub(super) figures: LoopFigures,
    pub(super) refusals: Refusals,
    /// What the broker said when it last refused the state document.
    pub(super) state_refused: Option<String>,
    pub(super) memory: Memory,
    /// The filters that the broker had confirmed before the present connection.
    pub(super) remembered: BTreeSet<String>,
    pub(super) settling: Settling,
    /// The broker could not take a document; not before this instant again.
    pub(super) hand_again: Option<Instant>,
    pub(super) hand_again_back_off: BackOff,
    /// When the engine wants a tick, as of the last time it was asked.
    pub(super) next_tick: Option<Timestamp>,
    pub(super) tick_asked: Instant,
}

impl Daemon {
    /// Prepares the link for a restored engine.
    pub(super) fn start(configuration: Configuration, shell: Shell) -> Result<Self, Error> {
        let setup = shell.keeper.setup();
        let (node, fingerprint) = (setup.node.clone(), setup.fingerprint.clone());
        let client_id = configuration.broker.client_id.clone();
        tracing::info!(
            node,
            broker = %format_args!("{}:{}", configuration.broker.host, configuration.broker.port),
            client_id,
            "holdtrue {} starts",
            env!("CARGO_PKG_VERSION")
        );
        let link = Link::new(configuration.broker)?
            .with_retain_as_published(Topics::new(&node).orders())
            .with_will(move || Will {
                topic: Topics::new(&node).state(),
                payload: StateDocument::new(&node, &fingerprint, Doing::Lost, now()).to_json(),
            });
        let window = link.receive_window();
        let remembered = !shell.keeper.subscriptions().is_empty();
        Ok(Self {
            shell,
            client_id,
            held: Held::new(),
            messages_max: usize::from(window / 2).max(1),
            commit_every: configuration.record.commit,
            news_since: None,
            pause: None,
            rhythm: StateRhythm::new(),
            figures: LoopFigures::default(),
            refusals: Refusals::default(),
            state_refused: None,
            memory: Memory::new(remembered),
            remembered: BTreeSet::new(),
            settling: Settling::new(Instant::now()),
            hand_again: None,
            hand_again_back_off: BackOff::default(),
            next_tick: None,
            tick_asked: Instant::now(),
            link,
        })
    }

    /// Works until `shutdown` completes.
    pub(super) async fn run(mut self, shutdown: impl Future<Output = ()>) {
        tokio::pin!(shutdown);
        self.doubt_session();
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

    pub(super) fn handle(&mut self, event: Event) {
        match event {
            Event::Message(message) => self.take_or_hold(message),
            Event::Answered(token, answer) => self.settle(token, answer),
            Event::Connected { session_present } => {
                self.settling.hear(Instant::now());
                self.greet(session_present);
            }
            Event::Subscribed { refused } => self.note_subscribed(&refused),
            Event::Lost(lost) => self.note_lost(&lost),
            // The next turn hands over.
            Event::Ready => {}
        }
    }

    fn may_take(&self) -> bool {
        self.pause.is_none() && !self.shell.keeper.outbox().is_full()
    }

    fn take_or_hold(&mut self, message: Message) {
        self.settling.hear(Instant::now());
        let received = now();
        if self.may_take() && self.held.is_empty() && !self.held.is_overrun() {
            self.take(&message, received);
        } else {
            self.held.push(message, received);
        }
    }

    fn take(&mut self, message: &Message, received: Timestamp) {
        self.shell.take_message(message, received);
        self.news_since.get_or_insert_with(Instant::now);
        let keeper = &self.shell.keeper;
        if keeper.owed() >= self.messages_max || keeper.uncommitted() >= BATCH_INPUTS_MAX {
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
        self.restore_memory();
        if self.shell.keeper.has_news() {
            self.news_since.get_or_insert(clock);
        }
    }

    fn tick(&mut self) {
        if self.settling.holds(Instant::now()) {
            return;
        }
        if self.tick_asked.elapsed() >= TICK_ASK_EVERY {
            self.ask_tick();
        }
        let now = now();
        if self.next_tick.is_some_and(|wanted| wanted <= now) {
            self.shell.keeper.take(&Input::Tick { now });
            self.ask_tick();
        }
    }

    fn ask_tick(&mut self) {
        self.next_tick = self.shell.keeper.engine().next_tick();
        self.tick_asked = Instant::now();
    }

    fn next_wake(&self) -> Instant {
        let clock = Instant::now();
        let tick = self.next_tick.map(|wanted| {
            let wait = u64::try_from(wanted.since(now()).0).unwrap_or(0);
            // A tick that was just taken may want the next one at once; that is no reason to spin.
            let wanted = clock + Duration::from_nanos(wait).max(Duration::from_millis(1));
            wanted.max(self.settling.until())
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
            self.memory.due().filter(|_| working),
            self.hand_again.filter(|after| *after > clock),
        ];
        times
            .into_iter()
            .flatten()
            .min()
            .unwrap_or(clock + Duration::from_hours(1))
    }

    /// Writes the batch; then its messages are acknowledged and its documents may go.
    pub(super) fn commit(&mut self) {
        match self.shell.keeper.commit(now()) {
            Ok(tickets) => {
                self.news_since = None;
                self.memory.committed();
                for ticket in tickets {
                    self.link.acknowledge(ticket);
                }
                self.end_pause();
                self.answer_wanted();
                self.ask_tick();
            }
            Err(error) => self.pause_for(&error),
        }
    }

    /// Gives the engine what it asked for; after acknowledging, since searching takes time.
    fn answer_wanted(&mut self) {
        // Unanswered wants stay; the next commit is the next attempt.
        if let Err(error) = self.shell.keeper.answer_wanted() {
            tracing::warn!(%error, "recorded rows can't be read for the engine; trying again");
        }
    }
}
