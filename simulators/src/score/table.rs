//! The scorecard as a document and as a text table.

use super::contest::Timed;
use super::library::{Class, Scenario};
use super::limits::{self, Verdict};
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
        self.sentences(|verdict| !verdict.holds)
    }

    /// Those of them that this version is not known to break, or not by so much.
    #[must_use]
    pub fn broken_anew(&self) -> Vec<String> {
        self.sentences(|verdict| !verdict.holds && !verdict.known)
    }

    fn sentences(&self, which: fn(&Verdict) -> bool) -> Vec<String> {
        let each = self.scenarios.iter().flat_map(|row| {
            let told = row.limits.iter().filter(|verdict| which(verdict));
            told.map(|verdict| sentence(row, verdict))
        });
        each.collect()
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
bias: mean error that a consumer sees. RMS: of the systematic error at the newest instant. Both:
  before and after correction, in sigma of the noise. u: RMS of its standard uncertainty.
cover: part of the time in which U held the error. raises: false + missed, % of the sensors.
steps: false ones per 100 000 indications. missed: faults, %. delay: readings from fault to word,
  median and 95 %. jump: readings by which its time is off (median), % of its sizes within 2 u.
alarms: false limit alarms + other false alarms. again: words about a fault that had been told.
lead: days from the time-to-limit alarm to the limit. span: % of the runs that claim one. silent: %
  of the corrected values beyond the learned range that do not say so. s: seconds of one core.
";

/// A column: its heading, its width, and what stands in it.
type Column = (&'static str, usize, fn(&Row) -> String);

/// The columns after the scenario's name and class.
const COLUMNS: &[Column] = &[
    ("runs", 4, |row| row.summary.runs.to_string()),
    ("readings", 8, |row| row.summary.readings.to_string()),
    ("bias", 14, |row| change(row.summary.bias)),
    ("RMS", 14, |row| change(row.summary.newest)),
    ("u", 5, |row| number(row.summary.uncertainty, 2)),
    ("cover", 5, |row| number(figure(row, Figure::Coverage), 3)),
    ("raises", 7, |row| {
        let [wrong, missed] = [Figure::FalseRaises, Figure::MissedRaises];
        format!("{}+{}", percent(row, wrong), percent(row, missed))
    }),
    ("steps", 5, |row| number(figure(row, Figure::FalseSteps), 2)),
    ("delay", 8, |row| {
        let delay = |of| number(figure(row, of), 0);
        format!("{} {}", delay(Figure::DelayMedian), delay(Figure::Delay95))
    }),
    ("jump", 6, |row| {
        let time = number(figure(row, Figure::JumpTime), 0);
        format!("{time} {}", percent(row, Figure::JumpSize))
    }),
    ("missed", 6, |row| percent(row, Figure::Missed)),
    ("alarms", 6, |row| {
        let others = row.summary.false_alarms.values().sum::<u32>();
        format!("{}+{others}", number(figure(row, Figure::FalseLimits), 0))
    }),
    ("again", 5, |row| number(figure(row, Figure::Repeated), 0)),
    ("lead", 5, |row| number(figure(row, Figure::Lead), 1)),
    ("span", 4, |row| percent(row, Figure::SpanClaims)),
    ("silent", 6, |row| percent(row, Figure::Unflagged)),
    ("s", 6, |row| format!("{:.1}", row.summary.seconds)),
];

fn heading() -> String {
    let mut text = format!("{:<28} {:<11}", "scenario", "class");
    for (heading, width, _) in COLUMNS {
        let _ = write!(text, " {heading:>width$}");
    }
    text.push('\n');
    text
}

fn line(text: &mut String, row: &Row) {
    let _ = write!(text, "{:<28} {:<11}", row.name, row.class.name());
    for (_, width, cell) in COLUMNS {
        let _ = write!(text, " {:>width$}", cell(row));
    }
    if row.limits.iter().any(|verdict| !verdict.holds) {
        text.push_str(" BROKEN");
    }
    text.push('\n');
}

fn figure(row: &Row, figure: Figure) -> Option<f64> {
    row.summary.figures.get(&figure).copied()
}

/// A part of 1 in per cent.
fn percent(row: &Row, of: Figure) -> String {
    number(figure(row, of).map(|part| 100.0 * part), 0)
}

/// A figure before and after correction.
fn change((before, after): (Option<f64>, Option<f64>)) -> String {
    format!("{} > {}", number(before, 2), number(after, 2))
}

/// A number with so many decimals, or a dash.
fn number(value: Option<f64>, decimals: usize) -> String {
    value.map_or_else(|| "-".to_owned(), |value| format!("{value:.decimals$}"))
}

fn sentence(row: &Row, verdict: &Verdict) -> String {
    let Verdict {
        figure,
        bound,
        reason,
        ..
    } = verdict;
    let value = number(verdict.value, 4);
    let kinds = kinds(row, *figure);
    let name = row.name;
    format!("{name}: {figure:?} is {value}, must be {bound}: {reason}{kinds}")
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
