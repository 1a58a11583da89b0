//! `plant publish`: a run to a broker.

use super::Failure;
use super::broker::Target;
use super::run::Run;
use crate::message::Topics;
use clap::Args;

/// Publishes a run.
#[derive(Debug, Args)]
pub(super) struct Publish {
    #[command(flatten)]
    run: Run,
    #[command(flatten)]
    target: Target,
}

impl Publish {
    pub(super) fn carry_out(self) -> Result<(), Failure> {
        let plant = self.run.plant()?;
        let topics = Topics::new(&plant.scenario);
        let expected = Some(plant.expected_samples());
        let messages = plant.map(|sample| topics.message(&sample));
        let delivered = self.target.deliver(messages, expected)?;
        self.target.report(delivered, 0)
    }
}
