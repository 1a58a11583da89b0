//! The status signals of a channel after NAMUR NE 107: what a maintenance system shows of it.
//!
//! | condition | signal |
//! | --- | --- |
//! | no indication for too long; a sensor that is stuck | failure |
//! | its reference is being shown to it (an open gate) | function check |
//! | corrected value fails; correction limit hit; locked out; taken back | out of specification |
//! | error fails; fast drift; step; noise grown; reference not good | maintenance required |

use super::Channel;
use super::ladder::Ladder;
use crate::event::{AlarmKind, Cause, Status, Zone};
use crate::setup::ChannelId;

impl Channel {
    /// All signals that apply, the most urgent first; empty: good. `in_check`: whether its
    /// reference is being shown to it just now.
    pub(super) fn statuses(&self, id: ChannelId, in_check: bool) -> Vec<Status> {
        let document = self.publishing.correction();
        let corrected = document.and_then(|document| document.corrected_zone);
        let uncorrected = document.map_or_else(
            || {
                self.stretch
                    .judged()
                    .and_then(|judged| judged.conformity.zone())
            },
            |document| document.zone,
        );
        let alarms = self.alarms.raised(id).into_iter();
        let signals = [
            in_check.then_some(Status::FunctionCheck),
            of_ladder(self.ladder),
            corrected.and_then(of_corrected),
            uncorrected.and_then(|zone| of_uncorrected(zone, document.is_some())),
        ];
        let mut statuses: Vec<Status> = alarms
            .map(|alarm| of_alarm(alarm.kind))
            .chain(signals.into_iter().flatten())
            .collect();
        statuses.sort_unstable();
        statuses.dedup();
        statuses
    }
}

fn of_alarm(kind: AlarmKind) -> Status {
    match kind {
        AlarmKind::DataGap | AlarmKind::Stuck => Status::Failure,
        AlarmKind::ScreenLockedOut | AlarmKind::CorrectionLimit => Status::OutOfSpecification,
        AlarmKind::ErrorLimit
        | AlarmKind::DriftRate
        | AlarmKind::TimeToLimit
        | AlarmKind::NoiseGrowth
        | AlarmKind::Step
        | AlarmKind::ReferenceStale
        | AlarmKind::ReferenceStep
        | AlarmKind::ReferenceStuck
        | AlarmKind::CertificateExpiry => Status::MaintenanceRequired,
    }
}

fn of_ladder(ladder: Ladder) -> Option<Status> {
    match ladder {
        Ladder::RawOnly { .. } | Ladder::Advise => None,
        Ladder::Withdrawn { .. } => Some(Status::OutOfSpecification),
        Ladder::Hold { because, .. } => Some(match because {
            Cause::ScreenLockedOut | Cause::CorrectionSize | Cause::CorrectionRate => {
                Status::OutOfSpecification
            }
            Cause::ReferenceStep
            | Cause::ReferenceStuck
            | Cause::ReferenceStale
            | Cause::Quarantined
            | Cause::NotRenewed
            | Cause::StretchEnded
            | Cause::MonitorOnly
            | Cause::NothingLearned => Status::MaintenanceRequired,
        }),
    }
}

fn of_corrected(zone: Zone) -> Option<Status> {
    match zone {
        Zone::Pass => None,
        Zone::ConditionalPass => Some(Status::MaintenanceRequired),
        Zone::ConditionalFail | Zone::Fail => Some(Status::OutOfSpecification),
    }
}

/// The uncorrected error counts for less while a correction takes it away.
fn of_uncorrected(zone: Zone, corrected: bool) -> Option<Status> {
    match zone {
        Zone::Pass => None,
        Zone::ConditionalPass => Some(Status::MaintenanceRequired),
        Zone::ConditionalFail | Zone::Fail if corrected => Some(Status::MaintenanceRequired),
        Zone::ConditionalFail | Zone::Fail => Some(Status::OutOfSpecification),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::testing::channel_setup;

    /// Check value V45 (NE 107, from memory): a check in progress while out of tolerance shows
    /// function check, and keeps out of specification as a detail.
    #[test]
    fn a_check_in_progress_comes_before_what_it_may_be_about() {
        let mut channel = Channel::new(&channel_setup(), 0);
        assert_eq!(channel.statuses(ChannelId(0), false), []);
        channel.ladder = Ladder::Withdrawn {
            because: Cause::ReferenceStale,
        };
        let shown = channel.statuses(ChannelId(0), true);
        assert_eq!(shown, [Status::FunctionCheck, Status::OutOfSpecification]);
    }

    #[test]
    fn a_correction_makes_a_failing_error_a_matter_of_maintenance() {
        for zone in [Zone::ConditionalFail, Zone::Fail] {
            let with = of_uncorrected(zone, true);
            assert_eq!(with, Some(Status::MaintenanceRequired));
            let without = of_uncorrected(zone, false);
            assert_eq!(without, Some(Status::OutOfSpecification));
        }
        assert_eq!(of_corrected(Zone::Pass), None);
    }
}
