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
use super::closing::Closing;
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

/// An as-left reading counts at most as so many rows, and at least as its inverse: how sure it is,
/// is a person's word.
const HEAVIEST: f64 = 16.0;

/// What is known of the sensor in place.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct ServiceBook {
    /// When it came in place, if that was told: what was done earlier was done to another one.
    since: Option<Timestamp>,
    /// The serial number of the newest service that told one, and when that was performed.
    serial: Option<(String, Timestamp)>,
    cleanings: Cleanings,
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
    /// The book of a sensor that came in place then.
    fn of_sensor_since(performed: Timestamp) -> Self {
        Self {
            since: Some(performed),
            ..Self::default()
        }
    }

    /// Whether what was performed then was done to this sensor.
    fn is_about(&self, performed: Timestamp) -> bool {
        self.since <= Some(performed)
    }

    /// The problems of an event with the sensor that is known to be in place.
    fn check_serial(&self, service: Service<'_>, problems: &mut Vec<Problem>) {
        if !self.is_about(service.performed) {
            return;
        }
        let event = service.event;
        let mut refuse = |value: &str, way_out: String| {
            problems.push(Problem {
                field: "serial".to_owned(),
                value: value.to_owned(),
                way_out,
            });
        };
        let known = self.serial.as_ref().map(|(serial, _)| serial);
        match (event.act, &event.serial, known) {
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

    fn note_serial(&mut self, service: Service<'_>) {
        let newest = self.serial.as_ref().map(|(_, performed)| *performed);
        if let Some(serial) = &service.event.serial
            && newest <= Some(service.performed)
        {
            self.serial = Some((serial.clone(), service.performed));
        }
    }

    /// Takes note of a service of this sensor; fouling and drift apart, where its readings tell.
    fn note(&mut self, service: Service<'_>) -> Option<Fouling> {
        let Service {
            event, performed, ..
        } = service;
        self.note_serial(service);
        match event.act {
            Act::Cleaned => self
                .cleanings
                .note(performed, &event.as_found, &event.as_left),
            Act::Adjusted | Act::Calibrated => self.cleanings.check(performed, &event.as_found),
            Act::Replaced => None,
        }
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
        self.service.check_serial(service, &mut problems);
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
        let takes_from = self.is_ended_by(performed);
        let ends = takes_from.is_some();
        let before = self.model_before(performed, scene).filter(|_| ends);
        let comparison = before.as_ref().and_then(|judgement| {
            validation::compare(judgement, performed, &event.as_found, scene)
        });
        if let Some(comparison) = &comparison {
            self.tell_validation(service, comparison, scene, report);
        }
        let opening = opening(service, before.as_ref(), scene);
        let replaced = event.act == Act::Replaced;
        if replaced && ends {
            self.service = ServiceBook::of_sensor_since(performed);
            self.checks = Checks::default();
            self.outlook.forget_as_found();
        }
        let mut fouling = None;
        if self.service.is_about(performed) {
            fouling = self.service.note(service);
            self.propose_interval(service, scene);
        }
        if let Some(from) = takes_from {
            let closing = Closing {
                at: performed,
                from,
                carries: self.carries(replaced, from),
                opening: &opening,
                why: &format!("the sensor was {} at {performed}", event.act.word()),
            };
            self.close_stretch(&closing, scene, report);
            self.alarms
                .serve(replaced, &why_cleared(service), scene, report);
        }
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
        if let (Act::Adjusted | Act::Calibrated, Some((error, limit))) = (act, found) {
            self.outlook.note_as_found(AsFound {
                at: service.performed,
                error,
                interval: Staircase::of(error, limit),
            });
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
        if self.is_beyond_window(performed, scene.setup, scene.now) {
            return None;
        }
        let from = self.is_ended_by(performed)?;
        let act = service.event.act.word();
        let closing = Closing {
            at: performed,
            from,
            carries: self.carries(false, from),
            opening: &[],
            why: &format!(
                "reference {} was {act} at {performed}",
                scene.reference.name
            ),
        };
        self.close_stretch(&closing, scene, report);
        Some(self.stretch.number())
    }

    /// From when on pairs belong to the stretch that a service performed then begins; `None` if it
    /// ended an earlier one. Where a step that it caused was found before anybody told, the step is
    /// taken back first: the stretch before it is the one that the service ends, and validates; and
    /// what came between the two says nothing about the sensor as it was left.
    fn is_ended_by(&mut self, performed: Timestamp) -> Option<Timestamp> {
        let mut from = performed;
        if self.explains_step(performed) {
            from = from.max(self.stretch.began().unwrap_or(performed));
            self.take_back_step();
        }
        (self.stretch.began() <= Some(performed)).then_some(from)
    }

    /// What the next stretch may know: of another sensor nothing, of the same one its noise, as it
    /// was before what came since then.
    fn carries(&self, replaced: bool, from: Timestamp) -> Carries {
        if replaced {
            return Carries::Nothing;
        }
        let recent = self.recent.iter();
        let latest = recent.filter(|held| held.pair.time >= from).count();
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
