//! What a channel does when its reference comes under suspicion: what it learned from it since then
//! is taken back, as if it had never come.

use super::{Channel, Scene, telling};
use crate::report::Report;
use crate::time::Timestamp;

impl Channel {
    /// Its reference is under suspicion since this instant, because of a common shift of this size
    /// beyond this limit: what came from it since then counts for nothing, and the correction is
    /// held.
    pub(crate) fn distrust(
        &mut self,
        since: Timestamp,
        shift: (f64, f64),
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let since = since.plus(scene.setup.lag);
        if self.stretch.last_pair() >= Some(since) {
            self.stretch.rewind(since, &self.recent, scene.setup);
        }
        // What no fit may learn from is not remembered either: a stretch that ends later must not
        // take it up again.
        let struck = self.recent.take_since(since);
        if !struck.is_empty() {
            self.stretch.forget_latest(&struck);
            self.breaks.forget_latest(struck.len());
            for held in &struck {
                self.struck.note(held.pair.time);
            }
            for held in struck.iter().filter(|held| held.rejected.is_none()) {
                telling::tell_struck(&held.pair, shift, scene, report);
            }
            self.renew(scene, report);
        }
        self.heed_reference(scene, report);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::channel::Pair;
    use crate::channel::closing::Closing;
    use crate::channel::stretch::Carries;
    use crate::channel::testing::{Stage, channel_setup};
    use crate::event::{Output, RefusedReason};
    use crate::setup::{ChannelSetup, WindowLength};
    use crate::time::Duration;

    /// Windows of 128 pairs in segments of two, in pairs and in time.
    fn setups() -> [ChannelSetup; 2] {
        let minutes = Duration::from_seconds(60 * 128);
        [WindowLength::Pairs(128), WindowLength::Time(minutes)].map(|window| {
            let mut setup = channel_setup();
            setup.fit.window = window;
            setup
        })
    }

    fn minute_of(minute: i64) -> Timestamp {
        Timestamp(0).plus(Duration::from_seconds(60 * minute))
    }

    /// Noise of about ±1 without a generator, about `level`.
    fn pair(minute: i64, level: f64) -> Pair {
        let noise = (minute as f64 * 0.618_033_988_749_895).fract() - 0.5;
        Pair::at(minute_of(minute), 7.0 + level + 2.0 * noise, 7.0)
    }

    fn take(
        channel: &mut Channel,
        stage: &mut Stage,
        minutes: std::ops::Range<i64>,
        level: f64,
    ) -> Vec<Output> {
        minutes
            .flat_map(|minute| {
                stage.act(minute_of(minute), |scene, report| {
                    channel.take_pair(&pair(minute, level), scene, report);
                })
            })
            .collect()
    }

    fn distrust(channel: &mut Channel, stage: &mut Stage, since: i64, now: i64) -> Vec<Output> {
        stage.act(minute_of(now), |scene, report| {
            channel.distrust(minute_of(since), (1.5, 0.5), scene, report);
        })
    }

    /// The pairs told as struck.
    fn struck(said: &[Output]) -> Vec<Timestamp> {
        said.iter()
            .filter_map(|output| match output {
                Output::Pair(fate) => {
                    let rejection = fate.rejected.expect("nothing enters by a suspicion");
                    assert_eq!(rejection.reason, RefusedReason::ReferenceDoubted);
                    assert_eq!((rejection.value, rejection.threshold), (1.5, 0.5));
                    Some(fate.phenomenon)
                }
                _ => None,
            })
            .collect()
    }

    /// What both expect at an instant, to rounding: a window taken back is built in another order.
    fn assert_alike(channel: &Channel, innocent: &Channel, minute: i64) {
        assert_eq!(channel.stretch.number(), innocent.stretch.number());
        assert_eq!(channel.stretch.pairs(), innocent.stretch.pairs());
        assert_eq!(channel.stretch.residuals(), innocent.stretch.residuals());
        assert_eq!(channel.recent, innocent.recent);
        let expects = |channel: &Channel| {
            let fit = channel.stretch.fit();
            let expected = fit.predict(minute_of(minute), 7.0, [0.0; 2]);
            expected.map(|it| (it.error, it.leverage))
        };
        let (found, expected) = (expects(channel), expects(innocent));
        let ((error, leverage), (its_error, its_leverage)) = found.zip(expected).expect("rows");
        assert!((error - its_error).abs() < 1e-9, "{error} {its_error}");
        assert!((leverage / its_leverage - 1.0).abs() < 1e-9);
    }

    /// Suspected twice, with good pairs between. The bad ones are small enough to pass the gate.
    #[test]
    fn suspected_twice_it_is_as_if_the_bad_pairs_had_never_come() {
        for setup in setups() {
            let mut stage = Stage::new(setup);
            let (mut channel, mut innocent) =
                (Channel::new(&stage.setup, 0), Channel::new(&stage.setup, 0));
            take(&mut channel, &mut stage, 0..61, 0.0);
            take(&mut innocent, &mut stage, 0..61, 0.0);
            take(&mut channel, &mut stage, 61..64, 1.5);
            let said = distrust(&mut channel, &mut stage, 61, 64);
            assert_eq!(struck(&said), [61, 62, 63].map(minute_of));
            assert_alike(&channel, &innocent, 65);

            take(&mut channel, &mut stage, 64..95, 0.0);
            take(&mut innocent, &mut stage, 64..95, 0.0);
            take(&mut channel, &mut stage, 95..98, 1.5);
            let said = distrust(&mut channel, &mut stage, 95, 98);
            assert_eq!(struck(&said), [95, 96, 97].map(minute_of));
            assert_alike(&channel, &innocent, 99);
        }
    }

    /// The stretch that a service told late begins takes up what came since, but not what was
    /// struck meanwhile.
    #[test]
    fn a_stretch_that_ends_later_does_not_take_struck_pairs_up() {
        for setup in setups() {
            let mut stage = Stage::new(setup);
            let mut channel = Channel::new(&stage.setup, 0);
            take(&mut channel, &mut stage, 0..70, 0.0);
            take(&mut channel, &mut stage, 70..74, 1.5);
            distrust(&mut channel, &mut stage, 70, 74);
            take(&mut channel, &mut stage, 74..80, 0.0);
            let said = stage.act(minute_of(80), |scene, report| {
                let closing = Closing {
                    at: minute_of(60),
                    from: minute_of(60),
                    carries: Carries::Noise { latest: 16 },
                    opening: &[],
                    why: "cleaned",
                };
                channel.close_stretch(&closing, scene, report);
            });
            assert_eq!((channel.stretch.number(), channel.stretch.pairs()), (2, 16));
            assert_eq!(struck(&said), []);
        }
    }

    /// Bad pairs that lock the screen out, or nearly, leave nothing of it behind: neither a step of
    /// the sensor is made of them, nor do the good ones after them find the screen open.
    #[test]
    fn bad_pairs_far_off_leave_no_step_and_no_lock_out() {
        for (bad, steps) in [(4, Some(4.0)), (6, None)] {
            let mut setup = channel_setup();
            setup.steps = steps;
            let mut stage = Stage::new(setup);
            let mut channel = Channel::new(&stage.setup, 0);
            take(&mut channel, &mut stage, 0..60, 0.0);
            take(&mut channel, &mut stage, 60..60 + bad, 50.0);
            assert_eq!(channel.stretch.is_locked_out(), bad > 5);
            let now = 60 + bad;
            distrust(&mut channel, &mut stage, 60, now);
            assert!(!channel.stretch.is_locked_out());
            let said = take(&mut channel, &mut stage, now..now + 1, 50.0);
            let is_kept_out =
                |it: &Output| matches!(it, Output::Pair(fate) if fate.rejected.is_some());
            assert!(said.iter().any(is_kept_out), "{said:?}");
            let said = take(&mut channel, &mut stage, now + 1..now + 40, 0.0);
            assert!(!said.iter().any(is_kept_out));
            assert!(!said.iter().any(|it| matches!(it, Output::Step(_))));
        }
    }
}
