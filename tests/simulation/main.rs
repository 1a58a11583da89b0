//! Whole runs of engine, record, outbox and acknowledgement over a simulated broker and disk, each
//! decided by one seed: two days with crashes at any operation of the disk, torn writes, refusals,
//! lost and repeated deliveries, lost sessions, changed configurations, midnights.
//!
//! After each life of the daemon an engine that nothing interrupts follows the record and says
//! whether every promise was kept. A failure names its seed; `FROM=17 SEEDS=1 cargo test --test
//! simulation runs` repeats it, `FROM=100000 SEEDS=10000 cargo test --test simulation runs` tries
//! others.
//!
//! Modules in reading order:
//! - `chance`, `plant`: what happens outside
//! - `broker`; `disk`, `image`: what the daemon stands on, and how that fails
//! - `memory`, `daemon`: the daemon's loop in simulated time
//! - `auditor`, `violation`: what must hold
//! - `world`: one run

mod auditor;
mod broker;
mod chance;
mod daemon;
mod disk;
mod image;
mod memory;
mod plant;
mod violation;
mod world;

use daemon::Breach;
use disk::Moment;
use plant::minutes;
use violation::{Broken, Violation};
use world::{Course, Summary, run};

/// Runs in the usual test; `SEEDS` says otherwise.
const SEEDS: u64 = 200;

/// Repeats a run by hand.
fn again(seed: u64) -> String {
    format!("again: FROM={seed} SEEDS=1 cargo test --test simulation runs")
}

fn variable(name: &str, default: u64) -> u64 {
    let value = std::env::var(name).ok();
    value.map_or(default, |text| {
        text.parse()
            .unwrap_or_else(|_| panic!("{name} must be a whole number, not {text:?}"))
    })
}

/// Runs these seeds, shared out among as many threads as the machine has cores.
fn run_all(from: u64, count: u64) -> Vec<(u64, Result<Summary, Violation>)> {
    let threads = std::thread::available_parallelism().map_or(1, usize::from);
    let threads = u64::try_from(threads).expect("a small number");
    let share = move |first: u64| {
        let seeds = (from + first..from + count).step_by(usize::try_from(threads).unwrap_or(1));
        seeds
            .map(|seed| (seed, run(seed, Course::WHOLE)))
            .collect::<Vec<_>>()
    };
    let workers: Vec<_> = (0..threads)
        .map(|first| std::thread::spawn(move || share(first)))
        .collect();
    let runs = workers.into_iter().flat_map(|worker| {
        let done = worker.join();
        done.expect("a run reports what is wrong and does not panic")
    });
    runs.collect()
}

#[test]
fn runs_of_many_seeds_keep_every_promise() {
    let (from, count) = (variable("FROM", 0), variable("SEEDS", SEEDS));
    let mut sum = Summary::default();
    let mut broken = Vec::new();
    for (seed, outcome) in run_all(from, count) {
        match outcome {
            Ok(summary) => sum.add(&summary),
            Err(violation) => broken.push(format!("seed {seed}: {violation}; {}", again(seed))),
        }
    }
    println!("{count} seeds from {from}: {sum:#?}");
    assert!(
        broken.is_empty(),
        "{} of {count} runs broke a promise:\n{}",
        broken.len(),
        broken.join("\n")
    );
    if count >= SEEDS {
        sum.assert_that_much_happened();
    }
}

/// Every operation of the disk in the beginning of one run, which passes midnight: everything ends
/// before, in the middle of and after it.
#[test]
fn a_crash_at_any_operation_of_the_first_life_keeps_every_promise() {
    for operation in 1..=40 {
        for moment in [Moment::Before, Moment::During, Moment::After] {
            let course = Course {
                first: Some((operation, moment)),
                length: minutes(8 * 60),
                ..Course::WHOLE
            };
            if let Err(violation) = run(7001, course) {
                panic!("{moment:?} operation {operation}: {violation}");
            }
        }
    }
}

/// Whether a broken loop is found to break this, in some run of a dozen; what was found instead.
fn is_caught(breach: Breach, breaks: Broken) -> Result<(), Vec<Broken>> {
    let mut others = Vec::new();
    for seed in 8000..8012 {
        let course = Course {
            breach,
            ..Course::WHOLE
        };
        match run(seed, course) {
            Err(violation) if violation.what == breaks => return Ok(()),
            Err(violation) => others.push(violation.what),
            Ok(_) => {}
        }
    }
    Err(others)
}

#[test]
fn acknowledging_before_the_commit_is_caught() {
    let caught = is_caught(Breach::AcknowledgesEarly, Broken::AcknowledgedMissing);
    assert_eq!(caught, Ok(()));
}

#[test]
fn publishing_before_the_commit_is_caught() {
    let caught = is_caught(Breach::PublishesEarly, Broken::PublishedMissing);
    assert_eq!(caught, Ok(()));
}

#[test]
fn a_commit_that_forgets_a_row_is_caught() {
    for (table, breaks) in [
        ("raw_readings", Broken::AcknowledgedMissing),
        ("outputs", Broken::Replay),
        ("documents", Broken::PublishedMissing),
        ("batches", Broken::Verification),
    ] {
        assert_eq!(is_caught(Breach::Loses(table), breaks), Ok(()), "{table}");
    }
}

#[test]
fn taking_a_repeated_message_for_a_new_one_is_caught() {
    let caught = is_caught(Breach::TakesAgainAsNew, Broken::UsedTwice);
    assert_eq!(caught, Ok(()));
}
