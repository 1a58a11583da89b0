//! `plant list`: the scenarios with their ranges.

use super::{Failure, say, say_json};
use crate::scenario::{self, Kit, Scenario};
use clap::Args;
use std::fmt::Write;

/// Lists scenarios.
#[derive(Debug, Args)]
pub(super) struct List {
    /// Only this scenario
    scenario: Option<String>,
    /// As JSON
    #[arg(long)]
    json: bool,
}

impl List {
    pub(super) fn carry_out(self) -> Result<(), Failure> {
        let mut scenarios = scenario::all();
        if let Some(name) = &self.scenario {
            scenarios.retain(|scenario| scenario.name == name);
            if scenarios.is_empty() {
                return Err(Failure::Usage(format!(
                    "no scenario {name:?}; see plant list"
                )));
            }
        }
        if self.json {
            return say_json(&scenarios);
        }
        for scenario in &scenarios {
            say(&format!("{:<20} {}", scenario.name, scenario.purpose));
            // The whole plant repeats the others, so its ranges are shown only when asked for.
            if scenario.kits.len() == 1 || self.scenario.is_some() {
                say(ranges(scenario).trim_end());
            }
        }
        say("Ranges: sigma = the sensor's noise; run = parts of the run's length; d = days.");
        Ok(())
    }
}

/// The sensors of a scenario with the ranges that their parameters are drawn from.
fn ranges(scenario: &Scenario) -> String {
    let mut text = String::new();
    for Kit {
        instrument,
        behaviour,
        ..
    } in &scenario.kits
    {
        let _ = writeln!(
            text,
            "    {} [{}] noise {} memory {} limit {}: {}",
            instrument.name,
            instrument.unit,
            instrument.noise,
            instrument.memory,
            instrument.max_permissible_error,
            behaviour.name(),
        );
        for (name, unit, range) in behaviour.ranges() {
            let _ = writeln!(
                text,
                "        {name:<14} {} ... {} {unit}",
                range.low, range.high
            );
        }
    }
    text
}
