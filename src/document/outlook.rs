//! Outlook documents: what lies ahead of a channel, in numbers and in words.

use super::{SCHEMA_VERSION, word};
use holdtrue_engine::event::{
    AsFound, Cadence, Conformity, Drift, NoStatement, Outlook, Recalibration, Staircase,
    TimeToLimit,
};
use holdtrue_engine::fit::line::Basis;
use holdtrue_engine::setup::ChannelSetup;
use holdtrue_engine::time::Timestamp;
use serde::Serialize;

/// What lies ahead of a channel. It judges the uncorrected error: a correction changes what is
/// used, not how the sensor is.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct OutlookDocument<'a> {
    schema_version: u32,
    channel: &'a str,
    unit: &'a str,
    issued: String,
    valid_until: String,
    at: String,
    error: f64,
    expanded_uncertainty: f64,
    coverage_factor: f64,
    max_permissible_error: Option<f64>,
    conformity: ConformityPart,
    drift: Option<DriftPart>,
    time_to_limit: TimeToLimitPart,
    recalibration: RecalibrationPart,
    cadence: Option<CadencePart>,
}

/// The statement of conformity, or why there is none.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct ConformityPart {
    zone: Option<&'static str>,
    decision_rule: String,
    accepted: Option<bool>,
    probability: Option<f64>,
    corrected_zone: Option<&'static str>,
    refused: Option<&'static str>,
}

/// How fast the error changes.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct DriftPart {
    rate_per_day: f64,
    expanded_uncertainty: f64,
    coverage_factor: f64,
    resolved: bool,
    basis: &'static str,
    from: String,
    to: String,
    horizon: String,
}

/// When the error reaches its limit.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct TimeToLimitPart {
    state: &'static str,
    limit: Option<f64>,
    earliest: Option<String>,
    central: Option<String>,
    latest: Option<String>,
    not_before: Option<String>,
    text: String,
}

/// When to recalibrate, as a proposal.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct RecalibrationPart {
    by: Option<String>,
    staircase: Option<StaircasePart>,
    text: &'static str,
}

/// What the last result as found says about the interval.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct StaircasePart {
    at: String,
    as_found: f64,
    interval: &'static str,
}

/// Whether the pairs can show the drift that matters.
#[derive(Clone, Debug, PartialEq, Serialize)]
struct CadencePart {
    drift_per_day: f64,
    noise: f64,
    spacing_days: f64,
    needed_days: f64,
    window_days: f64,
    sufficient: bool,
    text: &'static str,
}

impl<'a> OutlookDocument<'a> {
    /// Of one outlook of `channel`.
    #[must_use]
    pub fn new(outlook: &Outlook, channel: &'a ChannelSetup) -> Self {
        Self {
            schema_version: SCHEMA_VERSION,
            channel: &channel.name,
            unit: &channel.unit,
            issued: word::time(outlook.issued),
            valid_until: word::time(outlook.valid_until),
            at: word::time(outlook.at),
            error: outlook.error,
            expanded_uncertainty: outlook.expanded_uncertainty,
            coverage_factor: outlook.coverage_factor,
            max_permissible_error: outlook.limit,
            conformity: ConformityPart::new(outlook),
            drift: outlook.drift.as_ref().map(DriftPart::new),
            time_to_limit: TimeToLimitPart::new(outlook.time_to_limit),
            recalibration: RecalibrationPart::new(&outlook.recalibration),
            cadence: outlook.cadence.as_ref().map(CadencePart::new),
        }
    }
}

impl ConformityPart {
    fn new(outlook: &Outlook) -> Self {
        let (probability, refused) = match outlook.conformity {
            Conformity::Stated { probability, .. } => (Some(probability), None),
            Conformity::Refused(reason) => (None, Some(refused(reason))),
        };
        Self {
            zone: outlook.conformity.zone().map(word::zone),
            decision_rule: word::decision_rule(outlook.rule),
            accepted: outlook.conformity.accepted(),
            probability,
            corrected_zone: outlook.corrected_zone.map(word::zone),
            refused,
        }
    }
}

/// Why no conformity is stated, and the way out.
fn refused(reason: NoStatement) -> &'static str {
    match reason {
        NoStatement::NoLimit => "no max_permissible_error is configured",
        NoStatement::UnknownUncertainty => {
            "the pairs are all equal and nothing is declared: the uncertainty is not known; \
             declare noise, resolution or the reference's uncertainty"
        }
        NoStatement::WeakReference => {
            "the reference is not good enough: four times its expanded uncertainty exceeds the \
             maximum permissible error; trends are shown, conformity needs a better reference"
        }
        NoStatement::RelativeReference => {
            "a group shows how its members differ, not what they have in common; declare the \
             group's common uncertainty, or use a reference from outside"
        }
    }
}

impl DriftPart {
    fn new(drift: &Drift) -> Self {
        Self {
            rate_per_day: drift.rate,
            expanded_uncertainty: drift.expanded_uncertainty,
            coverage_factor: drift.coverage_factor,
            resolved: drift.resolved,
            basis: match drift.basis {
                Basis::Window => "line of the window",
                Basis::NewestPart => "line of the window's newest quarter, since a curve is fitted",
            },
            from: word::time(drift.from),
            to: word::time(drift.to),
            horizon: word::time(drift.horizon),
        }
    }
}

impl TimeToLimitPart {
    /// One that names no instants.
    fn empty(state: &'static str, text: &str) -> Self {
        Self {
            state,
            limit: None,
            earliest: None,
            central: None,
            latest: None,
            not_before: None,
            text: text.to_owned(),
        }
    }

    fn new(time_to_limit: TimeToLimit) -> Self {
        let whole = |at: Timestamp| word::time(at.up_to_second());
        match time_to_limit {
            TimeToLimit::Forecast {
                limit,
                earliest,
                central,
                latest,
            } => Self {
                limit: Some(limit),
                earliest: Some(word::time(earliest)),
                central: central.map(word::time),
                latest: latest.map(word::time),
                ..Self::empty(
                    "forecast",
                    &format!(
                        "may reach the limit from {} on; plan service before",
                        whole(earliest)
                    ),
                )
            },
            TimeToLimit::NotResolvable { not_before } => Self {
                not_before: Some(word::time(not_before)),
                ..Self::empty(
                    "not-resolvable",
                    &format!(
                        "the drift can't be told from none; the limit is not reached before {}",
                        whole(not_before)
                    ),
                )
            },
            TimeToLimit::BeyondHorizon { not_before } => Self {
                not_before: Some(word::time(not_before)),
                ..Self::empty(
                    "beyond-horizon",
                    &format!(
                        "not before {}; nothing is forecast beyond, since the line has held for \
                         no longer than that",
                        whole(not_before)
                    ),
                )
            },
            TimeToLimit::Reached => Self::empty(
                "reached",
                "the error is at or beyond the limit: service or recalibrate",
            ),
            TimeToLimit::NoLine => Self::empty(
                "no-line",
                "too little history for a line (8 closed segments), or none is permitted",
            ),
            TimeToLimit::NoLimit => {
                Self::empty("no-limit", "no max_permissible_error is configured")
            }
        }
    }
}

impl RecalibrationPart {
    fn new(recalibration: &Recalibration) -> Self {
        Self {
            by: recalibration.by.map(word::time),
            staircase: recalibration.staircase.as_ref().map(StaircasePart::new),
            text: "a proposal: by drift, when |e| + U may first be the maximum permissible error, \
                   or the end of what can be forecast; by staircase (ILAC-G24:2022 / OIML D \
                   10:2022, 6.2), what the last result as found says; a person decides",
        }
    }
}

impl StaircasePart {
    fn new(found: &AsFound) -> Self {
        Self {
            at: word::time(found.at),
            as_found: found.error,
            interval: match found.interval {
                Staircase::Extend => "extend",
                Staircase::Keep => "keep",
                Staircase::Reduce => "reduce",
            },
        }
    }
}

impl CadencePart {
    fn new(cadence: &Cadence) -> Self {
        let sufficient = cadence.is_sufficient();
        Self {
            drift_per_day: cadence.drift,
            noise: cadence.noise,
            spacing_days: cadence.spacing_days,
            needed_days: cadence.needed_days,
            window_days: cadence.window_days,
            sufficient,
            text: if sufficient {
                "the pairs in a window show the drift that matters (with probability 90 %, at the \
                 95 % level; Weatherhead et al. 1998)"
            } else {
                "the pairs in a window are too few or too noisy to show the drift that matters \
                 (with probability 90 %, at the 95 % level; Weatherhead et al. 1998): more \
                 reference values, less noise, or a longer window"
            },
        }
    }
}
