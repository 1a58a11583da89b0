//! Arguments that choose a run: scenario, seed, length.

use super::Failure;
use crate::plant::Plant;
use crate::scenario;
use clap::Args;

/// Longest run, days.
const DAYS_MAX: f64 = 3650.0;

/// Which run.
#[derive(Debug, Args)]
pub(super) struct Run {
    /// Scenario, as `plant list` names them
    scenario: String,
    /// Decides every random number of the run
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Length of the run
    #[arg(long, default_value_t = 30.0, value_parser = days)]
    days: f64,
}

impl Run {
    /// The plant, everything drawn.
    pub(super) fn plant(&self) -> Result<Plant, Failure> {
        let scenario = scenario::find(&self.scenario).ok_or_else(|| {
            let known: Vec<&str> = scenario::all()
                .iter()
                .map(|scenario| scenario.name)
                .collect();
            Failure::Usage(format!(
                "no scenario {:?}; there are: {}",
                self.scenario,
                known.join(", ")
            ))
        })?;
        Ok(Plant::new(scenario, self.seed, self.days))
    }
}

/// A length in days.
fn days(text: &str) -> Result<f64, String> {
    let days: f64 = text
        .parse()
        .map_err(|_| format!("{text:?} is not a number of days"))?;
    if days > 0.0 && days <= DAYS_MAX {
        Ok(days)
    } else {
        Err(format!("must be more than 0 and at most {DAYS_MAX} days"))
    }
}
