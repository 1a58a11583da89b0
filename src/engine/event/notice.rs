//! Notices: what a person should be able to read about.

use crate::event::Subject;
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Something that a person should be able to read about.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Notice {
    /// When.
    pub at: Timestamp,
    /// About what.
    pub subject: Subject,
    /// A short fixed word for machines, e.g. `unknown-topic`.
    pub code: String,
    /// One sentence for people.
    pub text: String,
    /// How many of the same kind were held back since the last one.
    pub held_back: u64,
}
