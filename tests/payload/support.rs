//! Shared by the payload tests: an intake from a few lines, and inputs as short texts.
#![allow(
    dead_code,
    unreachable_pub,
    reason = "each test file uses its own part of it"
)]

use holdtrue::configuration;
use holdtrue::payload::Intake;
use holdtrue_engine::event::{Input, RefusedReason, Source};
use holdtrue_engine::time::Timestamp;
use std::path::Path;

/// When every message comes in: 2026-03-01T12:00:00Z.
pub const RECEIVED: i64 = RECEIVED_SECONDS * 1_000_000_000;
pub const RECEIVED_SECONDS: i64 = 1_772_366_400;

pub struct Messages(Intake);

impl Messages {
    /// An intake for one channel with these lines; its reference is the only one.
    pub fn new(lines: &str) -> Self {
        Self::read(&Self::channel("x", lines))
    }

    /// An intake for two channels.
    pub fn with_second(first: &str, second: &str) -> Self {
        Self::read(&[Self::channel("x", first), Self::channel("y", second)].concat())
    }

    fn channel(name: &str, lines: &str) -> String {
        format!("[[channel]]\nname = \"{name}\"\nunit = \"m\"\n{lines}\n")
    }

    fn read(channels: &str) -> Self {
        let text = format!("[node]\nname = \"n\"\n[broker]\nurl = \"mqtt://x\"\n{channels}");
        let read = configuration::from_text(&text, "f", Path::new(""), Timestamp(RECEIVED));
        Self(Intake::new(
            &read.unwrap_or_else(|problems| panic!("{problems}")).intake,
        ))
    }

    pub fn inputs(&self, topic: &str, payload: &[u8], retained: bool) -> Vec<Input> {
        let mut out = Vec::new();
        self.0
            .take(topic, payload, retained, Timestamp(RECEIVED), &mut out);
        out
    }

    /// The inputs of a message as short texts.
    pub fn take(&self, topic: &str, payload: &str) -> Vec<String> {
        self.inputs(topic, payload.as_bytes(), false)
            .iter()
            .map(short)
            .collect()
    }

    pub fn take_retained(&self, topic: &str, payload: &str) -> Vec<String> {
        self.inputs(topic, payload.as_bytes(), true)
            .iter()
            .map(short)
            .collect()
    }
}

/// An input without what every test would repeat; a refusal without its detail.
pub fn short(input: &Input) -> String {
    match input {
        Input::Reading(told) => {
            assert_eq!(told.received, Timestamp(RECEIVED));
            format!(
                "{} at {} value: {:?} sequence: {:?} excluded: {}",
                source(told.source),
                told.phenomenon.0,
                told.value,
                told.sequence,
                told.excluded
            )
        }
        Input::Gate(told) => gate(told.phenomenon.0, told.open),
        Input::Refused(told) => {
            assert!(
                !told.detail.is_empty() && told.detail.len() < 500,
                "{}",
                told.detail
            );
            refused(&told.topic, told.source.map(source), told.reason)
        }
        other => panic!("{other:?} comes from no payload"),
    }
}

fn source(source: Source) -> &'static str {
    match source {
        Source::Indication(_) => "indication",
        Source::Reference(_) => "reference",
        Source::Influence(_) => "influence",
    }
}

/// The short text of a reading that is not excluded and has no sequence.
pub fn reading(source: &str, phenomenon: i64, value: f64) -> String {
    format!("{source} at {phenomenon} value: {value:?} sequence: None excluded: false")
}

pub fn gate(phenomenon: i64, open: bool) -> String {
    format!("gate at {phenomenon} open: {open}")
}

pub fn refused(topic: &str, source: Option<&str>, reason: RefusedReason) -> String {
    format!(
        "refused {topic:?} of {}: {reason:?}",
        source.unwrap_or("nobody")
    )
}

/// The reason in the short text of a refusal.
pub fn reason(short: &str) -> RefusedReason {
    use RefusedReason as R;
    let name = short.rsplit(": ").next().unwrap_or_default();
    [
        R::UnknownTopic,
        R::Empty,
        R::Oversize,
        R::Unreadable,
        R::Missing,
        R::WrongType,
        R::NotFinite,
        R::BadTime,
        R::Retained,
    ]
    .into_iter()
    .find(|reason| format!("{reason:?}") == name)
    .unwrap_or_else(|| panic!("{short} is no refusal by the intake"))
}
