//! What the broker's session is owed, step by step, as in `src/daemon/memory.rs` but in simulated
//! time.

use crate::plant::minutes;
use holdtrue_engine::time::Timestamp;

/// What is owed.
pub(crate) struct Memory {
    must_subscribe: bool,
    forget: bool,
    documents: Documents,
    confirmed: Option<String>,
    not_before: Timestamp,
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Documents {
    Stand,
    Owed,
    /// In the outbox, but not yet on the disk.
    Noted,
}

/// The next thing to do with the record.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) enum Step {
    /// Make the noted subscriptions void.
    Forget,
    /// Put the retained documents into the outbox.
    PublishStanding,
    /// Note this subscription.
    Note(String),
}

impl Memory {
    /// `remembered`: the record knows subscriptions that were confirmed.
    pub(crate) fn new(remembered: bool) -> Self {
        Self {
            must_subscribe: true,
            forget: false,
            documents: if remembered {
                Documents::Stand
            } else {
                Documents::Owed
            },
            confirmed: None,
            not_before: Timestamp(i64::MIN),
        }
    }

    pub(crate) fn session_kept(&mut self, filter: &str) {
        if !self.must_subscribe && self.confirmed.is_none() {
            self.confirmed = Some(filter.to_owned());
        }
    }

    pub(crate) fn session_lost(&mut self) {
        self.must_subscribe = true;
        self.forget = true;
        self.documents = Documents::Owed;
        self.confirmed = None;
    }

    pub(crate) fn must_subscribe(&self) -> bool {
        self.must_subscribe
    }

    pub(crate) fn subscribed(&mut self, filter: &str) {
        self.must_subscribe = false;
        self.confirmed = Some(filter.to_owned());
    }

    pub(crate) fn step(&self, now: Timestamp) -> Option<Step> {
        if now < self.not_before {
            return None;
        }
        if self.forget {
            return Some(Step::Forget);
        }
        match self.documents {
            Documents::Owed => Some(Step::PublishStanding),
            Documents::Noted => None,
            Documents::Stand => self.confirmed.clone().map(Step::Note),
        }
    }

    pub(crate) fn done(&mut self, step: &Step) {
        match step {
            Step::Forget => self.forget = false,
            Step::PublishStanding => self.documents = Documents::Noted,
            Step::Note(_) => self.confirmed = None,
        }
    }

    pub(crate) fn failed(&mut self, now: Timestamp) {
        self.not_before = now.plus(minutes(1));
    }

    /// Everything noted so far is on the disk.
    pub(crate) fn committed(&mut self) {
        if self.documents == Documents::Noted {
            self.documents = Documents::Stand;
        }
    }
}
