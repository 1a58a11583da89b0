//! Validations of a channel's model by what a service found.

use super::answer::ComparisonPart;
use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::Validation;
use holdtrue_engine::setup::ChannelSetup;
use serde::Serialize;

/// The newest comparison of a channel's model with as-found readings.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ValidationDocument<'a> {
    schema_version: u32,
    channel: &'a str,
    unit: &'a str,
    at: String,
    order: &'a str,
    by: &'a str,
    act: &'static str,
    performed: String,
    stretch: u32,
    certificate: Option<&'a str>,
    #[serde(flatten)]
    comparison: ComparisonPart,
}

impl<'a> ValidationDocument<'a> {
    /// Of one validation of `channel`.
    #[must_use]
    pub fn new(validation: &'a Validation, channel: &'a ChannelSetup) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            channel: &channel.name,
            unit: &channel.unit,
            at: word::time(validation.at),
            order: &validation.order,
            by: &validation.by,
            act: validation.act.word(),
            performed: word::time(validation.performed),
            stretch: validation.stretch,
            certificate: validation.certificate.as_deref(),
            comparison: ComparisonPart::new(&validation.comparison),
        }
    }
}
