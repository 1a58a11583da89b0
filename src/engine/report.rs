//! Where everything that one step says goes: outputs, counters, notices. Refusals are worded here,
//! each with its way out.

use crate::counters::Counters;
use crate::event::{Output, RefusedReason, Subject};
use crate::fleet::LeapWatch;
use crate::kept::Kept;
use crate::notice::NoticeLimiter;
use crate::time::Timestamp;

/// Collects what one step says.
pub(crate) struct Report<'a> {
    pub(crate) outputs: &'a mut Vec<Output>,
    pub(crate) counters: &'a mut Kept<Counters>,
    pub(crate) notices: &'a mut Kept<NoticeLimiter>,
    pub(crate) leaps: &'a mut LeapWatch,
}

impl Report<'_> {
    /// Appends an output.
    pub(crate) fn say(&mut self, output: Output) {
        self.outputs.push(output);
    }

    /// Counts a refusal and sends a notice about it, if one of its kind is due. `what` names the
    /// thing and its value.
    pub(crate) fn refuse(
        &mut self,
        at: Timestamp,
        subject: Subject,
        reason: RefusedReason,
        what: impl FnOnce() -> String,
    ) {
        self.counters.add(subject, reason);
        self.notice(at, subject, reason.code(), || {
            format!("{}: {}", what(), reason.advice())
        });
    }

    /// Sends a notice, if one of its kind is due.
    pub(crate) fn notice(
        &mut self,
        at: Timestamp,
        subject: Subject,
        code: &str,
        text: impl FnOnce() -> String,
    ) {
        if let Some(notice) = self.notices.offer(at, subject, code, text) {
            self.outputs.push(Output::Notice(notice));
        }
    }
}

impl RefusedReason {
    /// A short fixed word for machines.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::UnknownTopic => "unknown-topic",
            Self::Empty => "empty",
            Self::Oversize => "oversize",
            Self::Unreadable => "unreadable",
            Self::Missing => "missing",
            Self::WrongType => "wrong-type",
            Self::NotFinite => "not-finite",
            Self::BadTime => "bad-time",
            Self::Retained => "retained",
            Self::NegativeTime => "negative-time",
            Self::Future => "future",
            Self::Late => "late",
            Self::Duplicate => "duplicate",
            Self::StatusExcluded => "status-excluded",
            Self::OutOfRange => "out-of-range",
            Self::InnovationGate => "innovation-gate",
            Self::NoPartner => "no-partner",
            Self::GroupTooSmall => "group-too-small",
            Self::Stuck => "stuck",
            Self::TooFast => "too-fast",
            Self::NoInfluence => "no-influence",
            Self::ReferenceDoubted => "reference-doubted",
            Self::Quarantined => "quarantined",
        }
    }

    /// What happened and what to do about it, for a technician.
    #[must_use]
    pub fn advice(self) -> &'static str {
        match self {
            Self::UnknownTopic => {
                "no channel, reference or gate is configured for it; configure one or narrow \
                 the subscription"
            }
            Self::Empty => "the payload was empty; check the sender",
            Self::Oversize => "the payload is larger than the limit; check the sender",
            Self::Unreadable => {
                "the payload is neither a number, JSON nor SenML; check the sender's format"
            }
            Self::Missing => "the configured place is not in the payload; check `value` and `time`",
            Self::WrongType => {
                "the configured place holds something else; check `value` and `time`"
            }
            Self::NotFinite => "that is no usable number; check the sender",
            Self::BadTime => "the time can't be read; RFC 3339 or epoch seconds are understood",
            Self::Retained => "an old value kept by the broker, not a new one; it was left out",
            Self::NegativeTime => "the time lies before 1970; check the sender's clock",
            Self::Future => "the time lies too far ahead; check the sender's clock",
            Self::Late => "older than `lateness` allows; raise it if the sender is this slow",
            Self::Duplicate => "the same value for the same time came before; it was left out",
            Self::StatusExcluded => "the sender's status says not to use it; look at the device",
            Self::OutOfRange => "outside the sensor's `range`; look at the sensor and its wiring",
            Self::InnovationGate => {
                "too far from what the fit expects; one such value is an outlier, several a step"
            }
            Self::NoPartner => {
                "nothing near enough in time to pair with; check the other source and `max_gap`"
            }
            Self::GroupTooSmall => {
                "fewer than three other members had a value; bring members back or add some"
            }
            Self::Stuck => "the sensor repeats itself and is not believed; look at the sensor",
            Self::TooFast => {
                "changed faster than `max_rate` allows; look at the sensor, or raise the limit"
            }
            Self::NoInfluence => {
                "no value of the influence quantity near enough in time; check its source and \
                 `max_gap`"
            }
            Self::ReferenceDoubted => {
                "all channels of its reference disagree with that value; look at the reference"
            }
            Self::Quarantined => "it is quarantined; release it if it is good after all",
        }
    }
}
