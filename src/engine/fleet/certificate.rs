//! Certificates that expire: one alarm on the reference before, said again when it has come so far.
//! Its channels go on: the values are as good as the day before. What is lost is the traceability,
//! and each correction says so.

use super::{Fleet, reference};
use crate::alarm::{Condition, Delays};
use crate::event::{AlarmChange, AlarmKind, Output, Subject};
use crate::report::Report;
use crate::setup::ReferenceId;
use crate::time::Timestamp;

/// The calendar is the delay.
const AT_ONCE: Delays = Delays { on: 1, off: 1 };

impl Fleet {
    /// When the certificate is next to be looked at.
    pub(super) fn certificate_due(&self, index: usize) -> Option<Timestamp> {
        let setup = &self.setup.references[index];
        let reference = &self.references[index];
        let near = setup.expires.map(|at| at.minus(setup.expiry_notice));
        if reference.certificate.is_raised() && near.is_none_or(|near| self.now < Some(near)) {
            // It was renewed, or time stepped back: the alarm is to go.
            return Some(Timestamp(i64::MIN));
        }
        let expires = setup.expires?;
        if !reference.certificate.is_raised() {
            return Some(expires.minus(setup.expiry_notice));
        }
        (!reference.end_told).then_some(expires)
    }

    /// Says that the certificate expires soon, has expired, or no longer does.
    pub(super) fn watch_certificate(&mut self, index: usize, report: &mut Report<'_>) {
        let Some(now) = self.now else { return };
        let setup = &self.setup.references[index];
        let known = &mut self.references[index];
        let id = ReferenceId::at(index);
        let near = |expires: &Timestamp| now >= expires.minus(setup.expiry_notice);
        let Some(expires) = setup.expires.filter(near) else {
            known.end_told = false;
            if known.certificate.is_raised() {
                known.certificate = crate::alarm::Alarm::default();
                let kind = AlarmKind::CertificateExpiry;
                let why = "its certificate does not expire soon";
                report.say(reference::dismissed(id, &setup.name, kind, now, why));
            }
            return;
        };
        let ended = now >= expires;
        let raised = known.certificate.evaluate(Condition::Holds, now, AT_ONCE);
        let since = match raised {
            Some(step) => step.since,
            None if ended && !known.end_told => expires,
            None => return,
        };
        known.end_told = ended;
        let name = &setup.name;
        let certificate = setup.certificate.as_deref().unwrap_or("without a number");
        let text = if ended {
            format!(
                "the certificate of reference {name} ({certificate}) expired at {expires}; its \
                 channels go on, but what they are corrected to can no longer be traced; have \
                 it calibrated"
            )
        } else {
            format!(
                "the certificate of reference {name} ({certificate}) expires at {expires}; have \
                 it calibrated"
            )
        };
        report.say(Output::Alarm(AlarmChange {
            subject: Subject::Reference(id),
            kind: AlarmKind::CertificateExpiry,
            state: known.certificate.state(),
            at: now,
            since,
            value: expires.since(now).days() + 0.0,
            limit: setup.expiry_notice.days(),
            unit: "d".to_owned(),
            text,
        }));
    }
}
