//! Whether the state of a channel read back from a record fits its setup and holds together, as far
//! as the stations rely on it.

use super::Channel;
use crate::setup::ChannelSetup;

impl Channel {
    /// Says what does not fit.
    pub(crate) fn check(&self, setup: &ChannelSetup) -> Result<(), &'static str> {
        let stepped = self.stepped.iter().map(|step| step.ended());
        for stretch in stepped.chain([&self.stretch]) {
            stretch.check(setup)?;
        }
        Ok(())
    }
}
