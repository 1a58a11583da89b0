//! The invented plant: its configuration in several editions, and what its sensors and people send.
//!
//! Three sensors share a reference, one waits for laboratory results that come in hours to days
//! late (the engine then asks for recorded rows), one is checked against a known value while a gate
//! is open. Every reading has a phenomenon time of its own, which names it.

use crate::chance::Chance;
use holdtrue_engine::event::{About, Act, CheckPoint, Order, ServiceEvent, Wish};
use holdtrue_engine::setup::{
    ChannelSetup, Clock, FitSetup, PublishSetup, ReferenceId, ReferenceKind, ReferenceSetup, Setup,
    WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};

/// 2026-03-04T18:00:00Z.
pub(crate) const START: Timestamp = Timestamp(1_772_647_200_000_000_000);
/// A whole run is so long: two midnights, and a long silence between them.
pub(crate) const LENGTH: Duration = minutes(48 * 60);
/// Sensors are read this often.
const EVERY: Duration = minutes(20);
/// After this round everything stands still …
const LAST_BEFORE_SILENCE: i64 = 33;
/// … for longer than the engine remembers readings for the sake of late results (a day and what the
/// channels allow), so that it has to ask the record for them.
const SILENCE: Duration = minutes(27 * 60);
const SHARED: &str = "shared";
const LAB: &str = "laboratory";
const ZERO_GAS: &str = "zero-gas";
const SENSORS: [&str; 5] = ["works/a", "works/b", "works/c", "works/slow", "works/gas"];

/// So many minutes.
pub(crate) const fn minutes(count: i64) -> Duration {
    Duration::from_seconds(count * 60)
}

/// Whose value something is, by its configured name.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) enum Named {
    Channel(String),
    Reference(String),
}

/// What a message holds.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Content {
    Readings(Vec<Measured>),
    Gate {
        at: Timestamp,
        open: bool,
    },
    Order(Box<Order>),
    /// Nothing that can be read.
    Rubbish(String),
}

/// A value as a sensor sends it.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Measured {
    pub(crate) of: Named,
    pub(crate) phenomenon: Timestamp,
    pub(crate) value: f64,
    pub(crate) sequence: Option<i64>,
}

impl Named {
    fn key(&self) -> String {
        match self {
            Self::Channel(name) => format!("channel {name}"),
            Self::Reference(name) => format!("reference {name}"),
        }
    }
}

impl Measured {
    /// What names this reading, in messages and in the record alike.
    pub(crate) fn key(&self) -> String {
        reading_key(&self.of, self.phenomenon)
    }
}

/// What names the reading of this source and instant.
pub(crate) fn reading_key(of: &Named, phenomenon: Timestamp) -> String {
    format!("{} at {phenomenon}", of.key())
}

/// What names a gate event.
pub(crate) fn gate_key(at: Timestamp, open: bool) -> String {
    format!("gate at {at} {open}")
}

impl Content {
    /// What names the things in the message, as the record must hold them.
    pub(crate) fn keys(&self) -> Vec<String> {
        match self {
            Self::Readings(readings) => readings.iter().map(Measured::key).collect(),
            Self::Gate { at, open } => vec![gate_key(*at, *open)],
            Self::Order(order) => vec![order.id.clone()],
            Self::Rubbish(text) => vec![text.clone()],
        }
    }
}

/// A message on its way; each that is published has a number of its own, also what says the same as
/// another.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Message {
    pub(crate) number: u64,
    pub(crate) content: Content,
}

/// The plant at work.
pub(crate) struct Plant {
    chance: Chance,
    clock: Clock,
    next: Timestamp,
    round: i64,
    published: u64,
    orders: u64,
    gate_open: bool,
    /// Results that the laboratory has not sent yet.
    results: Vec<Measured>,
    /// A message that is held up until the next round.
    held_up: Vec<Content>,
    /// Said already, and perhaps said again.
    said: Vec<Content>,
}

impl Plant {
    pub(crate) fn new(mut chance: Chance) -> Self {
        let clock = if chance.one_in(5) {
            Clock::Readings
        } else {
            Clock::Live
        };
        Self {
            chance,
            clock,
            next: START,
            round: 0,
            published: 0,
            orders: 0,
            gate_open: false,
            results: Vec::new(),
            held_up: Vec::new(),
            said: Vec::new(),
        }
    }

    /// Whether nothing is sent for long.
    pub(crate) fn is_silent(&self, now: Timestamp) -> bool {
        self.next.since(now) > EVERY
    }

    /// What was published up to `now`.
    pub(crate) fn up_to(&mut self, now: Timestamp) -> Vec<Message> {
        let mut contents = Vec::new();
        while self.next <= now {
            self.round(&mut contents);
            self.next = self.next.plus(EVERY);
            if self.round == LAST_BEFORE_SILENCE {
                self.next = self.next.plus(SILENCE);
            }
        }
        if contents.is_empty() && !self.said.is_empty() && self.chance.one_in(12) {
            // A sender that missed the answer says it again, maybe after others.
            let recent = self.said.len().min(12);
            let which = self.said.len() - 1 - self.chance.below(recent);
            contents.push(self.said[which].clone());
        } else {
            self.said.extend(contents.iter().cloned());
        }
        let message = |content| {
            self.published += 1;
            Message {
                number: self.published,
                content,
            }
        };
        contents.into_iter().map(message).collect()
    }

    /// One round of readings, and what else happens around it.
    fn round(&mut self, contents: &mut Vec<Content>) {
        self.round += 1;
        let truth = 7.0 + 0.5 * (self.seconds() / 9000.0).sin();
        let drift = self.seconds() / 86_400.0;
        let mut pack = Vec::new();
        for (place, sensor) in (0..).zip(SENSORS) {
            let bias = 0.3 * drift * f64::from(place);
            let value = truth + bias + 0.02 * self.chance.normal();
            pack.push(self.measured(Named::Channel(sensor.to_owned()), place, value));
        }
        let value = truth + 0.01 * self.chance.normal();
        let shared = Named::Reference(SHARED.to_owned());
        let reference = self.measured(shared, 0, value);
        if self.chance.one_in(2) {
            pack.push(reference);
            contents.extend(pack.into_iter().map(|one| Content::Readings(vec![one])));
        } else {
            contents.push(Content::Readings(pack));
            contents.push(Content::Readings(vec![reference]));
        }
        if self.round % 3 == 0 {
            let sample = Measured {
                of: Named::Reference(LAB.to_owned()),
                phenomenon: self.next.plus(minutes(1)),
                value: truth,
                sequence: None,
            };
            self.results.push(sample);
        }
        // Results come in batches, in order, hours after the samples.
        if self.round % 24 == 11 {
            let results = std::mem::take(&mut self.results);
            contents.push(Content::Readings(results));
        }
        if self.round % 7 == 3 {
            self.gate_open = !self.gate_open;
            contents.push(Content::Gate {
                at: self.next,
                open: self.gate_open,
            });
        }
        if self.chance.one_in(15) {
            contents.push(self.order());
        }
        if self.chance.one_in(25) {
            contents.push(Content::Rubbish(format!("round {}", self.round)));
        }
        // Late, but within the channels' patience.
        let late = std::mem::take(&mut self.held_up);
        if self.chance.one_in(5) {
            let which = self.chance.below(contents.len());
            self.held_up.push(contents.remove(which));
        }
        contents.extend(late);
    }

    fn measured(&mut self, of: Named, place: i32, value: f64) -> Measured {
        let own = Duration::from_seconds(i64::from(place));
        Measured {
            of,
            phenomenon: self.next.plus(own),
            value,
            sequence: self.chance.one_in(2).then_some(self.round),
        }
    }

    /// Somebody did something to an instrument.
    fn order(&mut self) -> Content {
        self.orders += 1;
        let act = self
            .chance
            .pick(&[Act::Adjusted, Act::Cleaned, Act::Replaced, Act::Calibrated]);
        let sensor = self.chance.pick(&SENSORS);
        let point = CheckPoint {
            indication: 7.1,
            reference: 7.0,
            expanded_uncertainty: None,
        };
        Content::Order(Box::new(Order {
            received: self.next,
            id: format!("order-{}", self.orders),
            reply_to: None,
            wish: Wish::Service(ServiceEvent {
                by: "the round".to_owned(),
                about: About::Channel(sensor.to_owned()),
                at: None,
                act,
                as_found: vec![point],
                as_left: Vec::new(),
                serial: Some(format!("serial-{}", self.orders)),
                certificate: None,
                note: String::new(),
            }),
        }))
    }

    fn seconds(&self) -> f64 {
        self.next.since(START).seconds()
    }

    /// The configuration in one of its editions: limits, pace of publication, and now and then a
    /// channel less.
    pub(crate) fn setup(&self, edition: usize) -> Setup {
        let references = vec![
            reference(SHARED, ReferenceKind::Measured),
            reference(LAB, ReferenceKind::Measured),
            reference(
                ZERO_GAS,
                ReferenceKind::Constant {
                    value: 7.0,
                    gated: true,
                },
            ),
        ];
        let mut channels: Vec<ChannelSetup> = SENSORS
            .iter()
            .zip([0, 0, 0, 1, 2])
            .map(|(name, reference)| channel(name, reference, edition))
            .collect();
        channels[0].corrected_values = true;
        if edition % 4 == 3 {
            channels.remove(1);
        }
        Setup {
            node: "simulated".to_owned(),
            clock: self.clock,
            fingerprint: format!("{edition:064}"),
            references,
            influences: Vec::new(),
            channels,
        }
    }

    /// The reference whose gate is told.
    pub(crate) fn gated() -> &'static str {
        ZERO_GAS
    }
}

fn reference(name: &str, kind: ReferenceKind) -> ReferenceSetup {
    ReferenceSetup {
        uncertainty_each: 0.01,
        stale_after: Some(minutes(600)),
        ..ReferenceSetup::new(name, kind)
    }
}

fn channel(name: &str, reference: u32, edition: usize) -> ChannelSetup {
    let place = i64::try_from(edition % 5).expect("a small number");
    let mut channel = ChannelSetup {
        max_gap: minutes(60),
        lateness: minutes(30),
        max_permissible_error: Some(if edition.is_multiple_of(2) { 0.4 } else { 0.6 }),
        fit: FitSetup {
            window: WindowLength::Pairs(64),
            segments: 16,
            ..FitSetup::default()
        },
        publish: PublishSetup {
            step: 0.5,
            max_age: minutes(60 + 10 * place),
            dead_zone: 0.0,
        },
        ..ChannelSetup::new(name, "pH", ReferenceId(reference))
    };
    channel.alarms.gap_after = Some(minutes(180));
    channel
}
