//! One run: a scenario with one seed through the engine, measured against its truth.

use super::chooser::Chooser;
use super::consumer::{self, Applied, Indicated};
use super::findings::{self, Findings, Limits};
use super::library::Scenario;
use super::observe::Observer;
use super::stream::{self, Truth};
use super::tally::Tally;
use super::world::{Fault, Place, World};
use crate::behaviour::Drawn;
use crate::sensor::START;
use holdtrue_engine::engine::Engine;
use holdtrue_engine::event::Input;
use serde::Serialize;

/// The outcome of one run: what was drawn, what was expected, what was measured. Follows from
/// scenario and seed alone.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Trial {
    /// The scenario.
    pub scenario: &'static str,
    /// The seed.
    pub seed: u64,
    /// The drawn parameters.
    pub drawn: Vec<Drawn>,
    /// The planted faults.
    pub expected: Vec<Expected>,
    /// Errors before and after, coverage.
    pub tally: Tally,
    /// Found, missed, false.
    pub findings: Findings,
    /// Correction documents issued.
    pub documents: u64,
    /// Whether a document claimed a span.
    pub span_claimed: bool,
    /// Corrected values of indications beyond all that pairs have shown …
    pub beyond: u64,
    /// … and those that were not flagged so.
    pub unflagged: u64,
    /// Where there is a twin without the fault: the most that a correction differs from its twin's
    /// once the fault is there, in its own u; `None` as well where nothing was claimed then.
    pub moved: Option<f64>,
}

/// A planted fault, as stated in the outcome.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Expected {
    /// Any of these words answers it.
    pub answers: Vec<&'static str>,
    /// The channel or reference.
    pub name: String,
    /// When it happens, days from the start.
    pub at: f64,
    /// It must have been noticed by then.
    pub due: f64,
}

/// Runs `scenario` with `seed`.
#[must_use]
pub fn run(scenario: &Scenario, seed: u64) -> Trial {
    let world = (scenario.build)(Chooser::new(scenario.name, seed));
    let pass = pass(&world, scenario.twin.is_some());
    let moved = scenario.twin.and_then(|remove_fault| {
        let mut twin = world.clone();
        remove_fault(&mut twin);
        let from = world.faults.first().map_or(0.0, |fault| fault.at);
        most_moved(from, &pass.trace, &self::pass(&twin, true).trace)
    });
    let beyond = || {
        let from = world.beyond_from.unwrap_or(f64::INFINITY);
        let corrected = pass.observer.corrected.iter();
        corrected.filter(move |(_, day, _)| *day >= from)
    };
    Trial {
        scenario: scenario.name,
        seed,
        drawn: world.drawn().to_vec(),
        expected: world
            .faults
            .iter()
            .filter(|fault| fault.required)
            .map(|fault| expected(&world, fault))
            .collect(),
        findings: findings::judge(&world, &pass.observer.said, &pass.limits),
        tally: pass.tally,
        documents: pass.observer.issued,
        span_claimed: pass.observer.span_claimed.contains(&true),
        beyond: beyond().count() as u64,
        unflagged: beyond().filter(|(_, _, flagged)| !flagged).count() as u64,
        moved,
    }
}

fn expected(world: &World, fault: &Fault) -> Expected {
    let name = match fault.place {
        Place::Sensor(sensor) => world.setup.channels[sensor].name.clone(),
        Place::Reference(reference) => world.setup.references[reference].name.clone(),
    };
    Expected {
        answers: fault.answers.clone(),
        name,
        at: fault.at,
        due: fault.due,
    }
}

/// A world once through the engine.
struct Pass {
    tally: Tally,
    observer: Observer,
    limits: Vec<Limits>,
    /// What was applied at each judged instant (in days), if that was asked for.
    trace: Vec<(f64, Option<Applied>)>,
}

fn pass(world: &World, traced: bool) -> Pass {
    let mut engine = Engine::new();
    let mut outputs = Vec::new();
    engine.step(&Input::Setup(Box::new(world.setup.clone())), &mut outputs);
    let mut pass = Pass {
        tally: Tally::default(),
        observer: Observer::new(world.sensors.len()),
        limits: vec![Limits::default(); world.sensors.len()],
        trace: Vec::new(),
    };
    let mut waiting: Vec<Truth> = Vec::new();
    let mut arrival = START;
    for event in stream::events(world) {
        if event.arrival > arrival {
            pass.settle(world, &mut waiting, traced);
            arrival = event.arrival;
        }
        if let Some(truth) = event.truth {
            let applied = pass.applied(world, &truth);
            let noise = world.sensors[truth.sensor].noise.deviation();
            pass.tally.see(&truth, applied, noise);
            waiting.push(truth);
        }
        engine.step(&event.input, &mut outputs);
        pass.tally.readings += 1;
        let day = arrival.since(START).days();
        for output in outputs.drain(..) {
            pass.observer.take(output, day);
        }
    }
    pass.settle(world, &mut waiting, traced);
    pass
}

impl Pass {
    /// Judges the instants whose readings the engine has taken in.
    fn settle(&mut self, world: &World, waiting: &mut Vec<Truth>, traced: bool) {
        for truth in waiting.drain(..) {
            let applied = self.applied(world, &truth);
            let noise = world.sensors[truth.sensor].noise.deviation();
            self.tally.judge(&truth, applied, noise);
            let limit = world.setup.channels[truth.sensor].max_permissible_error;
            self.limits[truth.sensor].see(truth.day, truth.systematic, limit);
            if traced {
                self.trace.push((truth.day, applied));
            }
        }
    }

    /// The document in force, applied to an indication.
    fn applied(&self, world: &World, truth: &Truth) -> Option<Applied> {
        let document = self.observer.document(truth.sensor)?;
        let lateness = world.setup.channels[truth.sensor].lateness;
        let indicated = Indicated {
            at: START.plus(super::ground::days(truth.day)),
            value: truth.indication,
            influence: truth.influence,
        };
        consumer::apply(document, lateness, indicated)
    }
}

/// The most by which corrections from a day on differ from those of the twin, in their own u;
/// instants at which either makes no claim do not count.
fn most_moved(
    from: f64,
    trace: &[(f64, Option<Applied>)],
    twin: &[(f64, Option<Applied>)],
) -> Option<f64> {
    trace
        .iter()
        .zip(twin)
        .filter(|((day, _), _)| *day >= from)
        .filter_map(|((_, ours), (_, twin))| {
            let (ours, twin) = ((*ours)?, (*twin)?);
            Some((ours.correction - twin.correction).abs() / ours.u)
        })
        .reduce(f64::max)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn corrections_are_compared_where_both_are_claimed_after_the_fault() {
        let applied = |correction| {
            Some(Applied {
                correction,
                u: 0.5,
                expanded: 1.0,
            })
        };
        let ours = [(1.0, applied(9.0)), (2.0, applied(1.0)), (3.0, None)];
        let twin = [
            (1.0, applied(0.0)),
            (2.0, applied(0.0)),
            (3.0, applied(0.0)),
        ];
        assert_eq!(most_moved(2.0, &ours, &twin), Some(2.0));
        // Nothing claimed is nothing known, not nothing moved.
        assert_eq!(most_moved(3.0, &ours, &twin), None);
    }
}
