//! The keeper with what turns messages into inputs.

use super::now;
use crate::broker::{Message, Ticket};
use crate::configuration::Configuration;
use crate::document::topic::Topics;
use crate::keeper::{Keeper, RestoreError};
use crate::payload::{Intake, OrderIntake, OrderMessage};
use holdtrue_engine::event::Input;
use holdtrue_engine::time::Timestamp;
use std::sync::atomic::AtomicBool;

/// The keeper and what feeds it.
pub(super) struct Shell {
    pub(super) keeper: Keeper<Ticket>,
    intake: Intake,
    orders: OrderIntake,
    filters: Vec<String>,
    /// Kept to save allocations.
    inputs: Vec<Input>,
}

impl Shell {
    /// Opens the record, restores the engine, and lets the configuration take effect if it is new.
    /// `None` when `stop` was set meanwhile.
    pub(super) fn start(
        configuration: &Configuration,
        stop: &AtomicBool,
    ) -> Result<Option<Self>, RestoreError> {
        let folder = &configuration.record.folder;
        let Some(mut keeper) = Keeper::open(folder, now(), stop)? else {
            return Ok(None);
        };
        keeper.retain(configuration.record.retention);
        if *keeper.setup() != configuration.setup {
            tracing::info!(
                channels = configuration.setup.channels.len(),
                references = configuration.setup.references.len(),
                fingerprint = %configuration.setup.fingerprint,
                "configuration takes effect"
            );
            keeper.adopt(&configuration.setup)?;
        }
        // Nothing is owed yet.
        keeper.commit(now())?;
        keeper.answer_wanted()?;
        Ok(Some(Self {
            keeper,
            intake: Intake::new(&configuration.intake),
            orders: OrderIntake::new(&configuration.setup.node),
            filters: filters(configuration),
            inputs: Vec::new(),
        }))
    }

    /// What to subscribe to: the sources' topics, and orders.
    pub(super) fn filters(&self) -> &[String] {
        &self.filters
    }

    /// Decodes a message and takes what it holds; its acknowledgement is owed from now on.
    pub(super) fn take_message(&mut self, message: &Message, received: Timestamp) {
        let mut inputs = std::mem::take(&mut self.inputs);
        inputs.clear();
        let Message {
            topic,
            payload,
            retained,
            ..
        } = message;
        if let Some(verb) = self.orders.verb(topic) {
            let order = OrderMessage {
                verb,
                payload,
                retained: *retained,
                reply_to: message.reply_to.as_ref(),
            };
            inputs.extend(self.orders.take(&order, received));
        } else {
            self.intake
                .take(topic, payload, *retained, received, &mut inputs);
        }
        for input in &inputs {
            self.keeper.take(input);
        }
        self.keeper.owe(message.ticket);
        self.inputs = inputs;
    }
}

/// The sources' topics, and orders.
fn filters(configuration: &Configuration) -> Vec<String> {
    let orders = Topics::new(&configuration.setup.node).orders();
    let sources = configuration.intake.filters.iter().cloned();
    sources.chain([orders]).collect()
}
