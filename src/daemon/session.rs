//! What the loop does when connections come and go: subscriptions, and documents that the broker
//! has lost.

use super::memory::Step;
use super::now;
use super::turn::Daemon;
use crate::broker::Lost;
use std::collections::BTreeSet;
use tokio::time::Instant;

/// Short-lived connections in a row after which a shared client name is suspected.
const SUSPICIOUS_FAILURES: u32 = 4;

impl Daemon {
    /// Before each connection: whether the broker kept the session is not known, so the note of it
    /// becomes void until the broker has said so. Otherwise a crash between its word that the
    /// session is gone and the record of that word would leave the note standing, the next start
    /// would find a session (a new one), and the retained documents would never come again.
    pub(super) fn doubt_session(&mut self) {
        let noted = self.shell.keeper.subscriptions();
        if noted.is_empty() {
            return;
        }
        self.remembered = noted.clone();
        self.shell.keeper.set_subscriptions(BTreeSet::new());
        if self.pause.is_none() {
            self.commit();
        }
    }

    pub(super) fn greet(&mut self, session_present: bool) {
        self.figures.connections += 1;
        self.shell.keeper.outbox_mut().note_here();
        tracing::info!(session_present, "connected to the broker");
        if session_present {
            self.memory.session_kept(&self.remembered);
        } else {
            self.memory.session_lost();
            if self.pause.is_some() {
                tracing::warn!("the broker has lost our session, and what it is owed has to wait");
            }
        }
        self.restore_memory();
        // Also at each start: whose session the broker kept is not certain (another broker at the
        // same address, a client name that was used before), and asking twice does no harm.
        if self.memory.must_subscribe() {
            let filters = self.shell.filters();
            // What is no longer wanted has to end.
            let old: Vec<String> = self
                .remembered
                .iter()
                .filter(|filter| session_present && !filters.contains(filter))
                .cloned()
                .collect();
            self.link.subscribe(filters, &old);
        }
        self.rhythm.change();
    }

    pub(super) fn note_subscribed(&mut self, refused: &[(String, String)]) {
        let filters = self.shell.filters();
        let (new, changed) = self.memory.subscribed(filters, refused);
        for (filter, why) in new {
            tracing::error!(
                filter,
                why,
                "the broker refuses this subscription: nothing comes in from there. May this \
                 client read it? Asking again every few minutes"
            );
        }
        if changed {
            let confirmed = filters.len() - self.memory.refused().len();
            tracing::info!(filters = confirmed, "subscribed");
            self.rhythm.change();
        }
    }

    /// Does what is owed to the broker's session and can be done now.
    pub(super) fn restore_memory(&mut self) {
        let clock = Instant::now();
        // Without a connection this does nothing.
        let again = self.memory.ask_again(clock);
        self.link.subscribe(&again, &[]);
        while self.pause.is_none()
            && let Some(step) = self.memory.step(clock)
        {
            let done = match &step {
                Step::Forget => self.note_subscriptions(BTreeSet::new()),
                Step::Note(filters) => self.note_subscriptions(filters.clone()),
                Step::PublishStanding => self.publish_standing(),
            };
            if done {
                self.memory.done(&step);
            } else {
                tracing::warn!("what the broker's session is owed has to wait");
                self.memory.failed(clock);
            }
            // With nothing to write there will be no commit.
            if step == Step::PublishStanding && !self.shell.keeper.has_news() {
                self.memory.committed();
            }
        }
    }

    /// Notes on the disk what the broker confirmed; whether that was possible.
    fn note_subscriptions(&mut self, filters: BTreeSet<String>) -> bool {
        self.shell.keeper.set_subscriptions(filters);
        self.commit();
        self.pause.is_none()
    }

    /// Puts the retained documents into the outbox again; whether that was possible.
    fn publish_standing(&mut self) -> bool {
        match self.shell.keeper.publish_standing(now()) {
            Ok(0) => true,
            Ok(documents) => {
                tracing::info!(
                    documents,
                    "the broker has lost our session; publishing all retained documents again"
                );
                true
            }
            Err(error) => {
                tracing::warn!(%error, "the retained documents can't be read");
                false
            }
        }
    }

    pub(super) fn note_lost(&mut self, lost: &Lost) {
        self.shell.keeper.outbox_mut().note_away();
        self.held.forget_guaranteed();
        self.rhythm.answered();
        self.note_alarm_lost();
        self.doubt_session();
        let next_try = lost.next_try;
        if lost.taken_over {
            tracing::error!(
                client_id = self.client_id,
                ?next_try,
                "another client with our client_id took the session: two daemons must not share \
                 one; give each its own [broker] client_id"
            );
        } else {
            tracing::warn!(why = lost.why, ?next_try, "no connection to the broker");
        }
        if !lost.taken_over && lost.failures == SUSPICIOUS_FAILURES && self.figures.connections > 1
        {
            tracing::warn!(
                client_id = self.client_id,
                "connections break again and again; does another client use our client_id?"
            );
        }
    }
}
