//! The impact of a quarantine on one channel: the corrections that were published from windows that
//! hold part of what is quarantined.

use super::topic::Topics;
use super::{Document, SCHEMA_VERSION, word};
use holdtrue_engine::event::{About, Correction, Quarantined};
use holdtrue_engine::setup::ChannelSetup;
use serde::Serialize;

/// At most so many corrections are listed; the count is of all.
pub const LISTED: usize = 1000;

/// The impact document.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ImpactDocument {
    schema_version: u32,
    channel: String,
    unit: String,
    quarantine: String,
    subject: &'static str,
    name: String,
    from: String,
    to: Option<String>,
    count: usize,
    corrections: Vec<Affected>,
}

/// A correction that was published from values that are quarantined now.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Affected {
    issue_number: u64,
    issued: String,
    valid_until: String,
    correction: f64,
    expanded_uncertainty: f64,
    window_from: String,
    window_to: String,
}

impl Affected {
    /// Of one correction.
    #[must_use]
    pub fn new(correction: &Correction) -> Self {
        Self {
            issue_number: correction.issue_number,
            issued: word::time(correction.issued),
            valid_until: word::time(correction.valid_until),
            correction: correction.correction,
            expanded_uncertainty: correction.expanded_uncertainty,
            window_from: word::time(correction.window.from),
            window_to: word::time(correction.window.to),
        }
    }
}

impl ImpactDocument {
    /// `count` corrections in all, of which the newest stand in `corrections`.
    #[must_use]
    pub fn new(
        quarantined: &Quarantined,
        channel: &ChannelSetup,
        count: usize,
        corrections: Vec<Affected>,
    ) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            channel: channel.name.clone(),
            unit: channel.unit.clone(),
            quarantine: quarantined.quarantine.clone(),
            subject: match quarantined.about {
                About::Channel(_) => "channel",
                About::Reference(_) => "reference",
                About::Influence(_) => "influence",
            },
            name: quarantined.about.name().to_owned(),
            from: word::time(quarantined.interval.from),
            to: quarantined.interval.to.map(word::time),
            count,
            corrections,
        }
    }
}

/// The document on its topic, retained: the newest quarantine's for each channel.
#[must_use]
pub fn publish(node: &str, channel: &str, document: &ImpactDocument) -> Document {
    super::json(Topics::new(node).impact(channel), document, true, None)
}
