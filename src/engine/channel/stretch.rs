//! One stretch: unbroken history between two service events or steps. Screen, fit and what the
//! judgement looks back on live here, so that closing a stretch forgets all of it at once and a fit
//! cannot reach across its ends.

use super::judgement::Residuals;
use super::pairing::Pair;
use super::recent::{Recent, Remembered};
use super::review::Judged;
use super::screening::{Innovation, Screen, Verdict};
use crate::event::{RefusedReason, Rejection};
use crate::fit::before::Gone;
use crate::fit::{Change, Fit, Row};
use crate::fleet::Vote;
use crate::setup::{ChannelSetup, SpanSide, WindowLength};
use crate::time::Timestamp;
use serde::{Deserialize, Serialize};

/// The state of one stretch.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct Stretch {
    /// Counts the channel's stretches from 1.
    number: u32,
    /// When it began, if it follows on another: nothing older belongs to it.
    began: Option<Timestamp>,
    /// Nothing older than this is taken, though it began earlier.
    takes_from: Option<Timestamp>,
    /// Pairs that it began with and nobody had measured: as-left readings.
    opening: Vec<Pair>,
    screen: Screen,
    fit: Fit,
    residuals: Residuals,
    /// Phenomenon time of the newest pair in the fit.
    last_pair: Option<Timestamp>,
    /// Pairs that entered the fit.
    pairs: u64,
    /// Pairs that entered it since the last judgement.
    unjudged: u64,
    /// Residual standard deviation of the plain fit before the newest pair.
    scatter: Option<f64>,
    /// The last judgement in numbers, for the standing.
    judged: Option<Judged>,
}

/// What the next stretch knows from the one before.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Carries {
    /// The noise of the sensor, as it was before the latest so many pairs: the sensor is the same.
    Noise {
        /// Pairs that what ends the stretch pulled away.
        latest: usize,
    },
    /// Nothing: the sensor is another one.
    Nothing,
}

/// What became of a pair.
#[derive(Debug)]
pub(super) struct Taken {
    /// What kept it out of the fit; `None`: it entered.
    pub(super) rejected: Option<Rejection>,
    /// How far it lies from what the fit expected; `None` while it expects nothing.
    pub(super) innovation: Option<Innovation>,
    /// The screen stopped rejecting with it.
    pub(super) locks_out: bool,
    /// The announced degree changed with it.
    pub(super) change: Option<Change>,
}

impl Stretch {
    /// A stretch that has seen nothing.
    pub(super) fn new(number: u32, setup: &ChannelSetup) -> Self {
        Self {
            number,
            began: None,
            takes_from: None,
            opening: Vec::new(),
            screen: Screen::default(),
            fit: Fit::new(setup.fit),
            residuals: Residuals::default(),
            last_pair: None,
            pairs: 0,
            unjudged: 0,
            scatter: None,
            judged: None,
        }
    }

    /// The one that follows on this, with nothing in it. `carries` so much of what is known of the
    /// noise; see [`Carries`].
    pub(super) fn next(&self, carries: Carries, setup: &ChannelSetup) -> Self {
        let screen = match carries {
            Carries::Noise { latest } => self.screen.carried_on(latest),
            Carries::Nothing => Screen::default(),
        };
        Self {
            screen,
            ..Self::new(self.number.saturating_add(1), setup)
        }
    }

    /// The stretch before this one, `ended`, as if it had gone on until now; of the noise it knows
    /// what has been learned meanwhile.
    pub(super) fn taken_over_by(&self, ended: Self) -> Self {
        Self {
            screen: self.screen.clone(),
            ..ended
        }
    }

    /// Says what does not fit the setup or does not hold together, after it was stored.
    pub(super) fn check(&self, setup: &ChannelSetup) -> Result<(), &'static str> {
        self.fit.check(&setup.fit)
    }

    /// Nothing older than this belongs to it.
    pub(super) fn begin_at(&mut self, at: Timestamp) {
        self.began = Some(at);
    }

    /// It begins with these pairs, and takes others from this instant on.
    pub(super) fn open_with(&mut self, opening: &[Pair], from: Timestamp) {
        self.opening = opening.to_vec();
        self.takes_from = Some(from);
    }

    /// The pairs that it began with.
    pub(super) fn opening(&self) -> &[Pair] {
        &self.opening
    }

    /// From when on it takes pairs; `None` for a channel's first.
    pub(super) fn takes_from(&self) -> Option<Timestamp> {
        self.takes_from
    }

    /// When it began; `None` for a channel's first.
    pub(super) fn began(&self) -> Option<Timestamp> {
        self.began
    }

    /// Counts the channel's stretches from 1.
    pub(super) fn number(&self) -> u32 {
        self.number
    }

    /// The fit.
    pub(super) fn fit(&self) -> &Fit {
        &self.fit
    }

    /// The newest accepted errors.
    pub(super) fn residuals(&self) -> &Residuals {
        &self.residuals
    }

    /// Whether the window has left its beginning behind.
    pub(super) fn fills_its_window(&self) -> bool {
        self.fit.window().has_dropped()
    }

    /// Phenomenon time of the newest pair in the fit.
    pub(super) fn last_pair(&self) -> Option<Timestamp> {
        self.last_pair
    }

    /// Pairs that entered the fit.
    pub(super) fn pairs(&self) -> u64 {
        self.pairs
    }

    /// Pairs that entered it since the last judgement.
    pub(super) fn unjudged(&self) -> u64 {
        self.unjudged
    }

    /// Residual standard deviation of the plain fit before the newest pair.
    pub(super) fn scatter(&self) -> Option<f64> {
        self.scatter
    }

    /// The last judgement in numbers.
    pub(super) fn judged(&self) -> Option<Judged> {
        self.judged
    }

    /// Takes note of a judgement.
    pub(super) fn note_judged(&mut self, judged: Judged) {
        self.judged = Some(judged);
    }

    /// A judgement begins: whether anything is new since the last.
    pub(super) fn begin_judgement(&mut self) -> bool {
        std::mem::take(&mut self.unjudged) > 0
    }

    /// Whether the screen has stopped rejecting.
    pub(super) fn is_locked_out(&self) -> bool {
        self.screen.is_locked_out()
    }

    /// Goes on under an edited setup in which its rows mean the same.
    pub(super) fn edit(&mut self, after: &ChannelSetup) {
        self.fit.edit(after.fit);
    }

    /// The screen was switched off.
    pub(super) fn forget_screen(&mut self) {
        self.screen = Screen::default();
    }

    /// Screens a pair and enters it into the fit.
    pub(super) fn take(&mut self, pair: &Pair, setup: &ChannelSetup) -> Taken {
        if let Some(rejected) = self.before_it_began(pair) {
            return Taken {
                rejected: Some(rejected),
                innovation: None,
                change: None,
                locks_out: false,
            };
        }
        let error = pair.indication - pair.reference;
        // What the window has left behind is no surprise to the fit, however far off.
        let innovation = if self.fit.window().is_too_old(pair.time) {
            None
        } else {
            self.innovation(pair, error, setup)
        };
        if let Some(innovation) = innovation {
            self.scatter = Some(innovation.residual_sd);
        }
        let verdict = match innovation {
            Some(innovation) if setup.screening.enabled => {
                let window = self.fit.window();
                let from = self.screen.is_locked_out().then(|| window.oldest());
                self.screen.judge(innovation, from.flatten(), setup)
            }
            _ => Verdict::Pass,
        };
        let mut change = None;
        let rejected = if let Verdict::Reject { value, threshold } = verdict {
            Some(Rejection {
                reason: RefusedReason::InnovationGate,
                value,
                threshold,
            })
        } else {
            self.enter(pair, error, setup, &mut change)
        };
        Taken {
            rejected,
            innovation,
            locks_out: matches!(verdict, Verdict::LocksOut { .. }),
            change,
        }
    }

    /// The fit as it was before `instant`, as far as `recent` remembers: in a window whose segments
    /// hold more rows than that, rows of the segment around the instant are missing.
    pub(super) fn fit_before(
        &self,
        instant: Timestamp,
        recent: &Recent,
        setup: &ChannelSetup,
    ) -> Fit {
        let (mut fit, gone) = self.fit.before(instant);
        for remembered in put_back(gone, recent.entered(self.number)) {
            let pair = &remembered.pair;
            if pair.time < instant {
                fit.insert(row(pair, setup));
            }
        }
        fit
    }

    /// The newest accepted errors as they were before `instant`, as far as `recent` remembers.
    pub(super) fn residuals_before(
        &self,
        instant: Timestamp,
        recent: &Recent,
        setup: &ChannelSetup,
    ) -> Residuals {
        let mut residuals = Residuals::default();
        for Remembered { pair, .. } in recent.entered(self.number) {
            if pair.time < instant {
                residuals.push(&row(pair, setup));
            }
        }
        residuals
    }

    /// Takes all pairs from `instant` on out of the fit again. (Rows that left the window meanwhile
    /// do not come back.)
    pub(super) fn rewind(&mut self, instant: Timestamp, recent: &Recent, setup: &ChannelSetup) {
        let before = self.fit.window().rows();
        self.fit = self.fit_before(instant, recent, setup);
        let left = before.saturating_sub(self.fit.window().rows());
        self.pairs = self.pairs.saturating_sub(left);
        self.residuals = self.residuals_before(instant, recent, setup);
        self.last_pair = self.fit.window().newest();
        self.unjudged += left;
        self.judged = None;
    }

    /// This stretch with nothing in it, to take its pairs again.
    pub(super) fn afresh(&self, setup: &ChannelSetup) -> Self {
        Self {
            began: self.began,
            takes_from: self.takes_from,
            opening: self.opening.clone(),
            ..Self::new(self.number, setup)
        }
    }

    /// The number of pairs that entered is known otherwise: some have left the window and were not
    /// taken again.
    pub(super) fn set_pairs(&mut self, pairs: u64) {
        self.pairs = self.pairs.max(pairs);
    }

    /// Forgets what the latest pairs, which were struck, said of the noise.
    pub(super) fn forget_latest(&mut self, struck: &[Remembered]) {
        let times: Vec<Timestamp> = struck.iter().map(|held| held.pair.time).collect();
        self.screen.forget_latest(&times);
    }

    /// What keeps a pair out that came late and belongs to the stretch before.
    fn before_it_began(&self, pair: &Pair) -> Option<Rejection> {
        let began = self.began.filter(|began| pair.time < *began)?;
        Some(Rejection {
            reason: RefusedReason::Late,
            value: began.since(pair.time).seconds(),
            threshold: 0.0,
        })
    }

    /// What a pair says about its reference; `None` while the fit expects nothing, or can't be
    /// relied on.
    pub(super) fn vote(&self, pair: &Pair, setup: &ChannelSetup) -> Option<Vote> {
        if self.is_locked_out() || self.fit.window().is_too_old(pair.time) {
            return None;
        }
        let innovation = self.innovation(pair, pair.indication - pair.reference, setup)?;
        let least = setup.noise.max(setup.resolution / 12.0_f64.sqrt());
        let sd = innovation.residual_sd.max(least) * innovation.spread;
        (sd > 0.0 && sd.is_finite()).then_some(Vote {
            time: pair.time.minus(setup.lag),
            innovation: innovation.value,
            sd,
            indication: pair.indication,
        })
    }

    /// How far the pair lies from what the fit expects; `None` while it expects nothing.
    fn innovation(&self, pair: &Pair, error: f64, setup: &ChannelSetup) -> Option<Innovation> {
        let x = span_regressor(pair, setup);
        let expected = self.fit.predict(pair.time, x, pair.influences)?;
        let innovation = Innovation {
            time: pair.time,
            value: error - expected.error,
            spread: (1.0 / pair.weight + expected.leverage).sqrt(),
            residual_sd: expected.residual_sd,
        };
        let numbers = [innovation.value, innovation.spread, innovation.residual_sd];
        numbers.iter().all(|n| n.is_finite()).then_some(innovation)
    }

    /// Enters a pair into the fit; the rejection if it is older than the window.
    fn enter(
        &mut self,
        pair: &Pair,
        error: f64,
        setup: &ChannelSetup,
        change: &mut Option<Change>,
    ) -> Option<Rejection> {
        let row = row(pair, setup);
        let inserted = self.fit.insert(row);
        if inserted.out_of_range {
            return Some(Rejection {
                reason: RefusedReason::NotFinite,
                value: error,
                threshold: f64::MAX,
            });
        }
        if inserted.too_old {
            let newest = self.last_pair.unwrap_or(pair.time);
            return Some(Rejection {
                reason: RefusedReason::Late,
                value: newest.since(pair.time).seconds(),
                threshold: window_seconds(setup),
            });
        }
        self.last_pair = self.last_pair.max(Some(pair.time));
        self.pairs += 1;
        self.unjudged += 1;
        self.residuals.push(&row);
        if inserted.closed {
            *change = self.fit.decide(!self.screen.is_locked_out());
            if change.is_some() {
                self.judged = None;
            }
        }
        None
    }
}

/// What the span terms of a pair's row are a function of.
fn span_regressor(pair: &Pair, setup: &ChannelSetup) -> f64 {
    match setup.fit.span_side() {
        SpanSide::Reference => pair.reference,
        SpanSide::Indication => pair.indication,
    }
}

/// A pair as the fit takes it.
pub(super) fn row(pair: &Pair, setup: &ChannelSetup) -> Row {
    Row {
        time: pair.time,
        error: pair.indication - pair.reference,
        weight: pair.weight,
        x: span_regressor(pair, setup),
        influences: pair.influences,
    }
}

/// Those of the pairs entered that went with their segments.
fn put_back<'a>(
    gone: Gone,
    entered: impl DoubleEndedIterator<Item = &'a Remembered> + Clone,
) -> Vec<&'a Remembered> {
    match gone {
        Gone::Since(from) => entered.filter(|held| held.pair.time >= from).collect(),
        Gone::Last(count) => {
            let count = usize::try_from(count).unwrap_or(usize::MAX);
            let mut last: Vec<_> = entered.rev().take(count).collect();
            last.reverse();
            last
        }
    }
}

/// Length of a window in time, in seconds; 0 for a window in pairs, which has none.
fn window_seconds(setup: &ChannelSetup) -> f64 {
    match setup.fit.window {
        WindowLength::Time(length) => length.seconds(),
        WindowLength::Pairs(_) => 0.0,
    }
}
