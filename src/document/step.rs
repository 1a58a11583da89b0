//! Documents about a step of a sensor, with the numbers that decided it.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::Step;
use holdtrue_engine::setup::ChannelSetup;
use serde::Serialize;

/// The newest step of a channel.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct StepDocument<'a> {
    schema_version: u32,
    channel: &'a str,
    unit: &'a str,
    at: String,
    last_before: Option<String>,
    first_after: String,
    earliest: String,
    latest: String,
    size: f64,
    size_uncertainty: f64,
    before: f64,
    after: f64,
    ratio: f64,
    needed: f64,
    gain_over_bend: f64,
    ended_stretch: u32,
    pairs: u32,
    taken_back: u32,
}

impl<'a> StepDocument<'a> {
    /// Of one step of `channel`.
    #[must_use]
    pub fn new(step: &Step, channel: &'a ChannelSetup) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            channel: &channel.name,
            unit: &channel.unit,
            at: word::time(step.at),
            last_before: step.last_before.map(word::time),
            first_after: word::time(step.first_after),
            earliest: word::time(step.earliest),
            latest: word::time(step.latest),
            size: step.size,
            size_uncertainty: step.size_u,
            before: step.before,
            after: step.after,
            ratio: step.ratio,
            needed: step.needed,
            gain_over_bend: step.gain_over_bend,
            ended_stretch: step.ended_stretch,
            pairs: step.pairs,
            taken_back: step.taken_back,
        }
    }
}
