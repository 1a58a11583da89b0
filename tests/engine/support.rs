//! Setups and inputs shared by the tests of the engine.
#![allow(
    dead_code,
    unreachable_pub,
    reason = "each test file uses its own part"
)]
#![allow(
    clippy::cast_possible_truncation,
    reason = "the times and counts of tests are small"
)]

use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::{Gate, Input, Output, Reading, Source};
use holdtrue_engine::setup::{
    ChannelId, ChannelSetup, Clock, FitSetup, PublishSetup, ReferenceId, ReferenceKind,
    ReferenceSetup, Setup, WindowLength,
};
use holdtrue_engine::time::{Duration, Timestamp};
use rand_chacha::rand_core::SeedableRng as _;
use rand_distr::{Distribution as _, StandardNormal};

/// 2026-01-01T00:00:00Z, the beginning of every test.
pub const START: Timestamp = Timestamp(1_767_225_600_000_000_000);

/// So many seconds after the beginning.
pub fn at(seconds: f64) -> Timestamp {
    START.plus(span(seconds))
}

/// A length of time in seconds, to the millisecond.
pub fn span(seconds: f64) -> Duration {
    Duration((seconds * 1000.0).round() as i64 * 1_000_000)
}

/// Seconds after the beginning.
pub fn since_start(time: Timestamp) -> f64 {
    time.since(START).seconds()
}

/// A node with these references and channels.
pub fn node(clock: Clock, references: Vec<ReferenceSetup>, channels: Vec<ChannelSetup>) -> Setup {
    Setup {
        node: "north-works".to_owned(),
        clock,
        fingerprint: "00".repeat(32),
        references,
        influences: Vec::new(),
        channels,
    }
}

/// A reference without uncertainty that never goes stale.
pub fn reference(name: &str, kind: ReferenceKind) -> ReferenceSetup {
    ReferenceSetup {
        expiry_notice: Duration::ZERO,
        ..ReferenceSetup::new(name, kind)
    }
}

/// A channel against the reference of this position: the configuration's defaults but for a window
/// of 1024 pairs, a gap of two minutes, and documents that are renewed each hour or with half a u.
pub fn channel(name: &str, reference: u32) -> ChannelSetup {
    ChannelSetup {
        max_gap: span(120.0),
        fit: FitSetup {
            window: WindowLength::Pairs(1024),
            ..FitSetup::default()
        },
        publish: PublishSetup {
            step: 0.5,
            max_age: span(3600.0),
            ..PublishSetup::default()
        },
        ..ChannelSetup::new(name, "pH", ReferenceId(reference))
    }
}

/// A constant reference that always holds.
pub fn constant(value: f64) -> ReferenceKind {
    ReferenceKind::Constant {
        value,
        gated: false,
    }
}

/// An indication of the channel of this position, received when it was sampled.
pub fn indication(channel: u32, seconds: f64, value: f64) -> Input {
    reading(Source::Indication(ChannelId(channel)), seconds, value)
}

/// A value of the reference of this position, received when it was sampled.
pub fn reference_value(reference: u32, seconds: f64, value: f64) -> Input {
    reading(Source::Reference(ReferenceId(reference)), seconds, value)
}

/// A reading received when it was sampled.
pub fn reading(source: Source, seconds: f64, value: f64) -> Input {
    Input::Reading(Reading {
        source,
        received: at(seconds),
        phenomenon: at(seconds),
        value,
        sequence: None,
        excluded: false,
    })
}

/// A gate event received when it happened.
pub fn gate(reference: u32, seconds: f64, open: bool) -> Input {
    Input::Gate(Gate {
        reference: ReferenceId(reference),
        received: at(seconds),
        phenomenon: at(seconds),
        open,
    })
}

/// An engine with this configuration.
pub fn engine(setup: Setup) -> Engine {
    let mut engine = Engine::new();
    engine.step(&Input::Setup(Box::new(setup)), &mut Vec::new());
    engine
}

/// Feeds inputs and collects what is said.
pub fn feed<'a>(engine: &mut Engine, inputs: impl IntoIterator<Item = &'a Input>) -> Vec<Output> {
    let mut outputs = Vec::new();
    for input in inputs {
        engine.step(input, &mut outputs);
    }
    outputs
}

/// Normal noise with the lag-1 correlation `rho` and standard deviation 1, from a seed.
pub struct Noise {
    random: rand_chacha::ChaCha12Rng,
    rho: f64,
    last: f64,
}

impl Noise {
    /// White for `rho` = 0.
    pub fn new(seed: u64, rho: f64) -> Self {
        let mut random = rand_chacha::ChaCha12Rng::seed_from_u64(seed);
        let last = StandardNormal.sample(&mut random);
        Self { random, rho, last }
    }

    /// The next value.
    pub fn draw(&mut self) -> f64 {
        let fresh: f64 = StandardNormal.sample(&mut self.random);
        self.last = self.rho * self.last + (1.0 - self.rho * self.rho).sqrt() * fresh;
        self.last
    }
}
