//! Notices: what a person should be able to read about.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::Notice;
use serde::Serialize;

/// One notice.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct NoticeDocument<'a> {
    schema_version: u32,
    at: String,
    subject: &'static str,
    name: &'a str,
    code: &'a str,
    text: &'a str,
    held_back: u64,
}

impl<'a> NoticeDocument<'a> {
    /// Of one notice; `name` is what it is about.
    #[must_use]
    pub fn new(notice: &'a Notice, name: &'a str) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            at: word::time(notice.at),
            subject: word::subject(notice.subject),
            name,
            code: &notice.code,
            text: &notice.text,
            held_back: notice.held_back,
        }
    }
}
