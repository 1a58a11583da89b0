//! Invented noise and sampling for the tests of the degree: seeded, of known kind.

use holdtrue_engine::fit::Row;
use holdtrue_engine::setup::{FitSetup, WindowLength};
use holdtrue_engine::time::{Duration, Timestamp};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use rand_distr::{Distribution, Exp1, StandardNormal, StandardUniform};
use std::f64::consts::TAU;

/// Seconds of a window; a regular row comes every second.
const WINDOW_SECONDS: u32 = 1024;
/// Segments of a window.
pub(crate) const SEGMENTS: u32 = 64;
/// Seconds of a segment.
const SEGMENT_SECONDS: u32 = WINDOW_SECONDS / SEGMENTS;
/// Start of every stretch, seconds of Unix time; the start of a segment.
const START_SECONDS: i64 = 1_700_000_000;
const NANOSECONDS: f64 = 1e9;

/// The default configuration of a fit, the same for every stream.
pub(crate) fn default_setup() -> FitSetup {
    FitSetup {
        window: WindowLength::Time(Duration::from_seconds(i64::from(WINDOW_SECONDS))),
        segments: SEGMENTS,
        ..FitSetup::default()
    }
}

/// Noise of variance 1 (the mixture and the sines: of white noise of variance 1 and more).
#[derive(Clone, Copy, Debug)]
#[allow(dead_code, reason = "each test uses some")]
pub(crate) enum Noise {
    White,
    /// First-order autoregression with this correlation from row to row.
    Autoregression(f64),
    /// White noise and an autoregression of correlation 0.95, variance 1 each.
    WhiteAndSlow,
    /// White noise and a sine of this amplitude with eight cycles per window, at a random phase.
    WhiteAndCycle(f64),
}

/// When rows come.
#[derive(Clone, Copy, Debug)]
#[allow(dead_code, reason = "each test uses some")]
pub(crate) enum Sampling {
    /// 1024 per window, evenly.
    Regular,
    /// Lognormal numbers per segment (σ of the logarithm 1, mean 16) at random times, one segment
    /// in eight or so empty in gaps of six on average. Noise is correlated from row to row,
    /// whatever the time between them.
    Irregular,
    /// The same, with noise correlated in time: as from row to row where rows come every second.
    IrregularInTime,
    /// So many per window, about evenly.
    Sparse(u32),
}

/// A seeded stream of noise without drift.
pub(crate) struct Stream {
    random: ChaCha8Rng,
    noise: Noise,
    slow: f64,
    phase: f64,
}

impl Stream {
    pub(crate) fn new(noise: Noise, seed: u64) -> Self {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        let slow = StandardNormal.sample(&mut random);
        let phase = StandardUniform.sample(&mut random);
        Self {
            random,
            noise,
            slow,
            phase,
        }
    }

    fn normal(&mut self) -> f64 {
        StandardNormal.sample(&mut self.random)
    }

    fn uniform(&mut self) -> f64 {
        StandardUniform.sample(&mut self.random)
    }

    /// `steps`: how many times the correlation works between the last row and this.
    fn autoregression(&mut self, correlation: f64, steps: f64) -> f64 {
        let correlation = correlation.powf(steps);
        let news = (1.0 - correlation * correlation).sqrt() * self.normal();
        self.slow = correlation * self.slow + news;
        self.slow
    }

    /// The next row's noise, at `windows` from the start of the stretch.
    fn next(&mut self, windows: f64, steps: f64) -> f64 {
        match self.noise {
            Noise::White => self.normal(),
            Noise::Autoregression(correlation) => self.autoregression(correlation, steps),
            Noise::WhiteAndSlow => self.normal() + self.autoregression(0.95, steps),
            Noise::WhiteAndCycle(amplitude) => {
                self.normal() + amplitude * (TAU * (8.0 * windows + self.phase)).sin()
            }
        }
    }

    /// Rows of so many windows, with `drift` (of windows from the start) added.
    pub(crate) fn rows(
        &mut self,
        sampling: Sampling,
        windows: u32,
        drift: impl Fn(f64) -> f64,
    ) -> Vec<Row> {
        let seconds = match sampling {
            Sampling::Regular => (0..windows * WINDOW_SECONDS)
                .map(|i| f64::from(i) + 0.5)
                .collect(),
            Sampling::Irregular | Sampling::IrregularInTime => self.irregular_seconds(windows),
            Sampling::Sparse(pairs) => self.sparse_seconds(windows, pairs),
        };
        let mut last = 0.0;
        seconds
            .into_iter()
            .map(|seconds| {
                let steps = match sampling {
                    Sampling::IrregularInTime => seconds - last,
                    _ => 1.0,
                };
                last = seconds;
                let at = seconds / f64::from(WINDOW_SECONDS);
                Row {
                    time: instant(seconds),
                    error: drift(at) + self.next(at, steps),
                    weight: 1.0,
                    x: 0.0,
                    influences: [0.0; 2],
                }
            })
            .collect()
    }

    fn irregular_seconds(&mut self, windows: u32) -> Vec<f64> {
        let mut seconds = Vec::new();
        let mut gap = 0.0;
        for segment in 0..windows * SEGMENTS {
            // Mean of a lognormal: exp(μ + σ²/2).
            let count = (f64::from(SEGMENT_SECONDS) * (self.normal() - 0.5).exp()).round();
            if gap <= 0.0 && self.uniform() < 0.02 {
                let length: f64 = Exp1.sample(&mut self.random);
                gap = (1.0 + 5.0 * length).floor();
            }
            if gap > 0.0 {
                gap -= 1.0;
                continue;
            }
            let mut times = Vec::new();
            while (times.len() as f64) < count {
                times.push((f64::from(segment) + self.uniform()) * f64::from(SEGMENT_SECONDS));
            }
            times.sort_by(f64::total_cmp);
            seconds.append(&mut times);
        }
        seconds
    }

    fn sparse_seconds(&mut self, windows: u32, pairs: u32) -> Vec<f64> {
        let spacing = f64::from(WINDOW_SECONDS) / f64::from(pairs);
        (0..windows * pairs)
            .map(|i| (f64::from(i) + 0.2 + 0.6 * self.uniform()) * spacing)
            .collect()
    }
}

/// Windows from the start of the stretch.
#[allow(dead_code, reason = "only the test of power asks")]
pub(crate) fn windows_since_start(time: Timestamp) -> f64 {
    let start = Timestamp(START_SECONDS * 1_000_000_000);
    time.since(start).seconds() / f64::from(WINDOW_SECONDS)
}

fn instant(seconds: f64) -> Timestamp {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "a few thousand seconds in nanoseconds"
    )]
    let nanoseconds = (seconds * NANOSECONDS) as i64;
    Timestamp(START_SECONDS * 1_000_000_000 + nanoseconds)
}

/// Results of `job` for 0 … `runs` − 1 in order, computed on all processors.
pub(crate) fn for_all_runs<T: Send>(runs: u64, job: impl Fn(u64) -> T + Sync) -> Vec<T> {
    let workers = std::thread::available_parallelism().map_or(1, usize::from) as u64;
    let mut results: Vec<(u64, T)> = std::thread::scope(|scope| {
        let job = &job;
        let threads: Vec<_> = (0..workers)
            .map(|worker| {
                scope.spawn(move || {
                    let mut mine = Vec::new();
                    let mut run = worker;
                    while run < runs {
                        mine.push((run, job(run)));
                        run += workers;
                    }
                    mine
                })
            })
            .collect();
        threads
            .into_iter()
            .flat_map(|thread| thread.join().expect("a run panicked"))
            .collect()
    });
    results.sort_by_key(|(run, _)| *run);
    results.into_iter().map(|(_, result)| result).collect()
}
