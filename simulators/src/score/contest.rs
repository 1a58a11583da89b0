//! Many jobs on all cores.

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

/// Runs every job (a scenario with a seed) on `threads` threads; `done` is told of each that ends.
#[must_use]
pub fn run(jobs: &[(Scenario, u64)], threads: usize, done: &(dyn Fn() + Sync)) -> Vec<Timed> {
    let work = |(scenario, seed): &(Scenario, u64)| {
        let begin = Instant::now();
        let trial = trial::run(scenario, *seed);
        let seconds = begin.elapsed().as_secs_f64();
        Timed { trial, seconds }
    };
    all(jobs, threads, &work, done)
}

/// Does `work` for every job on `threads` threads; outcomes in the order of the jobs, whatever the
/// number of threads. `done` is told of each that ends.
#[must_use]
pub fn all<J: Sync, T: Send>(
    jobs: &[J],
    threads: usize,
    work: &(dyn Fn(&J) -> T + Sync),
    done: &(dyn Fn() + Sync),
) -> Vec<T> {
    let next = AtomicUsize::new(0);
    let ended: Mutex<Vec<(usize, T)>> = Mutex::new(Vec::with_capacity(jobs.len()));
    std::thread::scope(|scope| {
        for _ in 0..threads.max(1) {
            scope.spawn(|| {
                while let Some((index, job)) = take(jobs, &next) {
                    let outcome = work(job);
                    // A thread that panicked ends the whole scope with its panic, so what a
                    // poisoned lock holds is never read.
                    if let Ok(mut ended) = ended.lock() {
                        ended.push((index, outcome));
                    }
                    done();
                }
            });
        }
    });
    let mut ended = ended.into_inner().unwrap_or_default();
    ended.sort_by_key(|(index, _)| *index);
    ended.into_iter().map(|(_, outcome)| outcome).collect()
}

/// The next job that nobody has taken.
fn take<'a, J>(jobs: &'a [J], next: &AtomicUsize) -> Option<(usize, &'a J)> {
    let index = next.fetch_add(1, Ordering::Relaxed);
    Some((index, jobs.get(index)?))
}
