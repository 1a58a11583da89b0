//! After a quarantine: which corrections were published from the values that turned out to be bad.
//! Nothing of them is deleted; whoever used them must look.

use super::Keeper;
use crate::document;
use crate::document::impact::{Affected, ImpactDocument, LISTED};
use crate::record::RecordError;
use holdtrue_engine::event::{Correction, Input, Output, Quarantined, Wish};
use holdtrue_engine::setup::ChannelId;
use holdtrue_engine::time::Timestamp;

impl<T> Keeper<T> {
    /// When an input came that asks for what has been published so far: all of that must then be
    /// in the record.
    pub(super) fn looks_back(input: &Input) -> Option<Timestamp> {
        match input {
            Input::Order(order) if matches!(order.wish, Wish::Quarantine(_)) => {
                Some(order.received)
            }
            _ => None,
        }
    }

    /// Adds the impact lists of a quarantine that was just accepted, one for each channel that
    /// rests on the values.
    pub(super) fn list_impact(&mut self, outputs: &[Output]) {
        for output in outputs {
            if let Output::Answer(answer) = output
                && let Some(quarantined) = &answer.quarantine
                && !quarantined.released
                && let Err(error) = self.list(quarantined)
            {
                tracing::error!(
                    %error,
                    order = quarantined.quarantine,
                    "the corrections that a quarantine touches can't be listed"
                );
                let text = format!(
                    "the corrections that quarantine {} touches can't be listed ({error}); tell it \
                     again under another id",
                    quarantined.quarantine
                );
                self.tell(answer.at, "impact-not-listed", text);
            }
        }
    }

    fn list(&mut self, quarantined: &Quarantined) -> Result<(), RecordError> {
        let interval = &quarantined.interval;
        for name in &quarantined.channels {
            let channels = &self.setup.channels;
            let Some(place) = channels.iter().position(|channel| channel.name == *name) else {
                continue;
            };
            let bodies = self
                .record
                .corrections(ChannelId::at(place), interval.from)?;
            let mut affected = Vec::new();
            for body in &bodies {
                let Ok(Output::Correction(correction)) = serde_json::from_str(body) else {
                    continue;
                };
                if rests_on(&correction, quarantined) {
                    affected.push(Affected::new(&correction));
                }
            }
            let count = affected.len();
            // The newest matter most.
            affected.drain(..count.saturating_sub(LISTED));
            let channel = &self.setup.channels[place];
            let document = ImpactDocument::new(quarantined, channel, count, affected);
            let document = document::impact::publish(&self.setup.node, name, &document);
            self.publish(document);
        }
        Ok(())
    }
}

/// Whether a correction's window holds part of the interval.
fn rests_on(correction: &Correction, quarantined: &Quarantined) -> bool {
    let window = &correction.window;
    let interval = &quarantined.interval;
    window.to >= interval.from && interval.to.is_none_or(|to| window.from < to)
}
