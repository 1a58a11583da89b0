//! `plant score`: the engine held against invented faults with known truth.

use super::{Failure, progress, say, say_json};
use crate::score::contest;
use crate::score::library::{self, Scenario};
use crate::score::study::{self, Study};
use crate::score::table::Scorecard;
use clap::Args;

/// Seeds of the long form.
const SEEDS: u64 = 20;
/// Seeds of the short form: enough for what holds in every run, not for rare events.
const SEEDS_SHORT: u64 = 4;

/// Scores the engine.
#[derive(Debug, Args)]
#[allow(
    clippy::struct_excessive_bools,
    reason = "each is a flag of the command line"
)]
pub(super) struct Score {
    /// A study instead of scenarios: what only many seeded streams can show
    #[arg(long, value_enum, conflicts_with_all = ["scenarios", "short", "list", "but_known"])]
    study: Option<Study>,
    /// Only these scenarios
    #[arg(long = "scenario", value_name = "NAME", num_args = 1..)]
    scenarios: Vec<String>,
    /// Runs of each scenario [default: 20; with --short 4] or of each case of the study [default:
    /// the case's own]
    #[arg(long, value_parser = clap::value_parser!(u64).range(1..=100_000))]
    seeds: Option<u64>,
    /// The first seed; another base tries seeds that nobody has seen
    #[arg(long, default_value_t = 1)]
    seed_base: u64,
    /// Everything as JSON: figures, limits, and every run with its drawn parameters
    #[arg(long)]
    json: bool,
    /// Few runs, for a quick check
    #[arg(long)]
    short: bool,
    /// Ends well where only limits are broken that this version is known to break, and not by more
    #[arg(long)]
    but_known: bool,
    /// Only list the scenarios
    #[arg(long, conflicts_with_all = ["json", "short", "seeds"])]
    list: bool,
}

impl Score {
    pub(super) fn carry_out(self) -> Result<(), Failure> {
        if let Some(study) = self.study {
            return self.carry_out_study(study);
        }
        let scenarios = self.chosen()?;
        if self.list {
            for scenario in &scenarios {
                let class = scenario.class.name();
                say(&format!(
                    "{:<28} {class:<11} {}",
                    scenario.name, scenario.purpose
                ));
            }
            return Ok(());
        }
        let seeds = self
            .seeds
            .unwrap_or(if self.short { SEEDS_SHORT } else { SEEDS });
        let mut jobs: Vec<(Scenario, u64)> = scenarios
            .iter()
            .flat_map(|scenario| {
                let one = self.short && self.seeds.is_none() && scenario.large;
                let seeds = if one { 1 } else { seeds };
                (0..seeds).map(|seed| (*scenario, self.seed_base.wrapping_add(seed)))
            })
            .collect();
        // The longest first, so that no core waits for one of them in the end.
        jobs.sort_by_key(|(scenario, _)| !scenario.large);
        let bar = progress::bar(Some(jobs.len() as u64), "runs");
        let runs = contest::run(&jobs, contest::cores(), &|| bar.inc(1));
        bar.finish_and_clear();
        let scorecard = Scorecard::new(self.seed_base, &scenarios, &runs);
        if self.json {
            say_json(&scorecard)?;
        } else {
            say(scorecard.text().trim_end());
        }
        if self.but_known {
            ending(&scorecard.broken_anew())
        } else {
            ending(&scorecard.broken())
        }
    }

    fn carry_out_study(&self, study: Study) -> Result<(), Failure> {
        let cases = study.cases();
        let bar = progress::bar(Some(cases.len() as u64), "cases");
        let cores = contest::cores();
        let report = study::run(&cases, self.seeds, self.seed_base, cores, &|| bar.inc(1));
        bar.finish_and_clear();
        if self.json {
            say_json(&report)?;
        } else {
            say(report.text().trim_end());
        }
        ending(&report.broken())
    }

    /// The scenarios asked for, each once; all without a word.
    fn chosen(&self) -> Result<Vec<Scenario>, Failure> {
        if self.scenarios.is_empty() {
            return Ok(library::all());
        }
        let mut chosen: Vec<Scenario> = Vec::new();
        for name in &self.scenarios {
            let scenario = library::find(name).ok_or_else(|| {
                Failure::Usage(format!("no scenario {name:?}; see plant score --list"))
            })?;
            if !chosen.iter().any(|known| known.name == scenario.name) {
                chosen.push(scenario);
            }
        }
        Ok(chosen)
    }
}

/// How the command ends with these limits broken, one sentence each.
///
/// # Errors
/// The exit code 1 with all of them, if there is any.
pub fn ending(broken: &[String]) -> Result<(), Failure> {
    if broken.is_empty() {
        return Ok(());
    }
    let list = broken.join("\n");
    let count = match broken.len() {
        1 => "a limit is broken".to_owned(),
        count => format!("{count} limits are broken"),
    };
    Err(Failure::Incomplete(format!("{count}:\n{list}")))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_scenario_asked_for_twice_runs_once() {
        let score = |names: &[&str]| Score {
            study: None,
            scenarios: names.iter().map(|name| (*name).to_owned()).collect(),
            seeds: None,
            seed_base: 1,
            json: false,
            short: false,
            but_known: false,
            list: false,
        };
        let chosen = score(&["step", "stuck", "step"]).chosen().unwrap();
        let names: Vec<&str> = chosen.iter().map(|scenario| scenario.name).collect();
        assert_eq!(names, ["step", "stuck"]);
        assert_eq!(score(&[]).chosen().unwrap().len(), library::all().len());
    }
}
