//! One life of the daemon: its loop in the same order (`src/daemon/turn.rs`), in simulated time,
//! over a simulated broker and disk. And, for tests of the tests, the same loop with one fault in
//! it.

use crate::broker::{Broker, Down, Up};
use crate::chance::Chance;
use crate::disk::SimulatedDisk;
use crate::memory::{Memory, Step};
use crate::plant::{Content, Message, Named, Plant, minutes};
use holdtrue::keeper::{Keeper, Pace};
use holdtrue_engine::event::{Gate, Input, Order, Reading, Refused, RefusedReason, Source};
use holdtrue_engine::setup::{ChannelId, ReferenceId, Setup};
use holdtrue_engine::time::{Duration, Timestamp};
use std::collections::{BTreeSet, VecDeque};
use std::path::{Path, PathBuf};

/// Documents under way at once.
const WINDOW: usize = 16;
/// A batch with so many inputs is committed early.
const BATCH_INPUTS_MAX: usize = 60;
/// What the sessions subscribe to, as far as this broker cares.
const FILTER: &str = "#";

/// A promise that the loop breaks on purpose.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Breach {
    None,
    /// Messages are acknowledged when they are taken, before the commit.
    AcknowledgesEarly,
    /// Documents go before the commit.
    PublishesEarly,
    /// After a commit one row of this table is missing.
    Loses(&'static str),
    /// What the broker sends again is taken for something new.
    TakesAgainAsNew,
}

/// Why a life ended.
#[derive(Debug)]
pub(crate) enum Ended {
    /// Everything ended at an operation of the disk.
    Died,
    /// The disk refused when the daemon wanted to start; it ended by itself.
    Refused,
    /// What must not happen.
    Failed(String),
}

/// What the daemon is set to.
#[derive(Clone, Debug)]
pub(crate) struct Settings {
    pub(crate) setup: Setup,
    pub(crate) commit_every: Duration,
    pub(crate) messages_max: usize,
    pub(crate) pace: Pace,
    pub(crate) breach: Breach,
}

/// Of which connection a message is, and which.
type Ticket = (u64, u64);

/// The daemon at work.
pub(crate) struct Daemon {
    folder: PathBuf,
    disk: SimulatedDisk,
    settings: Settings,
    pub(crate) keeper: Keeper<Ticket>,
    held: VecDeque<(Message, bool)>,
    news_since: Option<Timestamp>,
    /// The record can't be written; tried again then.
    retry: Option<Timestamp>,
    memory: Memory,
    connection: u64,
    under_way: BTreeSet<i64>,
}

impl Daemon {
    /// Opens the record and restores the engine, no more: what was restored can be looked at.
    pub(crate) fn open(
        folder: &Path,
        disk: &SimulatedDisk,
        settings: &Settings,
        now: Timestamp,
    ) -> Result<Self, Ended> {
        let keeper = Keeper::open_on(folder, Box::new(disk.clone()), now);
        let keeper = keeper.map_err(|error| at_start(disk, &error.to_string()))?;
        let keeper = keeper.at_pace(now, settings.pace);
        let remembered = !keeper.subscriptions().is_empty();
        Ok(Self {
            folder: folder.to_path_buf(),
            disk: disk.clone(),
            settings: settings.clone(),
            keeper,
            held: VecDeque::new(),
            news_since: None,
            retry: None,
            memory: Memory::new(remembered),
            connection: 0,
            under_way: BTreeSet::new(),
        })
    }

    /// Lets the configuration take effect if it is new, and is ready to connect.
    pub(crate) fn begin(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        let mut work = || {
            if *self.keeper.setup() != self.settings.setup {
                self.keeper.adopt(&self.settings.setup)?;
            }
            self.keeper.commit(now)?;
            self.keeper.answer_wanted()
        };
        let done = work().map_err(|error| at_start(&self.disk, &error.to_string()));
        self.alive()?;
        done?;
        self.doubt_session(now, broker)
    }

    /// One turn of the loop. `quiet`: the world does nothing by chance.
    pub(crate) fn turn(
        &mut self,
        now: Timestamp,
        broker: &mut Broker,
        quiet: bool,
        chance: &mut Chance,
    ) -> Result<(), Ended> {
        if !broker.is_connected() && (quiet || chance.one_in(2)) {
            self.greet(now, broker)?;
        }
        broker.work(quiet, chance);
        let some = chance.below(12);
        let mut heard = 0;
        while (quiet || heard <= some)
            && let Some(down) = broker.receive()
        {
            heard += 1;
            self.hear(down, now, broker)?;
        }
        self.do_what_is_due(now, broker)?;
        self.hand_over(now, broker);
        self.alive()
    }

    fn greet(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        let present = broker.connect();
        self.connection += 1;
        self.keeper.outbox_mut().note_here();
        if present {
            self.memory.session_kept(FILTER);
        } else {
            self.memory.session_lost();
        }
        self.restore_memory(now, broker)?;
        if self.memory.must_subscribe() {
            broker.send(Up::Subscribe);
        }
        Ok(())
    }

    /// Before each connection what is noted of the session becomes void.
    fn doubt_session(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        if self.keeper.subscriptions().is_empty() {
            return Ok(());
        }
        self.keeper.set_subscriptions(BTreeSet::new());
        if self.retry.is_some() {
            return Ok(());
        }
        self.commit(now, broker)
    }

    /// The connection broke.
    pub(crate) fn note_lost(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        self.keeper.outbox_mut().note_away();
        self.under_way.clear();
        self.held.clear();
        self.doubt_session(now, broker)
    }

    fn hear(&mut self, down: Down, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        match down {
            Down::Message { message, again } => {
                if self.may_take() && self.held.is_empty() {
                    self.take(&message, again, now, broker)?;
                } else {
                    self.held.push_back((message, again));
                }
            }
            Down::Taken(number) => {
                self.under_way.remove(&number);
                self.keeper.accepted(number);
            }
            Down::NotNow(number) => {
                self.under_way.remove(&number);
                self.keeper.outbox_mut().hand_again_from(number);
            }
            Down::Subscribed => self.memory.subscribed(FILTER),
        }
        Ok(())
    }

    fn may_take(&self) -> bool {
        self.retry.is_none() && !self.keeper.outbox().is_full()
    }

    fn take(
        &mut self,
        message: &Message,
        again: bool,
        now: Timestamp,
        broker: &mut Broker,
    ) -> Result<(), Ended> {
        let as_new = again && self.settings.breach == Breach::TakesAgainAsNew;
        for input in inputs(message, now, as_new, self.keeper.setup()) {
            self.keeper.take(&input);
        }
        if self.settings.breach == Breach::AcknowledgesEarly {
            broker.send(Up::Acknowledge(message.number));
        } else {
            self.keeper.owe((self.connection, message.number));
        }
        self.news_since.get_or_insert(now);
        if self.keeper.owed() >= self.settings.messages_max
            || self.keeper.uncommitted() >= BATCH_INPUTS_MAX
        {
            self.commit(now, broker)?;
        }
        Ok(())
    }

    fn do_what_is_due(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        match self.retry {
            Some(retry) if now >= retry => self.commit(now, broker)?,
            Some(_) => {}
            None => {
                let wanted = self.keeper.engine().next_tick();
                if wanted.is_some_and(|wanted| wanted <= now) {
                    self.keeper.take(&Input::Tick { now });
                }
                let due = |since: Timestamp| now >= since.plus(self.settings.commit_every);
                if self.news_since.is_some_and(due) {
                    self.commit(now, broker)?;
                }
            }
        }
        while self.may_take()
            && let Some((message, again)) = self.held.pop_front()
        {
            self.take(&message, again, now, broker)?;
        }
        self.restore_memory(now, broker)?;
        if self.keeper.has_news() {
            self.news_since.get_or_insert(now);
        }
        Ok(())
    }

    fn commit(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        let had_news = self.keeper.has_news();
        let committed = self.keeper.commit(now);
        self.alive()?;
        match committed {
            Ok(tickets) => {
                self.news_since = None;
                self.retry = None;
                self.memory.committed();
                if let Breach::Loses(table) = self.settings.breach
                    && had_news
                {
                    lose_newest_row(&self.folder, table);
                }
                for (connection, number) in tickets {
                    if connection == self.connection {
                        broker.send(Up::Acknowledge(number));
                    }
                }
                let answered = self.keeper.answer_wanted();
                answered.map_err(|error| Ended::Failed(format!("rows can't be read: {error}")))
            }
            Err(_) if self.disk.is_refusing() => {
                self.retry = Some(now.plus(minutes(1)));
                Ok(())
            }
            Err(error) => Err(Ended::Failed(format!("the commit failed: {error}"))),
        }
    }

    /// Does what is owed to the broker's session (`src/daemon/session.rs`).
    fn restore_memory(&mut self, now: Timestamp, broker: &mut Broker) -> Result<(), Ended> {
        while self.retry.is_none()
            && let Some(step) = self.memory.step(now)
        {
            match &step {
                Step::Forget => self.note_subscriptions(BTreeSet::new(), now, broker)?,
                Step::Note(filter) => {
                    self.note_subscriptions(BTreeSet::from([filter.clone()]), now, broker)?;
                }
                Step::PublishStanding => {
                    let done = self.keeper.publish_standing(now);
                    done.map_err(|error| Ended::Failed(format!("standing documents: {error}")))?;
                }
            }
            if self.retry.is_none() {
                self.memory.done(&step);
            } else {
                self.memory.failed(now);
            }
            if step == Step::PublishStanding && !self.keeper.has_news() {
                self.memory.committed();
            }
        }
        Ok(())
    }

    fn note_subscriptions(
        &mut self,
        filters: BTreeSet<String>,
        now: Timestamp,
        broker: &mut Broker,
    ) -> Result<(), Ended> {
        self.keeper.set_subscriptions(filters);
        self.commit(now, broker)
    }

    fn hand_over(&mut self, now: Timestamp, broker: &mut Broker) {
        if self.settings.breach == Breach::PublishesEarly {
            self.keeper.outbox_mut().release();
        }
        while broker.is_connected() && self.under_way.len() < WINDOW {
            let Some((number, document)) = self.keeper.outbox().next_to_hand() else {
                return;
            };
            let document = document.clone();
            if document.expires.is_some_and(|expires| expires <= now) {
                self.keeper.expire(number);
                continue;
            }
            broker.send(Up::Publish { number, document });
            self.under_way.insert(number);
            self.keeper.outbox_mut().set_handed(number);
        }
    }

    /// Whether nothing waits to be written or published.
    pub(crate) fn is_at_rest(&self) -> bool {
        self.keeper.outbox().is_empty() && self.held.is_empty() && !self.keeper.has_news()
    }

    /// An orderly end.
    pub(crate) fn finish(mut self, now: Timestamp) -> Result<(), Ended> {
        let done = self.keeper.finish(now);
        self.alive()?;
        match done {
            Ok(_) => Ok(()),
            Err(_) if self.disk.is_refusing() => Err(Ended::Refused),
            Err(error) => Err(Ended::Failed(format!("it can't be finished: {error}"))),
        }
    }

    fn alive(&self) -> Result<(), Ended> {
        if self.disk.is_dead() {
            return Err(Ended::Died);
        }
        Ok(())
    }
}

/// What an error at the start amounts to.
fn at_start(disk: &SimulatedDisk, error: &str) -> Ended {
    if disk.is_dead() {
        Ended::Died
    } else if disk.is_refusing() {
        Ended::Refused
    } else {
        Ended::Failed(format!("no start: {error}"))
    }
}

/// The inputs in a message, as the intake makes them; what belongs to no configured source is
/// refused.
fn inputs(message: &Message, now: Timestamp, as_new: bool, setup: &Setup) -> Vec<Input> {
    match &message.content {
        Content::Readings(readings) => readings
            .iter()
            .map(|measured| match source(&measured.of, setup) {
                Some(source) => Input::Reading(Reading {
                    source,
                    received: now,
                    phenomenon: measured.phenomenon,
                    value: measured.value,
                    sequence: if as_new { Some(-1) } else { measured.sequence },
                    excluded: false,
                }),
                None => refused(now, RefusedReason::UnknownTopic, measured.key()),
            })
            .collect(),
        Content::Gate { at, open } => {
            let gated = Named::Reference(Plant::gated().to_owned());
            let Some(Source::Reference(reference)) = source(&gated, setup) else {
                return vec![refused(now, RefusedReason::UnknownTopic, String::new())];
            };
            vec![Input::Gate(Gate {
                reference,
                received: now,
                phenomenon: *at,
                open: *open,
            })]
        }
        Content::Order(order) => vec![Input::Order(Box::new(Order {
            received: now,
            ..Order::clone(order)
        }))],
        Content::Rubbish(text) => vec![refused(now, RefusedReason::Unreadable, text.clone())],
    }
}

fn refused(received: Timestamp, reason: RefusedReason, detail: String) -> Input {
    Input::Refused(Refused {
        received,
        topic: "works".to_owned(),
        source: None,
        reason,
        detail,
    })
}

/// The position of a source in a configuration.
fn source(of: &Named, setup: &Setup) -> Option<Source> {
    match of {
        Named::Channel(name) => {
            let place = setup.channels.iter().position(|it| it.name == *name)?;
            Some(Source::Indication(ChannelId::at(place)))
        }
        Named::Reference(name) => {
            let place = setup.references.iter().position(|it| it.name == *name)?;
            Some(Source::Reference(ReferenceId::at(place)))
        }
    }
}

/// The fault of a commit that forgets a row.
fn lose_newest_row(folder: &Path, table: &str) {
    let archive = holdtrue::record::Archive::open(folder).expect("the folder can be read");
    let newest = *archive.days().last().expect("a file is open");
    let file = rusqlite::Connection::open(archive.path(newest)).expect("the file opens");
    file.execute_batch(&format!(
        "DELETE FROM {table} WHERE rowid = (SELECT max(rowid) FROM {table})"
    ))
    .expect("the row can be deleted");
}
