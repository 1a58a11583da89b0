//! Whether U is honest: how often the published interval holds the true systematic error.
//!
//! Invented errors of known kind go through [`Fit`] itself, without broker, pairing or screening,
//! and the interval ê ± t·u at the newest pair is compared with the truth. The unit of error is the
//! standard deviation of the noise, the unit of time the window. Every function is pure: the same
//! seed gives the same numbers, and other seeds give other runs.

use crate::range::{Draw, Duty};
use holdtrue_engine::fit::basis::MAX_INFLUENCES;
use holdtrue_engine::fit::{Fit, Published, Row};
use holdtrue_engine::quantile;
use holdtrue_engine::setup::{FitSetup, WindowLength};
use holdtrue_engine::time::{Duration, Timestamp};

/// Slots for a row in a window of dense patterns; a segment has sixteen.
const ROWS: u32 = 1024;
/// Segments of a window.
const SEGMENTS: u32 = 64;
/// Slots of a segment.
const SLOTS: u32 = ROWS / SEGMENTS;
/// Nanoseconds of a slot.
const SLOT: f64 = 60e9;
/// Start of every stretch, Unix time; the start of a segment.
const START: i64 = 28_333_334 * 60_000_000_000;
/// The coverage asked for.
const COVERAGE: f64 = 0.95;
/// Windows before a drift begins: the weights of the degrees have settled.
const QUIET: f64 = 1.5;
/// Windows of drift that are looked at.
const DRIFTING: f64 = 3.5;
/// Instants per window at which a drifting stretch is looked at.
const LOOKS: u32 = 16;

/// A kind of noise of variance 1.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Noise {
    /// Independent from row to row.
    White,
    /// First-order autoregression with this correlation from slot to slot.
    Autoregression(f64),
    /// White noise and an autoregression of correlation 0.95, half of the variance each.
    WhiteAndSlow,
}

/// When rows come.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Pattern {
    /// One in every slot.
    Even,
    /// Lognormal numbers per segment (σ of the logarithm 1, mean 16) at random times.
    Lognormal,
    /// One in every slot but for gaps of two segments to twelve; a fifth of the time is lost. Noise
    /// goes on being correlated in time during a gap.
    Gappy,
    /// So many per window, about evenly.
    Pairs(u32),
}

/// A true error that grows from its onset on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Drift {
    /// So many σ per window.
    Line(f64),
    /// So many σ per window squared: e = aτ².
    Parabola(f64),
}

/// How many of so many intervals held the truth.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Share {
    /// Held it.
    pub held: u64,
    /// Were looked at.
    pub of: u64,
}

/// What a drifting stretch showed at one time after its onset, over all runs.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Look {
    /// Windows since the onset.
    pub at: f64,
    /// Of the published interval.
    pub share: Share,
    /// Sum of squares of ê − truth, ê the published mean.
    pub mean_square: f64,
    /// The same of the plain fit of the announced degree.
    pub single_square: f64,
    /// Sum of u².
    pub u_square: f64,
}

/// What drifting stretches showed, look after look.
#[derive(Clone, Debug, PartialEq)]
pub struct Course {
    /// In order of time.
    pub looks: Vec<Look>,
}

impl Share {
    /// As a fraction; 0 of nothing is 0.
    #[must_use]
    pub fn fraction(self) -> f64 {
        self.held as f64 / (self.of.max(1)) as f64
    }

    fn count(&mut self, held: bool) {
        self.held += u64::from(held);
        self.of += 1;
    }

    fn add(&mut self, other: Self) {
        self.held += other.held;
        self.of += other.of;
    }
}

impl Drift {
    /// The true error so many windows after the onset.
    #[must_use]
    pub fn at(self, windows: f64) -> f64 {
        let since = windows.max(0.0);
        match self {
            Self::Line(slope) => slope * since,
            Self::Parabola(curve) => curve * since * since,
        }
    }
}

impl Course {
    /// All looks together.
    #[must_use]
    pub fn over_time(&self) -> Share {
        let mut share = Share::default();
        for look in &self.looks {
            share.add(look.share);
        }
        share
    }

    /// The look at which the fewest intervals held the truth.
    #[must_use]
    pub fn worst(&self) -> Option<&Look> {
        self.looks
            .iter()
            .min_by(|a, b| a.share.fraction().total_cmp(&b.share.fraction()))
    }

    /// RMS error over all looks: of the published mean and of the announced degree's curve.
    #[must_use]
    pub fn rms(&self) -> (f64, f64) {
        (
            self.root(|look| look.mean_square),
            self.root(|look| look.single_square),
        )
    }

    /// RMS of u over all looks.
    #[must_use]
    pub fn rms_u(&self) -> f64 {
        self.root(|look| look.u_square)
    }

    fn root(&self, part: fn(&Look) -> f64) -> f64 {
        let of = self.over_time().of.max(1) as f64;
        libm::sqrt(self.looks.iter().map(part).sum::<f64>() / of)
    }
}

/// A seeded stream of rows of noise.
struct Stream {
    draw: Draw,
    noise: Noise,
    pattern: Pattern,
    slow: Option<f64>,
    /// Slots of the rows of the segment (or pair) at hand, latest first.
    waiting: Vec<f64>,
    segment: u32,
    /// Segments that are still lost.
    gap: u32,
    last: f64,
}

impl Stream {
    fn new(noise: Noise, pattern: Pattern, seed: u64) -> Self {
        Self {
            draw: Draw::new(seed, 0, Duty::Noise),
            noise,
            pattern,
            slow: None,
            waiting: Vec::new(),
            segment: 0,
            gap: 0,
            last: 0.0,
        }
    }

    /// The next row: slots since the start, and its noise.
    fn next(&mut self) -> (f64, f64) {
        while self.waiting.is_empty() {
            self.fill();
        }
        let slot = self.waiting.pop().unwrap_or(self.last);
        let steps = match self.pattern {
            Pattern::Gappy => slot - self.last,
            _ => 1.0,
        };
        self.last = slot;
        let noise = match self.noise {
            Noise::White => self.draw.normal(),
            Noise::Autoregression(correlation) => self.slow(correlation, steps),
            Noise::WhiteAndSlow => libm::sqrt(0.5) * (self.draw.normal() + self.slow(0.95, steps)),
        };
        (slot, noise)
    }

    fn slow(&mut self, correlation: f64, steps: f64) -> f64 {
        let fresh = self.draw.normal();
        let next = self.slow.map_or(fresh, |last| {
            let kept = if steps > 1.0 {
                libm::pow(correlation, steps)
            } else {
                correlation
            };
            kept * last + libm::sqrt(1.0 - kept * kept) * fresh
        });
        self.slow = Some(next);
        next
    }

    /// Draws the next segment's rows, or the next pair's.
    fn fill(&mut self) {
        let start = f64::from(self.segment) * f64::from(SLOTS);
        self.segment += 1;
        let waiting = &mut self.waiting;
        match self.pattern {
            Pattern::Even => waiting.extend((0..SLOTS).map(|i| start + f64::from(i) + 0.5)),
            Pattern::Gappy => {
                if self.gap > 0 {
                    self.gap -= 1;
                    return;
                }
                waiting.extend((0..SLOTS).map(|i| start + f64::from(i) + 0.5));
                // One in 28 begins a gap of seven on average: a fifth is lost.
                if self.draw.unit() < 1.0 / 28.0 {
                    self.gap = (2..=12).nth(whole(11.0 * self.draw.unit())).unwrap_or(2);
                }
            }
            Pattern::Lognormal => {
                // The mean of a lognormal is exp(μ + σ²/2).
                let count = f64::from(SLOTS) * libm::exp(self.draw.normal() - 0.5);
                for _ in 0..whole(count + 0.5) {
                    waiting.push(start + f64::from(SLOTS) * self.draw.unit());
                }
                waiting.sort_by(f64::total_cmp);
            }
            Pattern::Pairs(pairs) => {
                let spacing = f64::from(ROWS) / f64::from(pairs);
                let place = f64::from(self.segment) - 0.8 + 0.6 * self.draw.unit();
                waiting.push(spacing * place);
            }
        }
        waiting.reverse();
    }
}

/// The whole part of a small number ≥ 0.
fn whole(number: f64) -> usize {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "small and not negative"
    )]
    let whole = number as usize;
    whole
}

fn row(slot: f64, error: f64) -> Row {
    #[allow(clippy::cast_possible_truncation, reason = "a few windows of minutes")]
    let nanoseconds = (slot * SLOT) as i64;
    Row {
        time: Timestamp(START + nanoseconds),
        error,
        weight: 1.0,
        x: 0.0,
        influences: [0.0; MAX_INFLUENCES],
    }
}

fn setup(forced_degree: Option<u8>) -> FitSetup {
    FitSetup {
        window: WindowLength::Time(Duration::from_seconds(i64::from(ROWS) * 60)),
        segments: SEGMENTS,
        forced_degree,
        ..FitSetup::default()
    }
}

/// ê, u and U at the newest pair, as a channel's judgement makes them of the fit. What the channel
/// declares beside (the reference's common part, resolution) is zero here; what recent residuals
/// say of a lack of fit can only widen U and is left out.
fn interval(published: &Published) -> (f64, f64, f64) {
    let variance = published.covariance[0][0] + published.turn_variance;
    let u = libm::sqrt(variance.max(0.0));
    let k = quantile::student(COVERAGE, published.degrees_of_freedom);
    (published.coefficients[0], u, k * u)
}

/// Coverage without drift with the degree fixed at 0, 1 and 2, from `runs` stretches. Each is
/// looked at after one window and some, and twice more a window and some apart.
#[must_use]
pub fn fixed(noise: Noise, pattern: Pattern, runs: u64, seed: u64) -> [Share; 3] {
    let mut shares = [Share::default(); 3];
    for run in 0..runs {
        let mut stream = Stream::new(noise, pattern, seed + run);
        let mut fits = [0, 1, 2].map(|degree| Fit::new(setup(Some(degree))));
        for _ in 0..3 {
            let until = stream.last + f64::from(ROWS) * (1.05 + 0.2 * stream.draw.unit());
            loop {
                let (slot, error) = stream.next();
                for fit in &mut fits {
                    fit.insert(row(slot, error));
                }
                if slot >= until {
                    break;
                }
            }
            for (fit, share) in fits.iter().zip(&mut shares) {
                if let Some(published) = fit.published() {
                    let (error, _, expanded) = interval(&published);
                    share.count(error.abs() <= expanded);
                }
            }
        }
    }
    shares
}

/// Coverage with the degree free, from the onset of a drift on.
#[must_use]
pub fn free(noise: Noise, pattern: Pattern, drift: Drift, runs: u64, seed: u64) -> Course {
    let count = whole(DRIFTING * f64::from(LOOKS));
    let mut looks: Vec<Look> = (0..count)
        .map(|place| Look {
            at: (place + 1) as f64 / f64::from(LOOKS),
            ..Look::default()
        })
        .collect();
    for run in 0..runs {
        let mut stream = Stream::new(noise, pattern, seed + run);
        let mut fit = Fit::new(setup(None));
        // The onset may fall anywhere in a segment.
        let onset = QUIET + stream.draw.unit() / f64::from(SEGMENTS);
        for look in &mut looks {
            let mut now;
            loop {
                let (slot, error) = stream.next();
                now = slot / f64::from(ROWS) - onset;
                if fit.insert(row(slot, error + drift.at(now))).closed {
                    fit.decide(true);
                }
                if now >= look.at {
                    break;
                }
            }
            let Some(published) = fit.published() else {
                continue;
            };
            let (error, u, expanded) = interval(&published);
            let off = error - drift.at(now);
            let single = fit
                .plain(fit.degree(), published.origin)
                .map_or(error, |plain| plain.coefficients[0])
                - drift.at(now);
            look.share.count(off.abs() <= expanded);
            look.mean_square += off * off;
            look.single_square += single * single;
            look.u_square += u * u;
        }
    }
    Course { looks }
}
