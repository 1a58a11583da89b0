//! What a run can show to be broken.

use std::fmt;

/// A broken promise.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Broken {
    /// Something was acknowledged and is not in the record.
    AcknowledgedMissing,
    /// A reading was let in twice, or an order done twice.
    UsedTwice,
    /// A reading is in the record, and only as one that came before.
    NeverUsed,
    /// The broker has a document that is not in the record.
    PublishedMissing,
    /// A document in the record follows from no output there.
    Unfounded,
    /// The engine says otherwise than the record.
    Replay,
    /// A saved state is not the one that the inputs lead to.
    SavedState,
    /// A day opens with another state than the one that the day before led to.
    Opening,
    /// A restored daemon is not as if it had never stopped.
    Restored,
    /// A file does not go on from the one before.
    Gap,
    /// Inputs that had been committed are gone.
    Lost,
    /// The verification finds a fault that nobody made.
    Verification,
    /// A file can't be read.
    Unreadable,
    /// The broker's retained documents are not those of the record.
    Retained,
    /// A finished file is not sealed, or its seal is not noted.
    Unsealed,
    /// The daemon fails of itself.
    Failed,
    /// The daemon does not come to rest.
    Restless,
}

impl Broken {
    /// With what is known of it.
    pub(crate) fn because(self, text: impl Into<String>) -> Violation {
        Violation {
            what: self,
            text: text.into(),
        }
    }
}

/// A broken promise and where it was seen.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Violation {
    pub(crate) what: Broken,
    pub(crate) text: String,
}

impl fmt::Display for Violation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:?}: {}", self.what, self.text)
    }
}
