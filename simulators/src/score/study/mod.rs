//! Studies: what only many seeded streams can show. Each is a list of cases; each case measures a
//! few figures over as many runs as one likes, and holds some of them to a bound.
//!
//! No constant of the engine was chosen on the seeds of these cases.

mod coverage;
mod foresight;
mod steps;

use super::contest;
use super::limits::Bound;
use clap::ValueEnum;
use serde::Serialize;
use std::fmt::Write;
use std::ops::Range;

/// Another seed base lies so many seeds further on, so that no two have a stream in common.
const BASES_APART: u64 = 1 << 40;

/// Which study.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, ValueEnum)]
#[serde(rename_all = "kebab-case")]
pub enum Study {
    /// How often U holds the true error, degree fixed and free
    Coverage,
    /// How often noise and drift are called a step, and how soon a real one is found
    Steps,
    /// How often a forecast holds the true crossing of a limit
    Foresight,
}

impl Study {
    /// Its cases.
    #[must_use]
    pub fn cases(self) -> Vec<Case> {
        match self {
            Self::Coverage => coverage::cases(),
            Self::Steps => steps::cases(),
            Self::Foresight => foresight::cases(),
        }
    }
}

/// What a case measures over runs with these seeds.
type Work = Box<dyn Fn(Range<u64>) -> Vec<Figure> + Send + Sync>;

/// One kind of stream, over many runs.
pub struct Case {
    /// Its name.
    pub name: String,
    /// Runs of the whole study.
    runs: u64,
    /// The first seed.
    seed: u64,
    work: Work,
}

impl Case {
    fn new(
        name: String,
        runs: u64,
        seed: u64,
        work: impl Fn(Range<u64>) -> Vec<Figure> + Send + Sync + 'static,
    ) -> Self {
        Self {
            name,
            runs,
            seed,
            work: Box::new(work),
        }
    }
}

/// A figure of a case.
struct Figure {
    name: &'static str,
    value: f64,
    bound: Option<Bound>,
}

/// A figure that is held to a bound.
fn held(name: &'static str, value: f64, bound: Bound) -> Figure {
    Figure {
        name,
        value,
        bound: Some(bound),
    }
}

/// A figure that is reported.
fn reported(name: &'static str, value: f64) -> Figure {
    Figure {
        name,
        value,
        bound: None,
    }
}

/// What a case has shown.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Measure {
    /// The case.
    pub case: String,
    /// What was measured, with its unit.
    pub figure: &'static str,
    /// Its value.
    pub value: f64,
    /// What it must be; `None`: it is only reported.
    pub bound: Option<Bound>,
}

impl Measure {
    /// Whether it is as it must be.
    #[must_use]
    pub fn holds(&self) -> bool {
        self.bound.is_none_or(|bound| bound.holds(self.value))
    }
}

/// Everything that a study has shown.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Report {
    /// Where the seeds began.
    pub seed_base: u64,
    /// Case by case.
    pub measures: Vec<Measure>,
}

/// Measures all cases on `threads` threads, with so many runs each (or as many as each asks for)
/// and seeds from a base on. `done` is told of each case that ends.
#[must_use]
pub fn run(
    cases: &[Case],
    runs: Option<u64>,
    seed_base: u64,
    threads: usize,
    done: &(dyn Fn() + Sync),
) -> Report {
    let further = seed_base.wrapping_sub(1).wrapping_mul(BASES_APART);
    let measure = |case: &Case| -> Vec<Measure> {
        let first = case.seed.wrapping_add(further);
        let seeds = first..first.saturating_add(runs.unwrap_or(case.runs));
        let figures = (case.work)(seeds).into_iter();
        figures
            .map(|figure| Measure {
                case: case.name.clone(),
                figure: figure.name,
                value: figure.value,
                bound: figure.bound,
            })
            .collect()
    };
    Report {
        seed_base,
        measures: contest::all(cases, threads, &measure, done).concat(),
    }
}

impl Report {
    /// The bounds that are broken, one sentence each.
    #[must_use]
    pub fn broken(&self) -> Vec<String> {
        let broken = self.measures.iter().filter(|measure| !measure.holds());
        broken
            .map(|measure| {
                let Measure {
                    case,
                    figure,
                    value,
                    bound,
                } = measure;
                let bound = bound.map_or(String::new(), |bound| bound.to_string());
                format!("{case}: {figure} is {value:.4}, must be {bound}")
            })
            .collect()
    }

    /// The text table: a line for each figure, the case's name once.
    #[must_use]
    pub fn text(&self) -> String {
        let mut text = String::new();
        let mut last = "";
        for measure in &self.measures {
            let name = if measure.case == last {
                ""
            } else {
                &measure.case
            };
            last = &measure.case;
            let bound = match measure.bound {
                Some(bound) if measure.holds() => bound.to_string(),
                Some(bound) => format!("{bound} BROKEN"),
                None => "reported".to_owned(),
            };
            let (figure, value) = (measure.figure, measure.value);
            let _ = writeln!(text, "{name:<36} {figure:<40} {value:>9.3}  {bound}");
        }
        text
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::BTreeSet;

    fn case(name: &str, seed: u64) -> Case {
        Case::new(name.to_owned(), 10, seed, |seeds| {
            vec![
                held("first seed", seeds.start as f64, Bound::AtMost(100.0)),
                reported("runs", (seeds.end - seeds.start) as f64),
            ]
        })
    }

    #[test]
    fn cases_run_with_their_own_seeds_and_break_their_own_bounds() {
        let cases = [case("low", 100), case("high", 101)];
        let report = run(&cases, None, 1, 2, &|| {});
        let values: Vec<f64> = report.measures.iter().map(|it| it.value).collect();
        assert_eq!(values, [100.0, 10.0, 101.0, 10.0]);
        let broken = report.broken();
        assert!(matches!(&broken[..], [only] if only.contains("high: first seed is 101")));
        assert_eq!(report.text().matches("BROKEN").count(), 1);
        let more = run(&cases, Some(30), 2, 1, &|| {});
        assert!(more.measures[0].value > 1e12);
        assert!((more.measures[1].value - 30.0).abs() < 1e-9);
    }

    #[test]
    fn every_study_has_cases_with_names_of_their_own() {
        for study in Study::value_variants() {
            let cases = study.cases();
            let names: BTreeSet<&str> = cases.iter().map(|case| case.name.as_str()).collect();
            assert!(!cases.is_empty());
            assert_eq!(names.len(), cases.len(), "{study:?}");
        }
    }
}
