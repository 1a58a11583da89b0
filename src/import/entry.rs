//! One value of a recording.

use crate::payload::Target;
use holdtrue_engine::event::{Gate, Input, Reading, Source};
use holdtrue_engine::setup::ReferenceId;
use holdtrue_engine::time::Timestamp;

/// One value of a recording, or one state of a gate.
#[derive(Clone, Debug, PartialEq)]
pub struct Entry {
    /// Phenomenon time.
    pub at: Timestamp,
    /// What it says.
    pub what: What,
    /// Position of its column in the mapping.
    pub column: usize,
    /// Where it stands in its file.
    pub line: u64,
}

/// What an entry says.
#[derive(Clone, Debug, PartialEq)]
pub enum What {
    /// A value.
    Value {
        /// Whose.
        source: Source,
        /// In the source's unit.
        value: f64,
        /// The status column says that it is not to be used.
        excluded: bool,
    },
    /// A `valid_when` condition.
    Gate {
        /// Whose.
        reference: ReferenceId,
        /// Whether the reference value holds from then on.
        open: bool,
    },
}

impl Entry {
    /// In the order of time. Of one instant gates come first, then reference values, influence
    /// quantities, indications, so that a value finds what belongs to it; then the mapping's order
    /// counts. How the values are distributed over files plays no part.
    #[must_use]
    pub fn order(&self) -> (Timestamp, u8, usize) {
        let rank = match self.what {
            What::Gate { .. } => 0,
            What::Value { source, .. } => match source {
                Source::Reference(_) => 1,
                Source::Influence(_) => 2,
                Source::Indication(_) => 3,
            },
        };
        (self.at, rank, self.column)
    }

    /// What the engine is told.
    #[must_use]
    pub fn input(&self) -> Input {
        match self.what {
            What::Value {
                source,
                value,
                excluded,
            } => Input::Reading(Reading {
                source,
                received: self.at,
                phenomenon: self.at,
                value,
                sequence: None,
                excluded,
            }),
            What::Gate { reference, open } => Input::Gate(Gate {
                reference,
                received: self.at,
                phenomenon: self.at,
                open,
            }),
        }
    }
}

/// What a value of `target` says; a gate's state is no value.
pub(super) fn value(target: &Target, value: f64, excluded: bool) -> What {
    What::Value {
        source: target.source(),
        value,
        excluded,
    }
}
