//! The scorecard as a document and as a text table.

use super::contest::Timed;
use super::library::{Class, Scenario};
use super::limits::{self, Bound, Verdict};
use super::summary::{self, Figure, Summary};
use super::trial::Trial;
use serde::Serialize;
use std::fmt::Write;

/// The whole scorecard.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Scorecard {
    /// The first seed.
    pub seed_base: u64,
    /// Scenario by scenario.
    pub scenarios: Vec<Row>,
}

/// One scenario's part.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Row {
    /// Its name.
    pub name: &'static str,
    /// What it is for.
    pub purpose: &'static str,
    /// What is asked of the engine.
    pub class: Class,
    /// All runs taken together.
    pub summary: Summary,
    /// Its limits.
    pub limits: Vec<Verdict>,
    /// The runs.
    pub trials: Vec<Trial>,
}

impl Scorecard {
    /// The scorecard of `runs`, which hold every scenario's runs one after another.
    #[must_use]
    pub fn new(seed_base: u64, scenarios: &[Scenario], runs: &[Timed]) -> Self {
        let scenarios = scenarios
            .iter()
            .map(|scenario| {
                let own: Vec<Timed> = runs
                    .iter()
                    .filter(|run| run.trial.scenario == scenario.name)
                    .cloned()
                    .collect();
                let summary = summary::of(&own);
                Row {
                    name: scenario.name,
                    purpose: scenario.purpose,
                    class: scenario.class,
                    limits: limits::judge(scenario, &summary),
                    summary,
                    trials: own.into_iter().map(|run| run.trial).collect(),
                }
            })
            .collect();
        Self {
            seed_base,
            scenarios,
        }
    }

    /// The limits that are broken, one sentence each.
    #[must_use]
    pub fn broken(&self) -> Vec<String> {
        self.scenarios
            .iter()
            .flat_map(|row| {
                row.limits
                    .iter()
                    .filter(|verdict| !verdict.holds)
                    .map(|verdict| sentence(row, verdict))
            })
            .collect()
    }

    /// The text table.
    #[must_use]
    pub fn text(&self) -> String {
        let mut text = heading();
        for row in &self.scenarios {
            line(&mut text, row);
        }
        text.push_str(LEGEND);
        text
    }
}

/// What the columns mean.
const LEGEND: &str = "\
RMS: systematic error at the newest instant, before and after correction, in sigma of the noise; \
u: RMS of its\n  standard uncertainty. cover: part of the time in which U held it. raises: false + \
missed, % of runs. steps/1e5: false\n  steps per 100 000 indications. delay: readings from fault \
to word, median and 95 %. missed: faults, %. alarms: false\n  limit alarms + other false alarms. \
lead: days from the time-to-limit alarm to the limit. s: seconds of one core.\n";

fn heading() -> String {
    format!(
        "{:<28} {:<11} {:>4} {:>8} {:>15} {:>6} {:>6} {:>8} {:>9} {:>11} {:>6} {:>7} {:>5} {:>6}\n",
        "scenario",
        "class",
        "runs",
        "readings",
        "RMS",
        "u",
        "cover",
        "raises",
        "steps/1e5",
        "delay",
        "missed",
        "alarms",
        "lead",
        "s",
    )
}

fn line(text: &mut String, row: &Row) {
    let Summary {
        runs,
        readings,
        newest,
        uncertainty,
        seconds,
        ..
    } = &row.summary;
    let figure = |figure| row.summary.figures.get(&figure).copied();
    let percent = |value: Option<f64>| number(value.map(|part| 100.0 * part), 0);
    let rms = format!("{} > {}", number(newest.0, 3), number(newest.1, 3));
    let cover = number(figure(Figure::Coverage), 3);
    let raises = format!(
        "{}+{}",
        percent(figure(Figure::FalseRaises)),
        percent(figure(Figure::MissedRaises))
    );
    let delay = format!(
        "{} {}",
        number(figure(Figure::DelayMedian), 0),
        number(figure(Figure::Delay95), 0)
    );
    let alarms = format!(
        "{}+{}",
        number(figure(Figure::FalseLimits), 0),
        row.summary.false_alarms.values().sum::<u32>(),
    );
    let broken = row.limits.iter().filter(|verdict| !verdict.holds).count();
    let mark = if broken > 0 { " BROKEN" } else { "" };
    let _ = writeln!(
        text,
        "{:<28} {:<11} {runs:>4} {readings:>8} {rms:>15} {:>6} {cover:>6} {raises:>8} {:>9} \
         {delay:>11} {:>6} {alarms:>7} {:>5} {seconds:>6.1}{mark}",
        row.name,
        row.class.name(),
        number(*uncertainty, 3),
        number(figure(Figure::FalseSteps), 2),
        percent(figure(Figure::Missed)),
        number(figure(Figure::Lead), 1),
    );
}

/// A number with so many decimals, or a dash.
fn number(value: Option<f64>, decimals: usize) -> String {
    value.map_or_else(|| "-".to_owned(), |value| format!("{value:.decimals$}"))
}

fn sentence(row: &Row, verdict: &Verdict) -> String {
    let (word, bound) = match verdict.bound {
        Bound::AtMost(bound) => ("at most", bound),
        Bound::AtLeast(bound) => ("at least", bound),
    };
    let value = number(verdict.value, 4);
    format!(
        "{}: {:?} is {value}, must be {word} {bound}: {}{}",
        row.name,
        verdict.figure,
        verdict.reason,
        kinds(row, verdict.figure),
    )
}

/// Which kinds of alarm were false, where that is the figure.
fn kinds(row: &Row, figure: Figure) -> String {
    if figure != Figure::FalseAlarms {
        return String::new();
    }
    let kinds: Vec<String> = row
        .summary
        .false_alarms
        .iter()
        .map(|(kind, count)| format!("{count} {kind}"))
        .collect();
    format!(" ({})", kinds.join(", "))
}
