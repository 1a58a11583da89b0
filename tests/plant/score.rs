//! `plant score`: outcomes follow from scenario and seed alone, and a broken limit ends it with 1.

use clap::Parser as _;
use holdtrue_simulators::command::{self, Arguments, Failure};
use holdtrue_simulators::score::contest;
use holdtrue_simulators::score::library::{self, Class, Scenario};
use holdtrue_simulators::score::limits::{self, Bound};
use holdtrue_simulators::score::summary::Figure;
use holdtrue_simulators::score::table::Scorecard;
use holdtrue_simulators::score::trial::Trial;

fn scenario(name: &str) -> Scenario {
    library::find(name).unwrap_or_else(|| panic!("no scenario {name}"))
}

fn trials(jobs: &[(Scenario, u64)], threads: usize) -> Vec<Trial> {
    contest::run(jobs, threads, &|| {})
        .into_iter()
        .map(|timed| timed.trial)
        .collect()
}

#[test]
fn outcomes_depend_neither_on_the_run_nor_on_the_number_of_threads() {
    let jobs: Vec<(Scenario, u64)> = ["ar-0.8", "bad-delivery", "step"]
        .iter()
        .flat_map(|name| [(scenario(name), 11), (scenario(name), 12)])
        .collect();
    let one = trials(&jobs, 1);
    assert_eq!(one.len(), jobs.len());
    for (trial, (scenario, seed)) in one.iter().zip(&jobs) {
        assert_eq!((trial.scenario, trial.seed), (scenario.name, *seed));
    }
    assert_eq!(trials(&jobs, 1), one);
    assert_eq!(trials(&jobs, 3), one);
    assert_ne!(one[0].tally, one[1].tally, "seeds must differ");
}

/// What the scorecard measures must depend on the engine. Here the same scenarios run, but nothing
/// is ever corrected or noticed: every document expires at once, and nothing enters the fit.
#[test]
fn an_engine_that_does_nothing_breaks_the_limits() {
    fn deaf(
        mut world: holdtrue_simulators::score::world::World,
    ) -> holdtrue_simulators::score::world::World {
        for reference in &mut world.references {
            reference.silent_from = Some(0.0);
        }
        world
    }
    let ramp = Scenario {
        build: |chooser| deaf((scenario("offset-ramp").build)(chooser)),
        ..scenario("offset-ramp")
    };
    let runs = contest::run(&[(ramp, 1)], 1, &|| {});
    let scorecard = Scorecard::new(1, &[ramp], &runs);
    let ending = command::ending(&scorecard.broken());
    assert!(
        matches!(&ending, Err(Failure::Incomplete(text)) if text.contains("offset-ramp: Remaining"))
    );
    let row = &scorecard.scenarios[0];
    assert_eq!(row.class, Class::Correctable);
    let broken: Vec<Figure> = row
        .limits
        .iter()
        .filter(|verdict| !verdict.holds)
        .map(|verdict| verdict.figure)
        .collect();
    for figure in [
        Figure::Remaining,
        Figure::MissedRaises,
        Figure::Claimed,
        Figure::Coverage,
    ] {
        assert!(broken.contains(&figure), "{figure:?} in {broken:?}");
    }
    // And the same scenario with its reference keeps them.
    let sound = scenario("offset-ramp");
    let runs = contest::run(&[(sound, 1)], 1, &|| {});
    let scorecard = Scorecard::new(1, &[sound], &runs);
    assert!(command::ending(&scorecard.broken()).is_ok());
    let summary = &scorecard.scenarios[0].summary;
    for verdict in limits::judge(&sound, summary) {
        assert!(verdict.holds, "{verdict:?}");
    }
    assert_eq!(limits::judge(&sound, summary)[0].bound, Bound::AtMost(0.25));
}

#[test]
fn unknown_scenarios_and_empty_sets_of_seeds_are_wrong_usage() {
    let arguments =
        |more: &[&str]| Arguments::try_parse_from(["plant", "score"].iter().chain(more).copied());
    let unknown = command::run(arguments(&["--scenario", "no-such"]).unwrap());
    assert!(matches!(unknown, Err(Failure::Usage(text)) if text.contains("no-such")));
    for refused in [
        &["--seeds", "0"][..],
        &["--seeds", "many"],
        &["--list", "--json"],
    ] {
        assert!(arguments(refused).is_err(), "{refused:?}");
    }
}
