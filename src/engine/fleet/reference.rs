//! What is known of one reference, its alarms, and what a new configuration makes of them.

use super::reference_watch::ReferenceWatch;
use super::{Fleet, trust};
use crate::alarm::Alarm;
use crate::event::{AlarmChange, AlarmKind, AlarmState, Cause, Output, Subject};
use crate::gate::GateHistory;
use crate::report::Report;
use crate::setup::{ReferenceId, ReferenceSetup, Setup};
use crate::standing::AlarmStanding;
use crate::time::Timestamp;
use crate::track::Track;
use serde::{Deserialize, Serialize};

/// The state of one reference.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Reference {
    /// Recent values.
    pub(super) values: Track,
    pub(super) gate: GateHistory,
    /// Its channels' judgement of it.
    pub(super) watch: ReferenceWatch,
    pub(super) stale: Alarm,
    pub(super) step: Alarm,
    pub(super) stuck: Alarm,
    pub(super) certificate: Alarm,
    /// Whether the certificate's end has been told.
    pub(super) end_told: bool,
    /// From when on its silence counts while it has said nothing.
    pub(super) began: Option<Timestamp>,
    /// When it is next to be looked at, if nothing arrives.
    pub(super) wake: Option<Timestamp>,
}

impl Reference {
    /// What is wrong with it, for its channels. An expired certificate is not: the values are as
    /// good as the day before, and the documents say what they can no longer be traced to.
    pub(super) fn trouble(&self) -> Option<Cause> {
        let stale = self.stale.is_raised().then_some(Cause::ReferenceStale);
        self.watch.trouble().or(stale)
    }

    /// Its alarms that are not normal.
    pub(super) fn raised(&self, id: ReferenceId) -> Vec<AlarmStanding> {
        let all = [
            (AlarmKind::ReferenceStale, &self.stale),
            (AlarmKind::ReferenceStep, &self.step),
            (AlarmKind::ReferenceStuck, &self.stuck),
            (AlarmKind::CertificateExpiry, &self.certificate),
        ];
        let raised = all.into_iter().filter(|(_, alarm)| alarm.is_raised());
        raised
            .map(|(kind, alarm)| AlarmStanding {
                subject: Subject::Reference(id),
                kind,
                state: alarm.state(),
            })
            .collect()
    }

    /// The alarm of this kind.
    pub(super) fn alarm(&mut self, kind: AlarmKind) -> Option<&mut Alarm> {
        match kind {
            AlarmKind::ReferenceStale => Some(&mut self.stale),
            AlarmKind::ReferenceStep => Some(&mut self.step),
            AlarmKind::ReferenceStuck => Some(&mut self.stuck),
            AlarmKind::CertificateExpiry => Some(&mut self.certificate),
            _ => None,
        }
    }
}

impl Fleet {
    /// Prepares a reference that stays for its edited setup: alarms that nobody asks about any more
    /// go.
    pub(super) fn edit_reference(
        &mut self,
        index: usize,
        new: &Setup,
        after: &ReferenceSetup,
        report: &mut Report<'_>,
    ) {
        let place = new.references.iter().position(|r| r.name == after.name);
        let users: Vec<usize> = (0..new.channels.len())
            .filter(|&user| Some(new.channels[user].reference.0 as usize) == place)
            .collect();
        let watched = place.is_some_and(|place| trust::is_watched(new, place, &users));
        let mut unasked = Vec::new();
        if after.stale_after.is_none() {
            unasked.push(AlarmKind::ReferenceStale);
        }
        if !watched {
            unasked.extend([AlarmKind::ReferenceStep, AlarmKind::ReferenceStuck]);
            self.references[index].watch = ReferenceWatch::default();
        }
        let now = self.now.unwrap_or(Timestamp(0));
        let id = ReferenceId::at(index);
        for kind in unasked {
            let Some(alarm) = self.references[index].alarm(kind) else {
                continue;
            };
            if std::mem::take(alarm).is_raised() {
                let why = "it is no longer watched for this";
                report.say(dismissed(id, &after.name, kind, now, why));
            }
        }
    }

    /// Clears the alarms of references that do not stay.
    pub(super) fn dismiss_references(&self, stay: &[bool], report: &mut Report<'_>) {
        let now = self.now.unwrap_or(Timestamp(0));
        let references = (0..).zip(&self.references).zip(&self.setup.references);
        for ((id, reference), setup) in references.filter(|((id, _), _)| !stay[*id as usize]) {
            for alarm in reference.raised(ReferenceId(id)) {
                let why = "it was removed or its configuration changed";
                report.say(dismissed(
                    ReferenceId(id),
                    &setup.name,
                    alarm.kind,
                    now,
                    why,
                ));
            }
        }
    }
}

/// The change of an alarm that goes by a person's doing, not by its condition.
pub(super) fn dismissed(
    id: ReferenceId,
    name: &str,
    kind: AlarmKind,
    now: Timestamp,
    why: &str,
) -> Output {
    Output::Alarm(AlarmChange {
        subject: Subject::Reference(id),
        kind,
        state: AlarmState::Normal,
        at: now,
        since: now,
        value: 0.0,
        limit: 0.0,
        unit: String::new(),
        text: format!("reference {name}: {why}"),
    })
}
