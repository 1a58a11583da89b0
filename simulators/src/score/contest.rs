//! Many runs on all cores.

use super::library::Scenario;
use super::trial::{self, Trial};
use std::num::NonZero;
use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::time::Instant;

/// A run with the time that it took. The time is no part of the outcome: it differs from run to
/// run.
#[derive(Clone, Debug)]
pub struct Timed {
    /// The outcome.
    pub trial: Trial,
    /// Seconds on one core.
    pub seconds: f64,
}

/// As many threads as the machine runs at once.
#[must_use]
pub fn cores() -> usize {
    std::thread::available_parallelism().map_or(1, NonZero::get)
}

/// Runs every job (a scenario with a seed) on `threads` threads; outcomes in the order of the jobs,
/// whatever the number of threads. `done` is told of each that ends.
#[must_use]
pub fn run(jobs: &[(Scenario, u64)], threads: usize, done: &(dyn Fn() + Sync)) -> Vec<Timed> {
    let next = AtomicUsize::new(0);
    let ended: Mutex<Vec<(usize, Timed)>> = Mutex::new(Vec::with_capacity(jobs.len()));
    std::thread::scope(|scope| {
        for _ in 0..threads.max(1) {
            scope.spawn(|| {
                while let Some((index, (scenario, seed))) = take(jobs, &next) {
                    let begin = Instant::now();
                    let trial = trial::run(scenario, *seed);
                    let seconds = begin.elapsed().as_secs_f64();
                    // A thread that panicked ends the whole scope with its panic, so what a
                    // poisoned lock holds is never read.
                    if let Ok(mut ended) = ended.lock() {
                        ended.push((index, Timed { trial, seconds }));
                    }
                    done();
                }
            });
        }
    });
    let mut ended = ended.into_inner().unwrap_or_default();
    ended.sort_by_key(|(index, _)| *index);
    ended.into_iter().map(|(_, timed)| timed).collect()
}

/// The next job that nobody has taken.
fn take<'a, T>(jobs: &'a [T], next: &AtomicUsize) -> Option<(usize, &'a T)> {
    let index = next.fetch_add(1, Ordering::Relaxed);
    Some((index, jobs.get(index)?))
}
