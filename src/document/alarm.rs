//! Alarm documents.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::AlarmChange;
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
