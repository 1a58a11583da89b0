//! Alarm documents: the engine's, and the one that it can't raise.

use super::topic::Topics;
use super::{Document, SCHEMA_VERSION, word};
use holdtrue_engine::event::{AlarmChange, AlarmState, Subject};
use holdtrue_engine::time::Timestamp;
use serde::Serialize;

/// The state of one alarm, with the value that was judged and the limit it was judged against.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct AlarmDocument<'a> {
    schema_version: u32,
    subject: &'static str,
    name: &'a str,
    kind: &'static str,
    state: &'static str,
    at: String,
    since: String,
    value: f64,
    limit: f64,
    unit: &'a str,
    text: &'a str,
}

impl<'a> AlarmDocument<'a> {
    /// Of one change; `name` is what the alarm stands on.
    #[must_use]
    pub fn new(change: &'a AlarmChange, name: &'a str) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            subject: word::subject(change.subject),
            name,
            kind: change.kind.code(),
            state: word::alarm_state(change.state),
            at: word::time(change.at),
            since: word::time(change.since),
            value: change.value,
            limit: change.limit,
            unit: &change.unit,
            text: &change.text,
        }
    }
}

/// Kind of the alarm that nothing can be recorded, raised beside the engine, which is not asked
/// anything then.
pub const RECORD_PAUSED: &str = "record-paused";

/// The alarm that nothing can be recorded since `since`, and why; without a reason, that it is over
/// at `at`.
#[must_use]
pub fn record_paused(node: &str, why: Option<&str>, at: Timestamp, since: Timestamp) -> Document {
    let (state, value, text) = match why {
        Some(why) => (
            AlarmState::Unacknowledged,
            1.0,
            format!(
                "the record can't be written ({why}): nothing is taken or corrected until it can; \
                 make room on the disk, or look whether it is read-only or broken"
            ),
        ),
        None => (
            AlarmState::Normal,
            0.0,
            "the record can be written again".to_owned(),
        ),
    };
    let document = AlarmDocument {
        schema_version: SCHEMA_VERSION,
        subject: word::subject(Subject::Node),
        name: node,
        kind: RECORD_PAUSED,
        state: word::alarm_state(state),
        at: word::time(at),
        since: word::time(since),
        value,
        limit: 0.0,
        unit: "",
        text: &text,
    };
    let topic = format!("{}/{RECORD_PAUSED}", Topics::new(node).node_alarms());
    super::json(topic, &document, true, None)
}
