//! What is published: documents rendered from the engine's outputs.
//!
//! JSON, UTF-8. Times are RFC 3339 in UTC with all the nanoseconds they have; numbers read back to
//! the same bits; words for machines are lower case with hyphens. Each document carries
//! `schema_version`; its schema stands in `config/schemas/`. Modules in reading order: [`topic`],
//! [`correction`], [`outlook`], [`alarm`], [`degree`], [`step`], [`notice`], [`answer`],
//! [`validation`], [`impact`], [`state`].

pub mod alarm;
pub mod answer;
pub mod correction;
pub mod degree;
pub mod impact;
pub mod notice;
pub mod outlook;
pub mod state;
pub mod step;
pub mod topic;
pub mod validation;
mod word;

use holdtrue_engine::event::Output;
use holdtrue_engine::setup::{ChannelId, Clock, Setup};
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

/// An instant as text: RFC 3339 in UTC, with all the nanoseconds that it has.
#[must_use]
pub fn time_text(instant: Timestamp) -> String {
    word::time(instant)
}

/// The document that `output` is published as; `None` for what only the record keeps.
///
/// `setup` is the one whose positions the output bears: the one in force, and for what a change of
/// configuration says, the one that it replaces.
#[must_use]
pub fn render(output: &Output, setup: &Setup) -> Option<Document> {
    let topics = Topics::new(&setup.node);
    let channel = |id: &ChannelId| setup.channels.get(id.0 as usize);
    match output {
        Output::Correction(correction) => {
            let channel = channel(&correction.channel)?;
            let document = correction::CorrectionDocument::new(correction, channel, setup);
            let expires = expiry(correction.valid_until, setup.clock);
            let topic = topics.correction(&channel.name);
            Some(json(topic, &document, true, expires))
        }
        Output::Withdrawn { channel: id, .. } => {
            Some(cleared(topics.correction(&channel(id)?.name)))
        }
        Output::Corrected(corrected) => {
            let channel = channel(&corrected.channel)?;
            let document = correction::CorrectedDocument::new(corrected, channel);
            let topic = topics.corrected(&channel.name);
            Some(json(topic, &document, false, None))
        }
        Output::Outlook(outlook) => {
            let channel = channel(&outlook.channel)?;
            let document = outlook::OutlookDocument::new(outlook, channel);
            let expires = expiry(outlook.valid_until, setup.clock);
            let topic = topics.outlook(&channel.name);
            Some(json(topic, &document, true, expires))
        }
        Output::OutlookWithdrawn { channel: id, .. } => {
            Some(cleared(topics.outlook(&channel(id)?.name)))
        }
        Output::Alarm(change) => {
            let name = topic::subject_name(change.subject, setup)?;
            let document = alarm::AlarmDocument::new(change, name);
            let topic = topics.alarm(change.subject, name, change.kind);
            Some(json(topic, &document, true, None))
        }
        Output::Degree(change) => {
            let channel = channel(&change.channel)?;
            let document = degree::DegreeDocument::new(change, channel);
            Some(json(topics.degree(&channel.name), &document, true, None))
        }
        Output::Step(step) => {
            let channel = setup.channels.get(step.channel.0 as usize)?;
            let document = step::StepDocument::new(step, channel);
            Some(json(topics.step(&channel.name), &document, true, None))
        }
        Output::Notice(notice) => {
            let name = topic::subject_name(notice.subject, setup)?;
            let document = notice::NoticeDocument::new(notice, name);
            Some(json(topics.notice(), &document, false, None))
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
            let channel = channel(&validation.channel)?;
            let document = validation::ValidationDocument::new(validation, channel);
            let topic = topics.validation(&channel.name);
            Some(json(topic, &document, true, None))
        }
        Output::Pair(_) | Output::Wanted { .. } => None,
    }
}

/// When the broker is to drop a document that holds until then. Recordings run in their own time;
/// an expiry counts the broker's seconds and would mean nothing.
fn expiry(valid_until: Timestamp, clock: Clock) -> Option<Timestamp> {
    (clock == Clock::Live).then_some(valid_until)
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
