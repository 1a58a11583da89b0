//! What people did to a channel's sensor, and what follows from it.
//!
//! ```text
//!   as-found readings ─▶ against what the model expected ─▶ validation (Eₙ)
//!                                  │
//!            the stretch ends at the time of the service
//!                                  │
//!   as-left readings  ─▶ first pairs of the next stretch
//! ```
//!
//! A cleaning splits fouling from drift; another serial number inherits nothing but the counts of
//! stretches and documents.

mod fouling;
mod validation;

use super::checks::Checks;
use super::judgement::Judgement;
use super::pairing::Pair;
use super::stretch::Carries;
use super::{Channel, Scene};
use crate::event::{
    Act, AsFound, CheckPoint, Comparison, Fouling, Output, Problem, SawTooth, ServiceEvent,
    Staircase, Validation,
};
use crate::report::Report;
use crate::setup::{ChannelSetup, WindowLength};
use crate::time::Timestamp;
use fouling::Cleanings;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Services remembered of one sensor; the oldest of more is forgotten (the record has it).
const HISTORY: usize = 32;
/// An as-left reading counts at most as so many rows, and at least as its inverse: how sure it is,
/// is a person's word.
const HEAVIEST: f64 = 16.0;

/// What is known of the sensor in place.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct ServiceBook {
    serial: Option<String>,
    /// Newest last.
    history: VecDeque<ServiceEntry>,
    cleanings: Cleanings,
}

/// One service.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct ServiceEntry {
    order: String,
    by: String,
    act: Act,
    performed: Timestamp,
    /// Of the as-found readings, the error of largest size.
    as_found: Option<f64>,
    /// The same of the as-left readings.
    as_left: Option<f64>,
    en: Option<f64>,
    certificate: Option<String>,
}

/// A service event on its way, with what belongs to its order.
#[derive(Clone, Copy)]
pub(crate) struct Service<'a> {
    pub(crate) order: &'a str,
    pub(crate) event: &'a ServiceEvent,
    pub(crate) performed: Timestamp,
}

/// What a service led to.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Effect {
    /// The number of the stretch that began; `None`: an earlier stretch's affair, the present one
    /// stands.
    pub(crate) stretch: Option<u32>,
    pub(crate) comparison: Option<Comparison>,
    pub(crate) fouling: Option<Fouling>,
    pub(crate) saw_tooth: Option<SawTooth>,
}

impl ServiceBook {
    /// The problems of an event with the sensor that is known to be in place.
    fn check_serial(&self, event: &ServiceEvent, problems: &mut Vec<Problem>) {
        let mut refuse = |value: &str, way_out: String| {
            problems.push(Problem {
                field: "serial".to_owned(),
                value: value.to_owned(),
                way_out,
            });
        };
        match (event.act, &event.serial, &self.serial) {
            (Act::Replaced, None, _) => refuse(
                "",
                "missing; the serial number of the sensor that is in place now".to_owned(),
            ),
            (Act::Replaced, Some(told), Some(known)) if told == known => refuse(
                told,
                "this very sensor is known to be in place; if it was taken out and put back, tell \
                 `adjusted`"
                    .to_owned(),
            ),
            (Act::Replaced, Some(_), _) | (_, None, _) | (_, Some(_), None) => {}
            (_, Some(told), Some(known)) if told != known => refuse(
                told,
                format!(
                    "the sensor known to be in place is {known}; if it was exchanged, tell \
                     `replaced` first"
                ),
            ),
            (_, Some(_), Some(_)) => {}
        }
    }

    fn note(&mut self, service: Service<'_>, comparison: Option<&Comparison>) {
        let event = service.event;
        if event.serial.is_some() {
            self.serial.clone_from(&event.serial);
        }
        if self.history.len() == HISTORY {
            self.history.pop_front();
        }
        self.history.push_back(ServiceEntry {
            order: service.order.to_owned(),
            by: event.by.clone(),
            act: event.act,
            performed: service.performed,
            as_found: largest(&event.as_found),
            as_left: largest(&event.as_left),
            en: comparison.map(|comparison| comparison.en),
            certificate: event.certificate.clone(),
        });
    }
}

/// The error of largest size.
fn largest(points: &[CheckPoint]) -> Option<f64> {
    points
        .iter()
        .map(CheckPoint::error)
        .max_by(|a, b| a.abs().total_cmp(&b.abs()))
}

impl Channel {
    /// What speaks against an event of this channel, beyond what speaks against any.
    pub(crate) fn check_service(
        &self,
        service: Service<'_>,
        setup: &ChannelSetup,
        now: Timestamp,
    ) -> Vec<Problem> {
        let mut problems = Vec::new();
        self.service.check_serial(service.event, &mut problems);
        if self.is_beyond_window(service.performed, setup, now) {
            problems.push(Problem {
                field: "at".to_owned(),
                value: service.performed.to_string(),
                way_out:
                    "older than anything that the fit still looks back on, so it would change \
                          nothing; keep it in your own maintenance log, and check the time"
                        .to_owned(),
            });
        }
        problems
    }

    /// Whether an instant lies before all that a full window holds.
    fn is_beyond_window(&self, instant: Timestamp, setup: &ChannelSetup, now: Timestamp) -> bool {
        match setup.fit.window {
            WindowLength::Time(length) => instant < now.minus(length),
            WindowLength::Pairs(pairs) => {
                let window = self.stretch.fit().window();
                window.rows() >= u64::from(pairs)
                    && window.oldest().is_some_and(|oldest| instant < oldest)
            }
        }
    }

    /// Takes a service event that nothing speaks against.
    pub(crate) fn serve(
        &mut self,
        service: Service<'_>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> Effect {
        let Service {
            event, performed, ..
        } = service;
        // A step at that very time may have ended the stretch before the service was told.
        let ends = self.stretch.began() <= Some(performed);
        let before = self.model_before(performed, scene).filter(|_| ends);
        let comparison = before.as_ref().and_then(|judgement| {
            validation::compare(judgement, performed, &event.as_found, scene)
        });
        if let Some(comparison) = &comparison {
            self.tell_validation(service, comparison, scene, report);
        }
        let opening = opening(service, before.as_ref(), scene);
        let replaced = event.act == Act::Replaced;
        if replaced {
            self.service = ServiceBook::default();
            self.checks = Checks::default();
        }
        let fouling = match event.act {
            Act::Cleaned => {
                let cleanings = &mut self.service.cleanings;
                cleanings.note(performed, &event.as_found, &event.as_left)
            }
            Act::Adjusted | Act::Calibrated => {
                self.service.cleanings.check(performed, &event.as_found)
            }
            Act::Replaced => None,
        };
        self.service.note(service, comparison.as_ref());
        self.propose_interval(service, scene);
        if ends {
            let carries = self.carries(replaced, performed);
            let why = format!("the sensor was {} at {performed}", event.act.word());
            self.close_stretch_with(performed, carries, &opening, &why, scene, report);
        }
        self.alarms
            .serve(replaced, &why_cleared(service), scene, report);
        Effect {
            stretch: ends.then(|| self.stretch.number()),
            comparison,
            fouling,
            saw_tooth: self.service.cleanings.saw_tooth(),
        }
    }

    /// What was found at a calibration or adjustment says whether the interval may be longer.
    /// (Before a cleaning it tells of fouling, which has an interval of its own.)
    fn propose_interval(&mut self, service: Service<'_>, scene: &Scene<'_>) {
        let ServiceEvent { act, as_found, .. } = service.event;
        let found = largest(as_found).zip(scene.setup.max_permissible_error);
        match (act, found) {
            (Act::Replaced, _) => self.outlook.note_as_found(None),
            (Act::Adjusted | Act::Calibrated, Some((error, limit))) => {
                self.outlook.note_as_found(Some(AsFound {
                    at: service.performed,
                    error,
                    interval: Staircase::of(error, limit),
                }));
            }
            (Act::Cleaned | Act::Adjusted | Act::Calibrated, _) => {}
        }
    }

    /// Its reference was served: what was paired with it before says nothing about what comes. The
    /// number of the stretch that began; `None` where the present one began later than that.
    pub(crate) fn serve_reference(
        &mut self,
        service: Service<'_>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> Option<u32> {
        let performed = service.performed;
        let ends = self.stretch.began() <= Some(performed);
        if !ends || self.is_beyond_window(performed, scene.setup, scene.now) {
            return None;
        }
        let carries = self.carries(false, performed);
        let why = format!(
            "reference {} was {} at {performed}",
            scene.reference.name,
            service.event.act.word()
        );
        self.close_stretch_with(performed, carries, &[], &why, scene, report);
        Some(self.stretch.number())
    }

    /// What the next stretch may know: of another sensor nothing, of the same one its noise, as it
    /// was before what came since the service.
    fn carries(&self, replaced: bool, performed: Timestamp) -> Carries {
        if replaced {
            return Carries::Nothing;
        }
        let recent = self.recent.iter();
        let latest = recent.filter(|held| held.pair.time >= performed).count();
        Carries::Noise { latest }
    }

    /// The judgement of what was known before an instant.
    fn model_before(&self, instant: Timestamp, scene: &Scene<'_>) -> Option<Judgement> {
        let fit = self.stretch.fit_before(instant, &self.recent, scene.setup);
        let residuals = self
            .stretch
            .residuals_before(instant, &self.recent, scene.setup);
        let declared = scene.setup.declared_variance(scene.reference);
        Judgement::of(fit.published_at_least(declared)?, &residuals, scene)
    }

    fn tell_validation(
        &self,
        service: Service<'_>,
        comparison: &Comparison,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let event = service.event;
        report.say(Output::Validation(Box::new(Validation {
            channel: scene.id,
            at: scene.now,
            order: service.order.to_owned(),
            by: event.by.clone(),
            act: event.act,
            performed: service.performed,
            stretch: self.stretch.number(),
            comparison: comparison.clone(),
            certificate: event.certificate.clone(),
        })));
    }
}

fn why_cleared(service: Service<'_>) -> String {
    format!(
        "the sensor was {} by {} at {}",
        service.event.act.word(),
        service.event.by,
        service.performed
    )
}

/// The as-left readings as the first pairs of the next stretch.
///
/// A reading's variance is that of its reference value and of the sensor's noise. A row of the
/// stretch that ends has s² (residual, or declared): its own part of the sensor is s² − each². So
/// the weight relative to a row is s²/(u² + s² − each²): 1 for a check as good as the reference.
///
/// None where influence quantities act on the sensor: what acted during the check, nobody told.
fn opening(service: Service<'_>, before: Option<&Judgement>, scene: &Scene<'_>) -> Vec<Pair> {
    if !scene.setup.influences.is_empty() {
        return Vec::new();
    }
    let each = scene.reference.uncertainty_each;
    let declared = scene.setup.declared_variance(scene.reference);
    let seen = before.map_or(0.0, |judgement| judgement.published.residual_sd);
    let row = declared.max(seen * seen);
    let sensor = (row - each * each).max(validation::reading_variance(scene.setup));
    let weight = |point: &CheckPoint| {
        let u = validation::standard_uncertainty(point, scene.reference);
        let weight = row / (u * u + sensor);
        if weight.is_finite() && weight > 0.0 {
            weight.clamp(1.0 / HEAVIEST, HEAVIEST)
        } else {
            1.0
        }
    };
    let points = service.event.as_left.iter();
    points
        .map(|point| {
            Pair::at(service.performed, point.indication, point.reference).weighing(weight(point))
        })
        .collect()
}
