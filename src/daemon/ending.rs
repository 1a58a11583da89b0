//! The orderly end: record, publish, wait for the broker, say goodbye.

use super::now;
use super::turn::Daemon;
use crate::broker::Event;
use crate::document::state::Doing;
use std::time::Duration;
use tokio::time::Instant;

/// How long the goodbye waits for the broker to take what waits in the outbox, for the last state
/// document, and for the goodbye itself.
const DRAIN_LIMIT: Duration = Duration::from_secs(5);
const LAST_STATE_LIMIT: Duration = Duration::from_secs(2);
const GOODBYE_LIMIT: Duration = Duration::from_secs(2);

/// Whether documents are handed over while something is waited for.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Documents {
    Go,
    /// They would take the room of the last state document.
    Wait,
}

impl Daemon {
    /// Ends. A goodbye makes the broker forget the will, so it is said only after the broker has
    /// taken the last state document; otherwise the will must speak.
    pub(super) async fn finish(mut self) {
        self.commit();
        let limit = Instant::now() + DRAIN_LIMIT;
        self.wait_for(limit, Documents::Go, |daemon| {
            daemon.shell.keeper.outbox().is_empty() && daemon.link.is_quiet()
        })
        .await;
        if self.say_stopped().await {
            self.link.goodbye(GOODBYE_LIMIT).await;
        } else if self.link.is_connected() {
            tracing::warn!(
                "the broker did not take the last state document; leaving without a goodbye, so \
                 that the broker tells that nobody maintains the corrections"
            );
            self.link.cut();
        }
        self.commit();
        if self.pause.is_none() {
            self.seal();
        } else {
            tracing::error!(
                messages = self.shell.keeper.owed(),
                "ending without a record of the last messages; the broker still has them"
            );
        }
        tracing::info!(outbox = self.shell.keeper.outbox().len(), "goodbye");
    }

    /// Brings the record to rest. What could not be sealed, the next start seals.
    fn seal(&mut self) {
        match self.shell.keeper.finish(now()) {
            Ok(_) => {}
            Err(error) => tracing::warn!(%error, "the record's newest file could not be sealed"),
        }
    }

    /// Publishes that we stop; whether the broker has taken it.
    async fn say_stopped(&mut self) -> bool {
        let limit = Instant::now() + LAST_STATE_LIMIT;
        // A state document that is still on its way must not be taken for the last one.
        self.wait_for(limit, Documents::Wait, |daemon| {
            !daemon.rhythm.is_on_its_way() && daemon.link.room() > 0
        })
        .await;
        let why = self.pause.as_ref().map(|pause| pause.why.clone());
        if self.rhythm.is_on_its_way() || !self.publish_state(Doing::Stopped, why) {
            return false;
        }
        self.rhythm.handed();
        self.wait_for(limit, Documents::Wait, |daemon| {
            !daemon.rhythm.is_on_its_way()
        })
        .await;
        self.link.is_connected() && !self.rhythm.is_on_its_way()
    }

    /// Lets the link work until `done` or `limit`, or until there is no connection. Messages that
    /// come in are left with the broker.
    async fn wait_for(
        &mut self,
        limit: Instant,
        documents: Documents,
        done: impl Fn(&Self) -> bool,
    ) {
        loop {
            self.link.send_waiting();
            if documents == Documents::Go {
                self.hand_over_documents();
            }
            if !self.link.is_connected() || done(self) {
                return;
            }
            match tokio::time::timeout_at(limit, self.link.next()).await {
                Ok(Event::Message(_)) => {}
                Ok(event) => self.handle(event),
                Err(_) => return,
            }
        }
    }
}
