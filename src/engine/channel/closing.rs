//! The end of a stretch at an instant that has passed, and the beginning of the next.
//!
//! What entered since that instant, and what was kept out since because it did not fit the old
//! stretch, is offered to the new one in the order in which it came. A pair whose fate changes is
//! told again. The correction in force rests on the old stretch: it is replaced by the new one's
//! where that has enough pairs, and withdrawn where not.

use super::ladder::Ladder;
use super::stretch::{Carries, Taken};
use super::{Channel, Pair, Remembered, Scene, telling};
use crate::event::Cause;
use crate::report::Report;
use crate::time::Timestamp;

/// What the pairs since the end of the old stretch have become.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(crate) struct Reentered {
    /// Pairs that entered the new stretch.
    pub(crate) pairs: u32,
    /// Of these, those that had been kept out of the old one.
    pub(crate) taken_back: u32,
}

/// How a stretch ends, and what the next one begins with.
#[derive(Clone, Copy)]
pub(crate) struct Closing<'a> {
    /// When the next one begins.
    pub(crate) at: Timestamp,
    /// From when on it takes pairs that have come; not earlier than that.
    pub(crate) from: Timestamp,
    pub(crate) carries: Carries,
    /// Pairs that nobody had made before: as-left readings.
    pub(crate) opening: &'a [Pair],
    /// Ends the sentence "the correction no longer holds: …" where the next one cannot replace it
    /// yet.
    pub(crate) why: &'a str,
}

impl Channel {
    /// Ends the stretch.
    pub(crate) fn close_stretch(
        &mut self,
        closing: &Closing<'_>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> Reentered {
        let &Closing {
            at,
            from,
            carries,
            opening,
            why,
        } = closing;
        let since = self.recent.take_for_next(from, self.stretch.number());
        self.stretch = self.stretch.next(carries, scene.setup);
        self.stepped = None;
        self.unrenewed = None;
        self.breaks.begin_stretch(match carries {
            Carries::Noise { latest } => Some(latest),
            Carries::Nothing => None,
        });
        self.stretch.begin_at(at);
        self.stretch.open_with(opening, from);
        for pair in opening {
            self.offer_to_stretch(pair, None, scene, report);
        }
        let mut reentered = Reentered::default();
        for held in since {
            let entered = held.rejected.is_none();
            let taken = self.offer_to_stretch(&held.pair, Some(entered), scene, report);
            if taken.rejected.is_none() {
                reentered.pairs += 1;
                reentered.taken_back += u32::from(!entered);
            }
        }
        self.publishing.leave_stretch();
        self.outlook.leave_stretch(scene, report);
        self.alarms.end_forecast(scene, report);
        self.alarms.step_is_past(why, scene, report);
        if !self.rests_on_present_stretch() {
            self.ladder = Ladder::Withdrawn {
                because: Cause::StretchEnded,
            };
        }
        self.judge(scene, report);
        if !self.rests_on_present_stretch() {
            let why = format!("the correction no longer holds: {why}");
            self.withdraw(&why, scene, report);
        }
        reentered
    }

    /// Offers a pair to the present stretch and remembers it. Its fate is told, unless `entered`
    /// says that it has been told already whether it entered, and that is still so.
    pub(super) fn offer_to_stretch(
        &mut self,
        pair: &Pair,
        entered: Option<bool>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) -> Taken {
        let mut taken = self.stretch.take(pair, scene.setup);
        if entered != Some(taken.rejected.is_none()) {
            telling::tell_fate(pair, taken.rejected, scene, report);
        }
        self.recent.push(Remembered {
            pair: *pair,
            stretch: self.stretch.number(),
            rejected: taken.rejected,
        });
        if let Some(change) = taken.change.take() {
            telling::tell_change(change, scene, report);
        }
        taken
    }

    /// Whether the correction in force, if there is one, rests on the present stretch.
    pub(super) fn rests_on_present_stretch(&self) -> bool {
        self.publishing.is_of(self.stretch.number())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::pairing::Pair;
    use crate::channel::testing::{Stage, channel_setup};
    use crate::event::{Output, PairFate};
    use crate::setup::WindowLength;
    use crate::time::Duration;

    fn pair(minute: i64, error: f64) -> Pair {
        Pair::at(minute_of(minute), 7.0 + error, 7.0)
    }

    fn minute_of(minute: i64) -> Timestamp {
        Timestamp(0).plus(Duration::from_seconds(60 * minute))
    }

    /// Noise of ±1, around `level`.
    fn error(minute: i64, level: f64) -> f64 {
        level + if minute % 2 == 0 { 1.0 } else { -1.0 }
    }

    /// A stretch ends at a minute, and the next one takes all that came since.
    fn close(
        channel: &mut Channel,
        stage: &mut Stage,
        minute: i64,
        carries: Carries,
        why: &str,
    ) -> (Reentered, Vec<Output>) {
        let mut reentered = Reentered::default();
        let said = stage.act(minute_of(63), |scene, report| {
            let closing = Closing {
                at: minute_of(minute),
                from: minute_of(minute),
                carries,
                opening: &[],
                why,
            };
            reentered = channel.close_stretch(&closing, scene, report);
        });
        (reentered, said)
    }

    /// A channel that has seen 60 pairs about zero and then `after` about 50. With 5 of them the
    /// screen locks out.
    fn stepped(stage: &mut Stage, after: i64) -> Channel {
        let mut channel = Channel::new(&stage.setup, 0);
        for minute in 0..60 + after {
            let level = if minute < 60 { 0.0 } else { 50.0 };
            stage.act(minute_of(minute), |scene, report| {
                channel.take_pair(&pair(minute, error(minute, level)), scene, report);
            });
        }
        channel
    }

    #[test]
    fn pairs_since_then_begin_the_next_stretch_and_rejected_ones_are_taken_back() {
        let mut stage = Stage::new(channel_setup());
        let mut channel = stepped(&mut stage, 4);
        assert_eq!(channel.stretch.pairs(), 60, "the gate keeps the others out");
        let carries = Carries::Noise { latest: 4 };
        let (reentered, said) = close(&mut channel, &mut stage, 60, carries, "it stepped");
        let expected = Reentered {
            pairs: 4,
            taken_back: 4,
        };
        assert_eq!(reentered, expected);
        assert_eq!((channel.stretch.number(), channel.stretch.pairs()), (2, 4));
        let told: Vec<&PairFate> = said
            .iter()
            .filter_map(|output| match output {
                Output::Pair(fate) => Some(fate),
                _ => None,
            })
            .collect();
        assert_eq!(told.len(), 4);
        assert!(told.iter().all(|fate| fate.rejected.is_none()));
        let corrections: Vec<f64> = said
            .iter()
            .filter_map(|output| match output {
                Output::Correction(document) if document.stretch == 2 => Some(document.correction),
                _ => None,
            })
            .collect();
        assert!(matches!(corrections[..], [correction] if (correction + 50.0).abs() < 1.0));
        assert!(
            !said
                .iter()
                .any(|output| matches!(output, Output::Withdrawn { .. }))
        );
    }

    #[test]
    fn with_nothing_since_then_the_correction_is_withdrawn() {
        let mut stage = Stage::new(channel_setup());
        let mut channel = stepped(&mut stage, 0);
        assert!(channel.publishing.correction().is_some());
        let (_, said) = close(&mut channel, &mut stage, 60, Carries::Nothing, "replaced");
        assert!(matches!(
            &said[..],
            [Output::Withdrawn { why, .. }] if why.ends_with("no longer holds: replaced")
        ));
        assert!(channel.publishing.correction().is_none());
        assert_eq!((channel.stretch.number(), channel.stretch.pairs()), (2, 0));
    }

    /// What entered before the end of the stretch is not offered again, nor told again.
    #[test]
    fn older_pairs_stay_behind() {
        let mut stage = Stage::new(channel_setup());
        let mut channel = stepped(&mut stage, 0);
        let carries = Carries::Noise { latest: 10 };
        let (_, said) = close(&mut channel, &mut stage, 50, carries, "cleaned");
        assert_eq!(channel.stretch.pairs(), 10);
        assert_eq!(channel.stretch.fit().window().oldest(), Some(minute_of(50)));
        assert!(!said.iter().any(|output| matches!(output, Output::Pair(_))));
    }

    #[test]
    fn rewound_the_fit_is_as_if_the_rows_had_never_come() {
        let mut setup = channel_setup();
        setup.fit.window = WindowLength::Pairs(128);
        setup.steps = None;
        let mut stage = Stage::new(setup);
        let mut channel = stepped(&mut stage, 30);
        let fresh = stepped(&mut stage, 0);
        channel
            .stretch
            .rewind(minute_of(60), &channel.recent, &stage.setup);
        assert_eq!(channel.stretch.pairs(), 60);
        assert_eq!(channel.stretch.last_pair(), Some(minute_of(59)));
        let expects = |channel: &Channel| {
            let fit = channel.stretch.fit();
            let prediction = fit.predict(minute_of(61), 7.0, [0.0; 2]).expect("rows");
            (prediction.error, prediction.leverage)
        };
        let ((error, leverage), expected) = (expects(&channel), expects(&fresh));
        assert!((error - expected.0).abs() < 1e-12, "{error}");
        assert!((leverage / expected.1 - 1.0).abs() < 1e-12);
        assert_eq!(channel.stretch.residuals(), fresh.stretch.residuals());
    }
}
