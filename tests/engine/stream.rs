//! An invented node with everything that the engine keeps state of, and what arrives there, from a
//! seed: readings late and lost, gates, influence quantities, steps, services, other setups, rows
//! from the record.

#![allow(unreachable_pub, reason = "shared by the tests of the engine")]

use crate::support::{at, channel, gate, node, reading, reference, span};
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{
    About, Act, CheckPoint, Input, Order, Output, Reading, Refused, RefusedReason, ServiceEvent,
    Source, Supplied, Wish,
};
use holdtrue_engine::setup::{
    ChannelId, ChannelInfluence, Clock, InfluenceId, InfluenceSetup, ReferenceId, ReferenceKind,
    Setup, WindowLength,
};
use holdtrue_engine::time::Timestamp;
use rand_chacha::ChaCha12Rng;
use rand_chacha::rand_core::{Rng as _, SeedableRng as _};
use rand_distr::{Distribution as _, StandardNormal};

/// Channels of the first setup.
pub const CHANNELS: u32 = 7;
/// Seconds between two indications of a channel.
const EVERY: f64 = 300.0;
/// The far laboratory tells so many seconds late: longer than the engine remembers.
const FAR: f64 = 26.0 * 3600.0;

/// Everything that arrives at the node, in order; what the engine asks for in between is answered
/// by [`Shell`].
pub fn inputs(seed: u64, turns: u32) -> Vec<Input> {
    let mut random = ChaCha12Rng::seed_from_u64(seed);
    let mut variant = Variant::draw(&mut random);
    let mut inputs = vec![Input::Setup(Box::new(setup(variant)))];
    let step_at = 60 + below(&mut random, turns.max(61) - 60);
    for turn in 0..turns {
        let time = f64::from(turn) * EVERY;
        let level = 7.0 + (f64::from(turn) / 40.0).sin();
        for id in 0..CHANNELS {
            if below(&mut random, 20) == 0 {
                continue;
            }
            let outlier = if below(&mut random, 60) == 0 {
                5.0
            } else {
                0.0
            };
            let stepped = if id == 1 && turn >= step_at { 0.6 } else { 0.0 };
            let drift = 1e-3 * f64::from(id * turn);
            let noise: f64 = StandardNormal.sample(&mut random);
            let value = level + drift + stepped + outlier + 0.02 * noise;
            let late = if below(&mut random, 15) == 0 {
                25.0
            } else {
                0.0
            };
            inputs.push(indication_late(id, time, late, value));
        }
        inputs.extend(references(&mut random, turn, level));
        if below(&mut random, 40) == 0 {
            inputs.push(service(&mut random, turn));
        }
        if below(&mut random, 80) == 0 {
            variant = variant.edited(&mut random);
            inputs.push(Input::Setup(Box::new(setup(variant))));
        }
        if below(&mut random, 10) == 0 {
            inputs.push(unreadable(time));
        }
        inputs.push(Input::Tick {
            now: at(time + 250.0),
        });
    }
    inputs
}

/// A number below `end`.
pub fn below(random: &mut ChaCha12Rng, end: u32) -> u32 {
    random.next_u32() % end
}

/// What differs between setups.
#[derive(Clone, Copy)]
struct Variant {
    live: bool,
    window: WindowLength,
    limit: f64,
    last_channel: bool,
}

impl Variant {
    fn draw(random: &mut ChaCha12Rng) -> Self {
        let windows = [
            WindowLength::Pairs(32),
            WindowLength::Pairs(200),
            WindowLength::Time(span(5.0 * 3600.0)),
            WindowLength::Time(span(20.0 * 3600.0)),
        ];
        Self {
            live: below(random, 2) == 0,
            window: windows[below(random, 4) as usize],
            limit: 0.3,
            last_channel: true,
        }
    }

    /// Another limit, another window, or the last channel gone or back.
    fn edited(self, random: &mut ChaCha12Rng) -> Self {
        match below(random, 4) {
            0 => Self {
                window: Self::draw(random).window,
                ..self
            },
            1 => Self {
                last_channel: !self.last_channel,
                ..self
            },
            _ => Self {
                limit: self.limit + 0.1,
                ..self
            },
        }
    }
}

/// Three channels against a shared value, one against a gated constant, one against the others, one
/// against means with a span and a temperature, one against a laboratory that tells after a day.
fn setup(variant: Variant) -> Setup {
    let mut hourly = reference("hourly", ReferenceKind::Measured);
    hourly.stands_for = span(3000.0);
    let mut lab = reference("lab", ReferenceKind::Measured);
    lab.stale_after = Some(span(5.0 * 3600.0));
    let gated = ReferenceKind::Constant {
        value: 7.0,
        gated: true,
    };
    let members = vec![ChannelId(0), ChannelId(1), ChannelId(2)];
    let references = vec![
        lab,
        reference("buffer", gated),
        reference("rest", ReferenceKind::Group { members }),
        hourly,
        reference("far/lab", ReferenceKind::Measured),
    ];
    let mut channels: Vec<_> = [0, 0, 0, 1, 2, 3, 4]
        .into_iter()
        .enumerate()
        .map(|(place, reference)| {
            let mut channel = channel(&format!("c{place}"), reference);
            channel.fit.window = variant.window;
            channel.fit.segments = 16;
            channel.lateness = span(200.0);
            channel.max_gap = span(900.0);
            channel.max_permissible_error = Some(variant.limit);
            channel.max_drift_rate = Some(1.0);
            channel.alarms.gap_after = Some(span(3000.0));
            channel.publish.max_age = span(9000.0);
            channel.resolution = 0.01;
            channel
        })
        .collect();
    channels[5].fit.max_span_degree = Some(0);
    channels[5].fit.influences = 1;
    channels[5].influences = vec![ChannelInfluence {
        source: InfluenceId(0),
        name: "temperature".to_owned(),
        unit: None,
    }];
    if !variant.last_channel {
        channels.pop();
    }
    let clock = if variant.live {
        Clock::Live
    } else {
        Clock::Readings
    };
    Setup {
        influences: vec![InfluenceSetup {
            name: "hall/temperature".to_owned(),
        }],
        ..node(clock, references, channels)
    }
}

/// Values of the references, the gate and the temperature, as they come about in a turn.
fn references(random: &mut ChaCha12Rng, turn: u32, level: f64) -> Vec<Input> {
    let time = f64::from(turn) * EVERY;
    let mut inputs = Vec::new();
    let noise: f64 = StandardNormal.sample(random);
    if turn % 3 == 1 {
        let off = if below(random, 30) == 0 { 2.0 } else { 0.0 };
        let value = level + off + 0.005 * noise;
        // Now and then too late.
        let late = if below(random, 12) == 0 { 5400.0 } else { 0.0 };
        let sampled = (time - late).max(0.0);
        inputs.push(sampled_late(
            Source::Reference(ReferenceId(0)),
            sampled,
            time,
            value,
        ));
    }
    if turn % 10 == 9 {
        inputs.push(reading(
            Source::Reference(ReferenceId(3)),
            time,
            level + 0.005 * noise,
        ));
    }
    if turn.is_multiple_of(5) && time >= FAR {
        let far = Source::Reference(ReferenceId(4));
        inputs.push(sampled_late(
            far,
            time - FAR + 100.0,
            time,
            7.0 + 0.005 * noise,
        ));
    }
    if turn.is_multiple_of(7) {
        inputs.push(gate(1, time, turn.is_multiple_of(14)));
    }
    if below(random, 8) != 0 {
        let value = 20.0 + 3.0 * (f64::from(turn) / 15.0).cos();
        inputs.push(reading(Source::Influence(InfluenceId(0)), time, value));
    }
    inputs
}

fn indication_late(channel: u32, time: f64, late: f64, value: f64) -> Input {
    let sampled = (time - late).max(0.0);
    sampled_late(Source::Indication(ChannelId(channel)), sampled, time, value)
}

fn sampled_late(source: Source, sampled: f64, received: f64, value: f64) -> Input {
    Input::Reading(Reading {
        source,
        received: at(received),
        phenomenon: at(sampled),
        value,
        sequence: None,
        excluded: false,
    })
}

fn unreadable(time: f64) -> Input {
    Input::Refused(Refused {
        received: at(time),
        topic: "works/c0".to_owned(),
        source: Some(Source::Indication(ChannelId(0))),
        reason: RefusedReason::Unreadable,
        detail: "{".to_owned(),
    })
}

/// A channel or the shared reference is cleaned, an hour ago at most.
fn service(random: &mut ChaCha12Rng, turn: u32) -> Input {
    let ago = below(random, 12.min(turn + 1));
    let about = match below(random, 8) {
        7 => About::Reference("lab".to_owned()),
        place => About::Channel(format!("c{place}")),
    };
    let point = CheckPoint {
        indication: 7.1,
        reference: 7.0,
        expanded_uncertainty: Some(0.02),
    };
    let is_channel = matches!(about, About::Channel(_));
    Input::Order(Box::new(Order {
        received: at(f64::from(turn) * EVERY),
        // Now and then an order is told again, or another one bears its name.
        id: format!("order-{}", below(random, 200)),
        reply_to: None,
        wish: Wish::Service(ServiceEvent {
            by: "M. Ito".to_owned(),
            about,
            at: Some(at(f64::from(turn - ago) * EVERY)),
            act: Act::Cleaned,
            as_found: Vec::from_iter(is_channel.then_some(point)),
            as_left: Vec::new(),
            serial: None,
            certificate: None,
            note: String::new(),
        }),
    }))
}

/// What stands between the node and the engine: remembers every reading, and hands rows over when
/// they are asked for.
#[derive(Clone, Default)]
pub struct Shell {
    readings: Vec<Reading>,
    said: Vec<Output>,
}

impl Shell {
    /// Feeds one input, and whatever rows it makes the engine ask for.
    pub fn step(&mut self, engine: &mut Engine, input: &Input) {
        self.remember(input);
        let seen = self.said.len();
        engine.step(input, &mut self.said);
        self.answer_since(seen, engine);
    }

    /// Keeps a reading that somebody else feeds.
    pub fn remember(&mut self, input: &Input) {
        if let Input::Reading(reading) = input {
            self.readings.push(reading.clone());
        }
    }

    /// The record holds nothing older any more.
    pub fn forget_before(&mut self, time: Timestamp) {
        self.readings.retain(|reading| reading.phenomenon >= time);
    }

    /// Hands over what was wanted earlier.
    pub fn answer(&mut self, engine: &mut Engine, wanted: &[Output]) {
        let seen = self.said.len();
        self.said.extend_from_slice(wanted);
        self.answer_since(seen, engine);
    }

    fn answer_since(&mut self, mut seen: usize, engine: &mut Engine) {
        while let Some(output) = self.said.get(seen).cloned() {
            seen += 1;
            if let Output::Wanted { channel, from, to } = output {
                let in_range = |it: &&Reading| from <= it.phenomenon && it.phenomenon < to;
                let rows = self.readings.iter().filter(in_range);
                let supplied = Input::Supplied(Supplied {
                    channel,
                    from,
                    to,
                    readings: rows.cloned().collect(),
                });
                engine.step(&supplied, &mut self.said);
            }
        }
    }

    /// Everything said so far.
    pub fn said(&self) -> &[Output] {
        &self.said
    }
}
