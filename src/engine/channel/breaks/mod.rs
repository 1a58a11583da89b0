//! Beside the screen: whether the sensor stepped.
//!
//! ```text
//!   innovations, rejected ones too ─▶ whitened (noise) ─▶ chart ─▶ signal ─┐   lock-out ─▶ signal
//!                                                                          ▼
//!         ┌───────────────────── look (evidence): mean after the change against what the largest
//!         │                      model from before it expects, and against a bend
//!         ▼                               │
//!   a step: the stretch is closed         ├─▶ not yet: look again with a fifth more pairs, unless
//!   at the change time                    │   the other arm signals or the screen locks out
//!                                         └─▶ no: evidence of drift; the chart starts anew
//! ```
//!
//! The chart costs the same for every pair; looks happen at signals only.

mod bend;
mod chart;
mod evidence;
mod noise;

use super::recent::Recent;
use super::screening::Innovation;
use super::stretch::Stretch;
use crate::setup::ChannelSetup;
use crate::time::Timestamp;
use chart::{Chart, DECISION_INTERVAL, REFERENCE_VALUE};
pub(crate) use evidence::Finding;
use evidence::Question;
use noise::Noise;
use serde::{Deserialize, Serialize};
use std::collections::VecDeque;

/// Pairs after a change beyond which a signal is given up as evidence of drift.
const PATIENCE: u32 = 64;
/// A look is repeated when the pairs since the last zero have grown by one and this part.
const MORE: u32 = 5;
/// Fewest pairs that make a step: as many rejections as lock the screen out, within these bounds.
const FEWEST: u32 = 3;
const MOST: u32 = 16;

/// The state of the station.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Breaks {
    noise: Noise,
    chart: Chart,
    /// The newest standardised innovation.
    before: Option<f64>,
    /// Times of the newest pairs that the chart took, to know where an arm left zero.
    times: VecDeque<Timestamp>,
    pending: Option<Pending>,
}

/// A signal that waits for more pairs.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Pending {
    up: bool,
    /// First pair after the change, as the chart has it.
    began: Timestamp,
    /// Pairs since then.
    pairs: u32,
    /// Pairs at which to look next.
    next_look: u32,
}

impl Breaks {
    /// Takes a pair's innovation; what was found, if that is a step. `recent` holds the pair.
    pub(super) fn take(
        &mut self,
        innovation: Innovation,
        locks_out: bool,
        (stretch, recent): (&Stretch, &Recent),
        confirmation: f64,
        setup: &ChannelSetup,
    ) -> Option<Finding> {
        let newest = self.times.back();
        if newest.is_some_and(|newest| innovation.time < *newest) {
            return None;
        }
        let standardised = innovation.value / innovation.spread;
        let before = self.before.replace(standardised);
        if self.times.len() == PATIENCE as usize {
            self.times.pop_front();
        }
        self.times.push_back(innovation.time);
        let known = self.noise.known();
        self.noise.take(standardised);
        let known = known?;
        self.chart
            .take(known.whiten(standardised, before), REFERENCE_VALUE);
        let least = setup.screening.lock_out_after.clamp(FEWEST, MOST);
        let up = innovation.value > 0.0;
        let pending = self.follow(locks_out.then_some((up, least)))?;
        if pending.pairs < pending.next_look.max(least) {
            return None;
        }
        let question = Question {
            stretch,
            recent,
            setup,
            known,
            up: pending.up,
            least: least as usize,
            confirmation,
        };
        let found = question.look(pending.began);
        if found.is_none() {
            self.look_again();
        }
        found
    }

    /// The signal that waits, with the newest pair counted; a new one if none does, or if what
    /// happens meanwhile speaks louder: the screen locks out, or the other arm signals.
    fn follow(&mut self, locks_out: Option<(bool, u32)>) -> Option<Pending> {
        let waits = self.pending.map(|pending| pending.up);
        let signal = match waits {
            Some(up) => self.chart.signal_of(!up, DECISION_INTERVAL),
            None => self.chart.signal(DECISION_INTERVAL),
        };
        let signal = signal.map(|signal| (signal.up, signal.readings.min(PATIENCE)));
        if let Some((up, pairs)) = signal.or(locks_out) {
            if waits == Some(!up) {
                self.chart.forget(!up);
            }
            let place = self.times.len().saturating_sub(pairs as usize);
            self.pending = Some(Pending {
                up,
                began: *self.times.get(place)?,
                pairs,
                next_look: pairs,
            });
        } else if let Some(pending) = &mut self.pending {
            pending.pairs += 1;
        }
        self.pending
    }

    /// The signal was not confirmed: waits for more pairs, or gives it up as drift.
    fn look_again(&mut self) {
        let Some(pending) = &mut self.pending else {
            return;
        };
        if pending.pairs >= PATIENCE {
            self.pending = None;
            self.chart = Chart::default();
        } else {
            pending.next_look = pending.pairs + 1 + pending.pairs / MORE;
        }
    }

    /// The latest so many pairs were struck: what the chart made of them is forgotten, and what is
    /// known of the noise stays as it was before them.
    pub(super) fn forget_latest(&mut self, latest: usize) {
        self.begin_stretch(Some(latest));
    }

    /// A new stretch begins. Of its noise the latest `latest` innovations are forgotten, which what
    /// ended the old one pulled away; `None`: everything is.
    pub(super) fn begin_stretch(&mut self, latest: Option<usize>) {
        let mut noise = latest.map_or_else(Noise::default, |_| std::mem::take(&mut self.noise));
        noise.forget(latest.unwrap_or(0));
        *self = Self {
            noise,
            ..Self::default()
        };
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::Channel;
    use crate::channel::pairing::Pair;
    use crate::channel::testing::{Stage, channel_setup};
    use crate::event::Output;
    use crate::setup::WindowLength;
    use crate::time::Duration;

    /// Signs of the steps that are told, with the number of the pair that told it, of errors a
    /// minute apart.
    fn told(errors: impl IntoIterator<Item = f64>) -> Vec<(usize, bool)> {
        let mut setup = channel_setup();
        setup.fit.window = WindowLength::Pairs(512);
        let mut stage = Stage::new(setup);
        let mut channel = Channel::new(&stage.setup, 0);
        let mut steps = Vec::new();
        for (index, error) in errors.into_iter().enumerate() {
            let minutes = i64::try_from(index).expect("few pairs");
            let time = Timestamp(0).plus(Duration::from_seconds(60 * minutes));
            let said = stage.act(time, |scene, report| {
                channel.take_pair(&Pair::at(time, 7.0 + error, 7.0), scene, report);
            });
            steps.extend(said.iter().filter_map(|it| match it {
                Output::Step(step) => Some((index, step.size > 0.0)),
                _ => None,
            }));
        }
        steps
    }

    /// Noise of about ±1 without a generator.
    fn noise(index: u32) -> f64 {
        2.0 * ((f64::from(index) * 0.618_033_988_749_895).fract() - 0.5)
    }

    /// A shift too small to be confirmed signals and waits; the step that follows on the other side
    /// is found while it does.
    #[test]
    fn a_signal_that_waits_hides_no_step() {
        let errors = (0..340_u32).map(|index| {
            let level = match index {
                0..280 => 0.0,
                280..300 => 0.9,
                _ => -4.0,
            };
            level + noise(index)
        });
        let steps = told(errors);
        assert!(
            matches!(steps[..], [(found, false)] if (302..312).contains(&found)),
            "{steps:?}"
        );
    }
}
