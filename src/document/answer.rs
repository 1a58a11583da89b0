//! Answers to orders.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::{About, Comparison, OrderAnswer, Problem, Quarantined, Serviced};
use serde::Serialize;

/// What became of an order.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct AnswerDocument<'a> {
    schema_version: u32,
    node: &'a str,
    id: &'a str,
    at: String,
    accepted: bool,
    text: &'a str,
    problems: Vec<ProblemPart<'a>>,
    service: Option<ServicePart<'a>>,
    quarantine: Option<QuarantinePart<'a>>,
}

/// One thing that stands in an order's way.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct ProblemPart<'a> {
    field: &'a str,
    value: &'a str,
    way_out: &'a str,
}

/// What a service event led to.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct ServicePart<'a> {
    channel: Option<&'a str>,
    reference: Option<&'a str>,
    act: &'static str,
    performed: String,
    stretches: Vec<StretchPart<'a>>,
    comparison: Option<ComparisonPart>,
    fouling: Option<FoulingPart>,
    saw_tooth: Option<SawToothPart>,
}

#[derive(Clone, Debug, PartialEq, Serialize)]
struct StretchPart<'a> {
    channel: &'a str,
    stretch: u32,
}

/// As-found readings beside what the model expected.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub(super) struct ComparisonPart {
    predicted_error: f64,
    predicted_uncertainty: f64,
    points: Vec<PointPart>,
    en: f64,
    satisfactory: bool,
}

#[derive(Clone, Debug, PartialEq, Serialize)]
struct PointPart {
    indication: f64,
    reference: f64,
    error: f64,
    uncertainty: f64,
    predicted_error: f64,
    predicted_uncertainty: f64,
    en: f64,
}

#[derive(Clone, Debug, PartialEq, Serialize)]
struct FoulingPart {
    fouling_error: f64,
    drift_error: Option<f64>,
}

#[derive(Clone, Debug, PartialEq, Serialize)]
struct SawToothPart {
    cleanings: u64,
    mean_fouling: Option<f64>,
    mean_interval_days: Option<f64>,
}

/// What a quarantine or its release set going.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct QuarantinePart<'a> {
    quarantine: &'a str,
    channel: Option<&'a str>,
    reference: Option<&'a str>,
    influence: Option<&'a str>,
    from: String,
    to: Option<String>,
    released: bool,
    channels: &'a [String],
    refitted: &'a [String],
}

impl<'a> AnswerDocument<'a> {
    /// Of one answer of the node with this name.
    #[must_use]
    pub fn new(answer: &'a OrderAnswer, node: &'a str) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            node,
            id: &answer.id,
            at: word::time(answer.at),
            accepted: answer.accepted,
            text: &answer.text,
            problems: answer.problems.iter().map(ProblemPart::new).collect(),
            service: answer.service.as_ref().map(ServicePart::new),
            quarantine: answer.quarantine.as_ref().map(QuarantinePart::new),
        }
    }
}

impl<'a> ProblemPart<'a> {
    fn new(problem: &'a Problem) -> Self {
        Self {
            field: &problem.field,
            value: &problem.value,
            way_out: &problem.way_out,
        }
    }
}

impl<'a> ServicePart<'a> {
    fn new(serviced: &'a Serviced) -> Self {
        let (channel, reference) = match &serviced.about {
            About::Channel(name) => (Some(name.as_str()), None),
            About::Reference(name) => (None, Some(name.as_str())),
            About::Influence(_) => (None, None),
        };
        let stretches = serviced
            .stretches
            .iter()
            .map(|(channel, stretch)| StretchPart {
                channel,
                stretch: *stretch,
            });
        Self {
            channel,
            reference,
            act: serviced.act.word(),
            performed: word::time(serviced.performed),
            stretches: stretches.collect(),
            comparison: serviced.comparison.as_ref().map(ComparisonPart::new),
            fouling: serviced.fouling.map(|split| FoulingPart {
                fouling_error: split.fouling_error,
                drift_error: split.drift_error,
            }),
            saw_tooth: serviced.saw_tooth.map(|teeth| SawToothPart {
                cleanings: teeth.cleanings,
                mean_fouling: teeth.mean_fouling,
                mean_interval_days: teeth.mean_interval_days,
            }),
        }
    }
}

impl<'a> QuarantinePart<'a> {
    fn new(what: &'a Quarantined) -> Self {
        let (channel, reference, influence) = match &what.about {
            About::Channel(name) => (Some(name.as_str()), None, None),
            About::Reference(name) => (None, Some(name.as_str()), None),
            About::Influence(name) => (None, None, Some(name.as_str())),
        };
        Self {
            quarantine: &what.quarantine,
            channel,
            reference,
            influence,
            from: word::time(what.interval.from),
            to: what.interval.to.map(word::time),
            released: what.released,
            channels: &what.channels,
            refitted: &what.refitted,
        }
    }
}

impl ComparisonPart {
    pub(super) fn new(comparison: &Comparison) -> Self {
        let points = comparison.points.iter().map(|point| PointPart {
            indication: point.indication,
            reference: point.reference,
            error: point.error,
            uncertainty: point.uncertainty,
            predicted_error: point.predicted_error,
            predicted_uncertainty: point.predicted_uncertainty,
            en: point.en,
        });
        Self {
            predicted_error: comparison.predicted_error,
            predicted_uncertainty: comparison.predicted_uncertainty,
            points: points.collect(),
            en: comparison.en,
            satisfactory: comparison.satisfactory,
        }
    }
}
