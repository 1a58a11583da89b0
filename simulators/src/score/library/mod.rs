//! The scenarios: each with its purpose, its class and the ranges that its parameters are drawn
//! from.
//!
//! Sizes are in standard deviations of the noise (σ), instants in days of a run of 42 d with a
//! window of 7 d, unless a scenario says otherwise.

mod delivery;
mod drifting;
mod failing;
mod fleet;
mod referring;
mod stationary;

use super::chooser::Chooser;
use super::world::World;
use serde::Serialize;

/// What is asked of the engine in a scenario.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Class {
    /// It drifts, and pairs show how: most of the error must go.
    Correctable,
    /// Nothing drifts: it must be left alone.
    Stationary,
    /// Something breaks: it must be noticed, and nothing else.
    Detection,
    /// Something can't be known: no claim may be made.
    MustRefuse,
}

impl Class {
    /// Its name in tables.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self {
            Self::Correctable => "correctable",
            Self::Stationary => "stationary",
            Self::Detection => "detection",
            Self::MustRefuse => "must-refuse",
        }
    }
}

/// One scenario.
#[derive(Clone, Copy, Debug)]
pub struct Scenario {
    /// Its name on the command line.
    pub name: &'static str,
    /// What it is for, one sentence.
    pub purpose: &'static str,
    /// What is asked of the engine.
    pub class: Class,
    /// Draws a run.
    pub build: fn(Chooser) -> World,
    /// Puts in the fault's place what does no harm: then every run has a twin with that, and it is
    /// measured by how much the fault moved the corrections.
    pub twin: Option<fn(&mut World)>,
    /// Whether one run is so large that the short form makes do with one.
    pub large: bool,
}

impl Scenario {
    /// A scenario without a twin, of the usual size.
    const fn new(
        class: Class,
        name: &'static str,
        purpose: &'static str,
        build: fn(Chooser) -> World,
    ) -> Self {
        Self {
            name,
            purpose,
            class,
            build,
            twin: None,
            large: false,
        }
    }
}

/// All scenarios, in the table's order.
#[must_use]
pub fn all() -> Vec<Scenario> {
    [
        stationary::SCENARIOS,
        drifting::SCENARIOS,
        failing::SCENARIOS,
        referring::SCENARIOS,
        delivery::SCENARIOS,
        fleet::SCENARIOS,
    ]
    .concat()
}

/// The scenario called `name`.
#[must_use]
pub fn find(name: &str) -> Option<Scenario> {
    all().into_iter().find(|scenario| scenario.name == name)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_unique_and_parameters_lie_in_their_ranges() {
        let scenarios = all();
        for (index, scenario) in scenarios.iter().enumerate() {
            let same = |other: &Scenario| other.name == scenario.name;
            assert!(!scenarios[..index].iter().any(same), "{}", scenario.name);
            assert!(find(scenario.name).is_some_and(|it| it.purpose == scenario.purpose));
            for seed in 0..20 {
                let world = (scenario.build)(Chooser::new(scenario.name, seed));
                // Deviates of an unknown error have a standard deviation, not a range.
                for drawn in world.drawn().iter().filter(|it| it.range.low >= 0.0) {
                    assert!(
                        drawn.range.holds(drawn.value.abs()),
                        "{}: {drawn:?}",
                        scenario.name
                    );
                }
                assert_eq!(world.sensors.len(), world.setup.channels.len());
                assert_eq!(world.references.len(), world.setup.references.len());
                for fault in &world.faults {
                    let in_order = fault.at < fault.due && fault.due <= fault.until;
                    let in_time = fault.due < world.days || !fault.required;
                    assert!(in_order && in_time, "{}: {fault:?}", scenario.name);
                }
            }
        }
    }
}
