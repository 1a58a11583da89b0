//! Correction and corrected-value documents.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::{Corrected, Correction, WindowSeen};
use holdtrue_engine::setup::{ChannelSetup, ReferenceKind, ReferenceSetup, Setup};
use serde::Serialize;

/// How to correct a channel's indications, and how sure that is.
///
/// A consumer needs two Horner loops and c = (zero(t) + span(t)·(indication − `span_centre`)) / (1
/// − span(t)), with t in `time_unit` from `origin`; without span terms, c = zero(t). The corrected
/// value is indication + c.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CorrectionDocument<'a> {
    schema_version: u32,
    channel: &'a str,
    unit: &'a str,
    issue_number: u64,
    issued: String,
    valid_from: String,
    valid_until: String,
    state: &'static str,
    because: Option<&'static str>,
    caution: Option<&'static str>,
    origin: String,
    time_unit: &'static str,
    degree: u8,
    weights: &'a [f64],
    zero: &'a [f64],
    span: [f64; 0],
    span_centre: f64,
    range: [f64; 2],
    suppressed: bool,
    correction: f64,
    standard_uncertainty: f64,
    coverage_factor: f64,
    expanded_uncertainty: f64,
    degrees_of_freedom: f64,
    covariance: &'a [Vec<f64>],
    zone: Option<&'static str>,
    decision_rule: Option<String>,
    accepted: Option<bool>,
    corrected_zone: Option<&'static str>,
    window: Window,
    criterion: Criterion<'a>,
    residual_sd: f64,
    configuration: &'a str,
    stretch: u32,
    reference: &'a str,
    certificate: Option<&'a str>,
    certificate_expires: Option<String>,
    certificate_expired: bool,
}

/// What whoever uses a document must know about this kind of reference.
pub(super) fn caution(reference: &ReferenceSetup) -> Option<&'static str> {
    match reference.kind {
        ReferenceKind::Group { .. } => Some(
            "judged against the median of its group: drift that all members share is invisible",
        ),
        ReferenceKind::Measured | ReferenceKind::Constant { .. } | ReferenceKind::Checks { .. } => {
            None
        }
    }
}

/// What the fit looked at.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct Window {
    from: String,
    to: String,
    pairs: u64,
    segments: u32,
    effective_sample_size: f64,
    lag_one: f64,
}

/// The criterion's value per degree.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub(super) struct Criterion<'a> {
    pub(super) name: &'a str,
    pub(super) values: &'a [f64],
}

impl<'a> CorrectionDocument<'a> {
    /// Of one correction of `channel`, one of the channels in `setup`.
    #[must_use]
    pub fn new(correction: &'a Correction, channel: &'a ChannelSetup, setup: &'a Setup) -> Self {
        let reference = setup.references.get(channel.reference.0 as usize);
        let expires = reference.and_then(|it| it.expires);
        Self {
            schema_version: SCHEMA_VERSION,
            channel: &channel.name,
            unit: &channel.unit,
            issue_number: correction.issue_number,
            issued: word::time(correction.issued),
            valid_from: word::time(correction.valid_from),
            valid_until: word::time(correction.valid_until),
            state: word::rung(correction.rung),
            because: correction.because.map(word::cause),
            caution: reference.and_then(caution),
            origin: word::time(correction.origin),
            time_unit: "d",
            degree: correction.degree,
            weights: &correction.weights,
            zero: &correction.zero,
            // Span terms are not fitted yet; the fields stand so that consumers handle them from
            // the first day.
            span: [],
            span_centre: 0.0,
            range: [correction.range.0, correction.range.1],
            suppressed: correction.suppressed,
            correction: correction.correction,
            standard_uncertainty: correction.standard_uncertainty,
            coverage_factor: correction.coverage_factor,
            expanded_uncertainty: correction.expanded_uncertainty,
            degrees_of_freedom: correction.degrees_of_freedom,
            covariance: &correction.covariance,
            zone: correction.zone.map(word::zone),
            decision_rule: correction
                .zone
                .map(|_| word::decision_rule(correction.rule)),
            accepted: correction.accepted,
            corrected_zone: correction.corrected_zone.map(word::zone),
            window: Window::new(&correction.window),
            criterion: Criterion {
                name: &correction.criterion.name,
                values: &correction.criterion.values,
            },
            residual_sd: correction.residual_sd,
            configuration: &setup.fingerprint,
            stretch: correction.stretch,
            reference: reference.map_or("", |it| it.name.as_str()),
            certificate: reference.and_then(|it| it.certificate.as_deref()),
            certificate_expires: expires.map(word::time),
            certificate_expired: expires.is_some_and(|expires| expires <= correction.issued),
        }
    }
}

impl Window {
    fn new(seen: &WindowSeen) -> Self {
        Self {
            from: word::time(seen.from),
            to: word::time(seen.to),
            pairs: seen.pairs,
            segments: seen.segments,
            effective_sample_size: seen.effective_sample_size,
            lag_one: seen.lag_one,
        }
    }
}

/// An indication with the correction in force applied.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CorrectedDocument<'a> {
    schema_version: u32,
    channel: &'a str,
    unit: &'a str,
    time: String,
    indication: f64,
    correction: f64,
    corrected: f64,
    expanded_uncertainty: f64,
    issue_number: u64,
}

impl<'a> CorrectedDocument<'a> {
    /// Of one corrected value of `channel`.
    #[must_use]
    pub fn new(corrected: &Corrected, channel: &'a ChannelSetup) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            channel: &channel.name,
            unit: &channel.unit,
            time: word::time(corrected.phenomenon),
            indication: corrected.indication,
            correction: corrected.correction,
            corrected: corrected.corrected,
            expanded_uncertainty: corrected.expanded_uncertainty,
            issue_number: corrected.issue_number,
        }
    }
}
