//! Log lines about documents that can't be delivered: each topic once, and not thousands of them.

use std::collections::BTreeSet;

/// So many topics are named; a missing permission concerns every document.
const TOPICS_NAMED: usize = 10;

/// Which topics were already told of.
#[derive(Default)]
pub(super) struct Refusals {
    named: BTreeSet<String>,
    told_of_more: bool,
}

impl Refusals {
    /// Tells of a document that stays in the record only.
    pub(super) fn tell(&mut self, topic: &str, why: &str, hint: &str) {
        if self.named.contains(topic) {
            return;
        }
        if self.named.len() < TOPICS_NAMED {
            self.named.insert(topic.to_owned());
            tracing::error!(
                topic,
                why,
                "a document can't be published; it and those like it stay in the record only. \
                 {hint}"
            );
        } else if !self.told_of_more {
            self.told_of_more = true;
            tracing::error!(
                "documents on more topics can't be published; the state document counts them"
            );
        }
    }
}
