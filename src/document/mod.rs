//! What is published: documents rendered from the engine's outputs.
//!
//! JSON, UTF-8. Times are RFC 3339 in UTC with all the nanoseconds they have; numbers read back to
//! the same bits; words for machines are lower case with hyphens. Each document carries
//! `schema_version`; its schema stands in `config/schemas/`. Modules in reading order: [`topic`],
//! [`correction`], [`outlook`], [`alarm`], [`degree`], [`notice`], [`answer`], [`validation`],
//! [`state`].

pub mod alarm;
pub mod answer;
pub mod correction;
pub mod degree;
pub mod notice;
pub mod outlook;
pub mod state;
pub mod topic;
pub mod validation;
mod word;

use holdtrue_engine::event::Output;
use holdtrue_engine::setup::{Clock, Setup};
use holdtrue_engine::time::Timestamp;
use serde::Serialize;
use topic::Topics;

/// Version of all document schemas; grows when a field changes its meaning or goes.
pub const SCHEMA_VERSION: u32 = 1;

/// Something to publish.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Document {
    /// Where.
    pub topic: String,
    /// What; empty to clear a retained document.
    pub payload: Vec<u8>,
    /// Whether the broker keeps it for later subscribers.
    pub retain: bool,
    /// After this instant it must no longer be sent, and the broker must drop it.
    pub expires: Option<Timestamp>,
    /// What the asker of an answer knows it by (MQTT 5.0, 3.3.2.3.6).
    pub correlation: Option<Vec<u8>>,
}

/// The document that `output` is published as; `None` for what only the record keeps.
///
/// `setup` is the one whose positions the output bears: the one in force, and for what a change of
/// configuration says, the one that it replaces.
#[must_use]
pub fn render(output: &Output, setup: &Setup) -> Option<Document> {
    let topics = Topics::new(&setup.node);
    match output {
        Output::Correction(correction) => {
            let channel = setup.channels.get(correction.channel.0 as usize)?;
            // Recordings run in their own time; an expiry counts the broker's seconds and would
            // mean nothing.
            let expires = (setup.clock == Clock::Live).then_some(correction.valid_until);
            let document = correction::CorrectionDocument::new(correction, channel, setup);
            Some(json(
                topics.correction(&channel.name),
                &document,
                true,
                expires,
            ))
        }
        Output::Withdrawn { channel, .. } => {
            let channel = setup.channels.get(channel.0 as usize)?;
            Some(cleared(topics.correction(&channel.name)))
        }
        Output::Corrected(corrected) => {
            let channel = setup.channels.get(corrected.channel.0 as usize)?;
            let document = correction::CorrectedDocument::new(corrected, channel);
            Some(json(
                topics.corrected(&channel.name),
                &document,
                false,
                None,
            ))
        }
        Output::Outlook(outlook) => {
            let channel = setup.channels.get(outlook.channel.0 as usize)?;
            let expires = (setup.clock == Clock::Live).then_some(outlook.valid_until);
            let document = outlook::OutlookDocument::new(outlook, channel);
            Some(json(
                topics.outlook(&channel.name),
                &document,
                true,
                expires,
            ))
        }
        Output::OutlookWithdrawn { channel, .. } => {
            let channel = setup.channels.get(channel.0 as usize)?;
            Some(cleared(topics.outlook(&channel.name)))
        }
        Output::Alarm(change) => {
            let name = topic::subject_name(change.subject, setup)?;
            let document = alarm::AlarmDocument::new(change, name);
            Some(json(
                topics.alarm(change.subject, name, change.kind),
                &document,
                true,
                None,
            ))
        }
        Output::Degree(change) => {
            let channel = setup.channels.get(change.channel.0 as usize)?;
            let document = degree::DegreeDocument::new(change, channel);
            Some(json(topics.degree(&channel.name), &document, true, None))
        }
        Output::Notice(notice) => {
            let name = topic::subject_name(notice.subject, setup)?;
            Some(json(
                topics.notice(),
                &notice::NoticeDocument::new(notice, name),
                false,
                None,
            ))
        }
        Output::Answer(answer) => {
            let (topic, correlation) = match &answer.reply_to {
                Some(reply) => (reply.topic.clone(), reply.correlation.clone()),
                None => (topics.answer(), None),
            };
            let document = answer::AnswerDocument::new(answer, &setup.node);
            Some(Document {
                correlation,
                ..json(topic, &document, false, None)
            })
        }
        Output::Validation(validation) => {
            let channel = setup.channels.get(validation.channel.0 as usize)?;
            let document = validation::ValidationDocument::new(validation, channel);
            let topic = topics.validation(&channel.name);
            Some(json(topic, &document, true, None))
        }
        Output::Pair(_) | Output::Wanted { .. } => None,
    }
}

/// The document that removes what is retained on a topic (MQTT 5.0, 3.3.1.3: a retained message of
/// zero bytes).
#[must_use]
pub fn cleared(topic: String) -> Document {
    Document {
        topic,
        payload: Vec::new(),
        retain: true,
        expires: None,
        correlation: None,
    }
}

/// A document with a JSON payload.
fn json(
    topic: String,
    body: &impl Serialize,
    retain: bool,
    expires: Option<Timestamp>,
) -> Document {
    Document {
        topic,
        payload: to_json(body),
        retain,
        expires,
        correlation: None,
    }
}

/// A payload.
///
/// # Panics
/// Never: the documents have only fields that JSON can hold.
pub(crate) fn to_json(body: &impl Serialize) -> Vec<u8> {
    serde_json::to_vec(body).expect("documents have string keys and finite numbers only")
}
