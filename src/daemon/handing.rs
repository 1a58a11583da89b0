//! What the loop hands to the link: documents from the outbox, and the state document.

use super::now;
use super::report::{LoopFigures, state_document};
use super::turn::Daemon;
use crate::broker::{Answer, Publish, Token};
use crate::document::state::{Doing, RefusedSubscription};
use crate::document::topic::Topics;
use crate::record::Settled;
use holdtrue_engine::time::Timestamp;
use tokio::time::Instant;

impl Daemon {
    /// Hands documents and the state document to the link, as long as it has room.
    pub(super) fn hand_over(&mut self) {
        // Acknowledgements first: until they have gone, the link takes no document.
        self.link.send_waiting();
        // The state goes first: it is the one that must come through when much waits.
        if self.rhythm.due().is_some_and(|due| due <= Instant::now()) {
            self.hand_over_state();
        }
        self.hand_over_alarm();
        self.hand_over_documents();
    }

    pub(super) fn hand_over_documents(&mut self) {
        if self.hand_again.is_some_and(|after| after > Instant::now()) {
            return;
        }
        while self.link.room() > 0 {
            let Some((number, document)) = self.shell.keeper.outbox().next_to_hand() else {
                return;
            };
            let expiry = match document.expires.map(seconds_until) {
                Some(None) => {
                    self.shell.keeper.expire(number);
                    continue;
                }
                Some(seconds) => seconds,
                None => None,
            };
            let publish = Publish {
                topic: &document.topic,
                payload: &document.payload,
                retain: document.retain,
                expiry,
                response_topic: None,
                correlation: document.correlation.as_deref(),
            };
            if !self.link.fits(&publish) {
                self.refuse(
                    number,
                    "larger than the broker's packet limit",
                    "Raise that limit in the broker's configuration.",
                );
                continue;
            }
            let token = Token::Document(number);
            if !self.link.publish(token, &publish) {
                return;
            }
            self.shell.keeper.outbox_mut().set_handed(number);
        }
    }

    fn hand_over_state(&mut self) {
        let (doing, why) = match &self.pause {
            Some(pause) => (Doing::RecordPaused, Some(pause.why.clone())),
            None => (Doing::Running, None),
        };
        if self.publish_state(doing, why) {
            self.rhythm.handed();
        }
    }

    pub(super) fn publish_state(&mut self, doing: Doing, why: Option<String>) -> bool {
        if self.link.room() == 0 {
            return false;
        }
        let figures = LoopFigures {
            messages_dropped: self.held.dropped(),
            ..self.figures
        };
        let (document, mut standing) =
            state_document(&self.shell.keeper, doing, why, figures, now());
        standing.subscriptions_refused = self.refused_subscriptions();
        let topic = Topics::new(&self.shell.keeper.setup().node).state();
        let mut payload = document.clone().with(standing.clone()).to_json();
        if !self.link.fits(&state_publish(&topic, &payload)) {
            standing.channels = None;
            payload = document.with(standing).to_json();
        }
        self.link
            .publish(Token::State, &state_publish(&topic, &payload))
    }

    fn refused_subscriptions(&self) -> Vec<RefusedSubscription> {
        let refused = self.memory.refused().iter();
        refused
            .map(|(filter, why)| RefusedSubscription {
                filter: filter.clone(),
                why: why.clone(),
            })
            .collect()
    }

    /// The broker answered a document.
    pub(super) fn settle(&mut self, token: Token, answer: Answer) {
        match token {
            Token::State => self.settle_state(answer),
            Token::Alarm => self.settle_alarm(&answer),
            Token::Document(number) => match answer {
                Answer::Taken => {
                    self.hand_again_back_off.reset();
                    self.shell.keeper.accepted(number);
                }
                Answer::NotNow(why) => {
                    let wait = self.hand_again_back_off.next_pause();
                    self.hand_again = Some(Instant::now() + wait);
                    self.shell.keeper.outbox_mut().hand_again_from(number);
                    tracing::warn!(why, next_try = ?wait, "the broker takes no documents now");
                }
                Answer::Never(why) => {
                    let hint = "May this client publish there?";
                    self.refuse(number, &format!("the broker refuses it: {why}"), hint);
                }
            },
        }
    }

    fn settle_state(&mut self, answer: Answer) {
        self.rhythm.answered();
        match answer {
            Answer::Taken => self.state_refused = None,
            Answer::NotNow(why) | Answer::Never(why) => {
                // One comes every half minute; the same complaint once is enough.
                if self.state_refused.as_ref() != Some(&why) {
                    tracing::error!(why, "the broker refuses the state document");
                }
                self.state_refused = Some(why);
            }
        }
    }

    fn refuse(&mut self, number: i64, why: &str, hint: &str) {
        self.figures.documents_refused += 1;
        if let Some(document) = self.shell.keeper.settle(number, Settled::Refused) {
            self.refusals.tell(&document.topic, why, hint);
        }
    }
}

fn state_publish<'a>(topic: &'a str, payload: &'a [u8]) -> Publish<'a> {
    Publish {
        topic,
        payload,
        retain: true,
        ..Publish::default()
    }
}

/// Whole seconds until `instant`, rounded up; `None` when it has passed.
fn seconds_until(instant: Timestamp) -> Option<u32> {
    let left = u64::try_from(instant.since(now()).0)
        .ok()
        .filter(|left| *left > 0)?;
    Some(u32::try_from(left.div_ceil(1_000_000_000)).unwrap_or(u32::MAX))
}
