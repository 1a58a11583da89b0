//! Whether a setup read back from a record holds together, so that nothing that follows a position
//! or counts by a length can go astray. What comes from a configuration was checked there, with
//! better words.

use super::{ChannelId, ChannelSetup, FitSetup, ReferenceId, ReferenceKind, Setup, WindowLength};
use crate::fit::basis::{MAX_SPAN_DEGREE, MAX_TIME_DEGREE, MOST_INFLUENCES};

/// Most segments of a window.
const MOST_SEGMENTS: u32 = 1024;

impl Setup {
    /// Says what does not hold together.
    pub(crate) fn check(&self) -> Result<(), &'static str> {
        for reference in &self.references {
            let known = match &reference.kind {
                ReferenceKind::Measured | ReferenceKind::Constant { .. } => true,
                ReferenceKind::Checks { points } => points.iter().all(|&id| self.is_gated(id)),
                ReferenceKind::Group { members } => members.iter().all(|&id| self.has_channel(id)),
            };
            if !known {
                return Err("has a reference that refers to what is not there");
            }
        }
        for channel in &self.channels {
            let sources = &channel.influences;
            let known = (channel.reference.0 as usize) < self.references.len()
                && sources
                    .iter()
                    .all(|it| (it.source.0 as usize) < self.influences.len());
            if !known {
                return Err("has a channel that refers to what is not there");
            }
            if !channel.is_sound() {
                return Err("has a channel with an impossible fit");
            }
        }
        Ok(())
    }

    /// Whether the reference is one that several known values may consist of.
    fn is_gated(&self, id: ReferenceId) -> bool {
        self.references
            .get(id.0 as usize)
            .is_some_and(|it| matches!(it.kind, ReferenceKind::Constant { gated: true, .. }))
    }

    fn has_channel(&self, id: ChannelId) -> bool {
        (id.0 as usize) < self.channels.len()
    }
}

impl ChannelSetup {
    fn is_sound(&self) -> bool {
        self.fit.is_sound()
            && self.influences.len() == usize::from(self.fit.influences)
            && 0.0 < self.coverage
            && self.coverage < 1.0
    }
}

impl FitSetup {
    fn is_sound(&self) -> bool {
        let long_enough = match self.window {
            WindowLength::Time(length) => length.0 >= i64::from(self.segments),
            WindowLength::Pairs(pairs) => pairs >= self.segments,
        };
        let highest = self.max_degree.max(self.forced_degree.unwrap_or(0));
        long_enough
            && (1..=MOST_SEGMENTS).contains(&self.segments)
            && highest <= MAX_TIME_DEGREE
            && self.max_span_degree.unwrap_or(0) <= MAX_SPAN_DEGREE
            && self.influences <= MOST_INFLUENCES
    }
}
