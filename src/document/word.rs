//! The fixed words that machines find in documents, and times as text.

use holdtrue_engine::event::{AlarmState, Cause, RefusedReason, Rung, Status, Subject, Zone};
use holdtrue_engine::fit::SpanRefusal;
use holdtrue_engine::setup::DecisionRule;
use holdtrue_engine::setup::SpanSide;
use holdtrue_engine::time::Timestamp;

/// RFC 3339 in UTC, with as many digits of the second as the instant has.
pub(super) fn time(instant: Timestamp) -> String {
    jiff::Timestamp::from_nanosecond(i128::from(instant.0))
        .expect("64 bits of nanoseconds end in the year 2262, the library's range in 9999")
        .to_string()
}

/// An alarm's state.
pub(super) fn alarm_state(state: AlarmState) -> &'static str {
    match state {
        AlarmState::Normal => "normal",
        AlarmState::Unacknowledged => "unacknowledged",
    }
}

/// What an alarm or notice is about.
pub(super) fn subject(subject: Subject) -> &'static str {
    match subject {
        Subject::Node => "node",
        Subject::Channel(_) => "channel",
        Subject::Reference(_) => "reference",
        Subject::Influence(_) => "influence",
    }
}

/// Which side of a pair the span is a function of.
pub(super) fn span_side(side: SpanSide) -> &'static str {
    match side {
        SpanSide::Reference => "reference",
        SpanSide::Indication => "indication",
    }
}

/// Why no span is claimed.
pub(super) fn span_refusal(refusal: SpanRefusal) -> &'static str {
    match refusal {
        SpanRefusal::FewSegments => "few-segments",
        SpanRefusal::NoSpread => "no-spread",
        SpanRefusal::RegressorNoise => "regressor-noise",
    }
}

/// A conformity zone.
pub(super) fn zone(zone: Zone) -> &'static str {
    match zone {
        Zone::Pass => "pass",
        Zone::ConditionalPass => "conditional-pass",
        Zone::ConditionalFail => "conditional-fail",
        Zone::Fail => "fail",
    }
}

/// A decision rule in words, with its source.
pub(super) fn decision_rule(rule: DecisionRule) -> String {
    match rule {
        DecisionRule::Simple => {
            "simple acceptance: accepted if |e| ≤ MPE (guard band w = 0; ILAC-G8:09/2019, 4.2.2)"
                .to_owned()
        }
        DecisionRule::GuardBand { multiple } => format!(
            "guard band w = {multiple}·U: accepted if |e| ≤ MPE − w (ILAC-G8:09/2019, 4.2.2; \
             JCGM 106:2012, 8.3)"
        ),
    }
}

/// A rung of the fail-safe ladder.
pub(super) fn rung(rung: Rung) -> &'static str {
    match rung {
        Rung::Advise => "advise",
        Rung::Hold => "hold",
        Rung::Withdrawn => "withdrawn",
        Rung::RawOnly => "raw-only",
    }
}

/// Why a channel does not stand on the first rung.
pub(super) fn cause(cause: Cause) -> &'static str {
    match cause {
        Cause::ReferenceStep => "reference-step",
        Cause::ReferenceStuck => "reference-stuck",
        Cause::ReferenceStale => "reference-stale",
        Cause::ScreenLockedOut => "screen-locked-out",
        Cause::CorrectionSize => "correction-size",
        Cause::CorrectionRate => "correction-rate",
        Cause::Quarantined => "quarantined",
        Cause::NotRenewed => "not-renewed",
        Cause::StretchEnded => "stretch-ended",
        Cause::MonitorOnly => "monitor-only",
        Cause::NothingLearned => "nothing-learned",
    }
}

/// A status signal after NAMUR NE 107.
pub(super) fn status(status: Status) -> &'static str {
    match status {
        Status::Failure => "failure",
        Status::FunctionCheck => "function-check",
        Status::OutOfSpecification => "out-of-specification",
        Status::MaintenanceRequired => "maintenance-required",
        Status::Good => "good",
    }
}

/// Why something was not used.
pub(super) fn refused_reason(reason: RefusedReason) -> &'static str {
    match reason {
        RefusedReason::UnknownTopic => "unknown-topic",
        RefusedReason::Empty => "empty",
        RefusedReason::Oversize => "oversize",
        RefusedReason::Unreadable => "unreadable",
        RefusedReason::Missing => "missing",
        RefusedReason::WrongType => "wrong-type",
        RefusedReason::NotFinite => "not-finite",
        RefusedReason::BadTime => "bad-time",
        RefusedReason::Retained => "retained",
        RefusedReason::NegativeTime => "negative-time",
        RefusedReason::Future => "future",
        RefusedReason::Late => "late",
        RefusedReason::Duplicate => "duplicate",
        RefusedReason::StatusExcluded => "status-excluded",
        RefusedReason::OutOfRange => "out-of-range",
        RefusedReason::InnovationGate => "innovation-gate",
        RefusedReason::NoPartner => "no-partner",
        RefusedReason::GroupTooSmall => "group-too-small",
        RefusedReason::Stuck => "stuck",
        RefusedReason::TooFast => "too-fast",
        RefusedReason::NoInfluence => "no-influence",
        RefusedReason::ReferenceDoubted => "reference-doubted",
        RefusedReason::Quarantined => "quarantined",
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_keep_every_nanosecond_and_show_no_more_than_they_have() {
        assert_eq!(time(Timestamp(0)), "1970-01-01T00:00:00Z");
        assert_eq!(
            time(Timestamp(1_577_836_800_123_456_789)),
            "2020-01-01T00:00:00.123456789Z"
        );
        assert_eq!(
            time(Timestamp(1_577_836_800_500_000_000)),
            "2020-01-01T00:00:00.5Z"
        );
        assert_eq!(time(Timestamp(-1)), "1969-12-31T23:59:59.999999999Z");
        // The ends of the range must not panic.
        assert!(time(Timestamp(i64::MAX)).starts_with("2262-04-11T"));
        assert!(time(Timestamp(i64::MIN)).starts_with("1677-09-21T"));
    }
}
