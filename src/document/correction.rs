//! Correction and corrected-value documents.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::{Corrected, Correction, InfluenceTerm, WindowSeen};
use holdtrue_engine::setup::{
    ChannelInfluence, ChannelSetup, ReferenceId, ReferenceKind, ReferenceSetup, Setup,
};
use serde::Serialize;

/// How to correct a channel's indications, and how sure that is.
///
/// A consumer needs two Horner loops, with t in `time_unit` from `origin`, and Z = zero(t) + Σ
/// coefficient·(value − centre) over `influences`: c = (Z + span(t)·(indication − `span_centre`)) /
/// (1 − span(t)) where `span_side` is "reference", without the division where it is "indication";
/// without span terms, c = Z. The corrected value is indication + c.
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
    span: &'a [f64],
    span_centre: f64,
    span_side: &'static str,
    claim: String,
    span_refused: Option<&'static str>,
    influences: Vec<Influence<'a>>,
    range: [f64; 2],
    suppressed: bool,
    judged_at: f64,
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
    reference: String,
    certificate: Option<String>,
    certificate_expires: Option<String>,
    certificate_expired: bool,
    supersedes: Option<Supersedes<'a>>,
}

/// Which documents one takes the place of because an order changed what they rest on.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct Supersedes<'a> {
    issue_number: u64,
    order: &'a str,
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

/// What an influence quantity does to the correction.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct Influence<'a> {
    name: &'a str,
    unit: Option<&'a str>,
    in_force: bool,
    coefficient: f64,
    centre: f64,
    range: [f64; 2],
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
        let references = judged_against(channel, setup);
        // Of several known values the certificate that ends first.
        let expires = references.iter().filter_map(|it| it.expires).min();
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
            caution: references.iter().find_map(|it| caution(it)),
            origin: word::time(correction.origin),
            time_unit: "d",
            degree: correction.degree,
            weights: &correction.weights,
            zero: &correction.zero,
            span: &correction.span,
            span_centre: correction.span_centre,
            span_side: word::span_side(correction.span_side),
            claim: claim(correction, channel),
            span_refused: correction.span_refused.map(word::span_refusal),
            influences: channel
                .influences
                .iter()
                .zip(&correction.influences)
                .map(|(influence, term)| Influence::new(influence, term))
                .collect(),
            range: [correction.range.0, correction.range.1],
            suppressed: correction.suppressed,
            judged_at: correction.judged_at,
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
            reference: joined(&references, |it| Some(&it.name)).unwrap_or_default(),
            certificate: joined(&references, |it| it.certificate.as_deref()),
            certificate_expires: expires.map(word::time),
            certificate_expired: expires.is_some_and(|expires| expires <= correction.issued),
            supersedes: correction.supersedes.as_ref().map(|held| Supersedes {
                issue_number: held.issue_number,
                order: &held.order,
            }),
        }
    }
}

impl<'a> Influence<'a> {
    fn new(influence: &'a ChannelInfluence, term: &InfluenceTerm) -> Self {
        Self {
            name: &influence.name,
            unit: influence.unit.as_deref(),
            in_force: term.in_force,
            coefficient: term.coefficient,
            centre: term.centre,
            range: [term.range.0, term.range.1],
        }
    }
}

/// What the correction claims to know, and where.
fn claim(correction: &Correction, channel: &ChannelSetup) -> String {
    let (lowest, highest) = correction.range;
    let unit = &channel.unit;
    if correction.span.is_empty() {
        format!("zero only, valid near {lowest} to {highest} {unit}")
    } else {
        format!("zero and span, valid from {lowest} to {highest} {unit}")
    }
}

/// What a channel is judged against: its reference, or each of the known values that it names.
fn judged_against<'a>(channel: &ChannelSetup, setup: &'a Setup) -> Vec<&'a ReferenceSetup> {
    let of = |id: ReferenceId| setup.references.get(id.0 as usize);
    match of(channel.reference) {
        Some(ReferenceSetup {
            kind: ReferenceKind::Checks { points },
            ..
        }) => points.iter().filter_map(|&point| of(point)).collect(),
        reference => Vec::from_iter(reference),
    }
}

/// What the references say, one after the other; `None` if none says anything.
fn joined<'a>(
    references: &[&'a ReferenceSetup],
    what: impl Fn(&'a ReferenceSetup) -> Option<&'a str>,
) -> Option<String> {
    let told: Vec<&str> = references.iter().filter_map(|it| what(it)).collect();
    (!told.is_empty()).then(|| told.join(", "))
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
    beyond_range: bool,
    influences_assumed: Vec<&'a str>,
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
            beyond_range: corrected.beyond_range,
            influences_assumed: corrected
                .influences_assumed
                .iter()
                .filter_map(|&place| channel.influences.get(usize::from(place)))
                .map(|influence| influence.name.as_str())
                .collect(),
            issue_number: corrected.issue_number,
        }
    }
}
