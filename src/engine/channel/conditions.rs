//! Last station: the conditions behind a channel's alarms and what the alarms say. The states are
//! moved by `alarm`.

mod health;
mod stepped;
mod wordings;

use super::Scene;
use super::judgement::Judgement;
use crate::alarm::{Alarm, Condition, Delays, Move};
use crate::event::{AlarmChange, AlarmKind, AlarmState, Output, Subject, TimeToLimit};
use crate::report::Report;
use crate::setup::{ChannelId, ChannelSetup};
use crate::standing::AlarmStanding;
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};
use wordings::{data_gap, drift_rate, error_limit, limit_ahead, locked};

/// The alarms of one channel.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct ChannelAlarms {
    error_limit: Alarm,
    drift_rate: Alarm,
    time_to_limit: Alarm,
    data_gap: Alarm,
    step: Alarm,
    screen_locked_out: Alarm,
    stuck: Alarm,
    noise_growth: Alarm,
    pub(super) correction_limit: Alarm,
}

/// What an alarm change says besides its state.
pub(super) struct Said {
    pub(super) value: f64,
    pub(super) limit: f64,
    pub(super) unit: String,
    pub(super) raised: String,
    pub(super) cleared: String,
}

impl ChannelAlarms {
    /// Whether the data-gap alarm is raised.
    pub(crate) fn gap_is_raised(&self) -> bool {
        self.data_gap.is_raised()
    }

    /// Whether an alarm that judgements drive has begun to count towards another state.
    pub(crate) fn are_moving(&self) -> bool {
        self.error_limit.is_moving()
            || self.drift_rate.is_moving()
            || self.correction_limit.is_moving()
    }

    /// Evaluates what follows from a judgement: the error against its limit, the drift rate against
    /// its own.
    pub(crate) fn judge(
        &mut self,
        judgement: &Judgement,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let setup = scene.setup;
        if let Some(limit) = setup.max_permissible_error {
            let condition = beyond(judgement.error, limit, setup.alarms.deadband * judgement.u);
            let said = || error_limit(judgement, limit, setup);
            let step = self
                .error_limit
                .evaluate(condition, scene.now, delays(setup));
            tell(AlarmKind::ErrorLimit, step, said, scene, report);
            self.supersede(scene, report);
        }
        if let Some(limit) = setup.max_drift_rate {
            let deadband = setup.alarms.deadband * judgement.slope_u;
            // The slope is looked at after every pair, so that its own 95 % are left by chance
            // every few weeks. Only a drift that the degree has been raised for is one.
            let significant = judgement.published.degree > 0
                && judgement.slope.abs() > judgement.slope_expanded(setup.coverage);
            let condition = match beyond(judgement.slope, limit, deadband) {
                Condition::Holds if !significant => Condition::Between,
                other => other,
            };
            let said = || drift_rate(judgement, limit, setup);
            let step = self
                .drift_rate
                .evaluate(condition, scene.now, delays(setup));
            tell(AlarmKind::DriftRate, step, said, scene, report);
        }
        self.judge_correction(judgement, scene, report);
    }

    /// One condition, one alarm: what the time-to-limit alarm foretold has come, and the
    /// error-limit alarm speaks from now on.
    fn supersede(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        if self.error_limit.is_raised() {
            self.clear_forecast(TimeToLimit::Reached, scene, report);
        }
    }

    /// The stretch has ended, and with it what its line foretold.
    pub(crate) fn end_forecast(&mut self, scene: &Scene<'_>, report: &mut Report<'_>) {
        self.clear_forecast(TimeToLimit::NoLine, scene, report);
    }

    /// Clears the time-to-limit alarm at once.
    fn clear_forecast(&mut self, why: TimeToLimit, scene: &Scene<'_>, report: &mut Report<'_>) {
        let at_once = Delays { on: 1, off: 1 };
        let step = self
            .time_to_limit
            .evaluate(Condition::Gone, scene.now, at_once);
        let said = || limit_ahead(why, scene);
        tell(AlarmKind::TimeToLimit, step, said, scene, report);
    }

    /// Evaluates a forecast, made when segments closed: whether the error may reach its limit
    /// within the service horizon. `drifts`: whether there is good evidence of a drift at all.
    pub(crate) fn forecast(
        &mut self,
        forecast: TimeToLimit,
        drifts: bool,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        if self.error_limit.is_raised() {
            return;
        }
        let condition = match forecast {
            TimeToLimit::Forecast { earliest, .. } => {
                within_horizon(earliest.since(scene.now), drifts, scene.setup)
            }
            // At the limit, but not yet for long enough: the error-limit alarm is about to speak.
            TimeToLimit::Reached => Condition::Between,
            _ => Condition::Gone,
        };
        let step = self
            .time_to_limit
            .evaluate(condition, scene.now, delays(scene.setup));
        let said = || limit_ahead(forecast, scene);
        tell(AlarmKind::TimeToLimit, step, said, scene, report);
    }

    /// Evaluates whether the screen is locked out, after a pair. Its own count is the delay: raised
    /// at once.
    pub(crate) fn screen(
        &mut self,
        locked_out: bool,
        innovation: f64,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let condition = if locked_out {
            Condition::Holds
        } else {
            Condition::Gone
        };
        let delays = Delays {
            on: 1,
            ..delays(scene.setup)
        };
        let step = self
            .screen_locked_out
            .evaluate(condition, scene.now, delays);
        let said = || locked(innovation, scene);
        tell(AlarmKind::ScreenLockedOut, step, said, scene, report);
    }

    /// Evaluates the silence of the channel as time passes. The timer is the delay: raised at once
    /// when it has run out.
    pub(crate) fn silence(&mut self, silent: Duration, scene: &Scene<'_>, report: &mut Report<'_>) {
        let Some(limit) = scene.setup.alarms.gap_after else {
            return;
        };
        // What repeats itself is kept out, not silent: one fault, one alarm.
        if silent > limit && !self.data_gap.is_raised() && !self.stuck.is_raised() {
            let delays = Delays { on: 1, off: 1 };
            let step = self.data_gap.evaluate(Condition::Holds, scene.now, delays);
            let said = || data_gap(silent, limit);
            tell(AlarmKind::DataGap, step, said, scene, report);
        }
    }

    /// An indication of this phenomenon time was accepted. While a channel catches up with what it
    /// kept during a silence, its newest is as old as the silence was long: that ends no gap.
    pub(crate) fn heard(&mut self, time: Timestamp, scene: &Scene<'_>, report: &mut Report<'_>) {
        if let Some(limit) = scene.setup.alarms.gap_after
            && self.data_gap.is_raised()
        {
            let condition = if scene.alive.since(time) <= limit {
                Condition::Gone
            } else {
                Condition::Between
            };
            let step = self
                .data_gap
                .evaluate(condition, scene.now, delays(scene.setup));
            let said = || data_gap(Duration::ZERO, limit);
            tell(AlarmKind::DataGap, step, said, scene, report);
        }
    }

    /// All alarms with their kinds.
    fn all(&self) -> [(AlarmKind, &Alarm); 9] {
        [
            (AlarmKind::ErrorLimit, &self.error_limit),
            (AlarmKind::DriftRate, &self.drift_rate),
            (AlarmKind::TimeToLimit, &self.time_to_limit),
            (AlarmKind::DataGap, &self.data_gap),
            (AlarmKind::Step, &self.step),
            (AlarmKind::ScreenLockedOut, &self.screen_locked_out),
            (AlarmKind::Stuck, &self.stuck),
            (AlarmKind::NoiseGrowth, &self.noise_growth),
            (AlarmKind::CorrectionLimit, &self.correction_limit),
        ]
    }

    /// The alarms that are not normal.
    pub(crate) fn raised(&self, channel: ChannelId) -> Vec<AlarmStanding> {
        let raised = self
            .all()
            .into_iter()
            .filter(|(_, alarm)| alarm.is_raised());
        raised
            .map(|(kind, alarm)| AlarmStanding {
                subject: Subject::Channel(channel),
                kind,
                state: alarm.state(),
            })
            .collect()
    }

    /// Says that the alarms of a channel that starts anew or is no more are gone.
    pub(crate) fn dismiss(
        &self,
        channel: ChannelId,
        setup: &ChannelSetup,
        now: Timestamp,
        why: &str,
        report: &mut Report<'_>,
    ) {
        for standing in self.raised(channel) {
            report.say(dismissed(channel, standing.kind, setup, now, why));
        }
    }

    /// The sensor was served: what the service explains is cleared, and what lay ahead of the old
    /// stretch. Whether its error is within limits again, pairs must show. The alarms of a sensor
    /// that was `replaced` were about another one; only the channel's silence goes on.
    pub(crate) fn serve(
        &mut self,
        replaced: bool,
        why: &str,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        for standing in self.raised(scene.id) {
            let kinds = [AlarmKind::ScreenLockedOut, AlarmKind::TimeToLimit];
            let explained = kinds.contains(&standing.kind);
            let others = replaced && standing.kind != AlarmKind::DataGap;
            if explained || others {
                report.say(dismissed(
                    scene.id,
                    standing.kind,
                    scene.setup,
                    scene.now,
                    why,
                ));
            }
        }
        self.screen_locked_out = Alarm::default();
        self.time_to_limit = Alarm::default();
        if replaced {
            *self = Self {
                data_gap: std::mem::take(&mut self.data_gap),
                ..Self::default()
            };
        }
    }

    /// Forgets the alarms whose limits the edited setup no longer has, and says so of raised ones.
    pub(crate) fn edit(
        &mut self,
        channel: ChannelId,
        after: &ChannelSetup,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        let unasked = [
            (
                AlarmKind::ErrorLimit,
                &mut self.error_limit,
                after.max_permissible_error.is_none(),
            ),
            (
                AlarmKind::DriftRate,
                &mut self.drift_rate,
                after.max_drift_rate.is_none(),
            ),
            (
                AlarmKind::TimeToLimit,
                &mut self.time_to_limit,
                after.max_permissible_error.is_none(),
            ),
            (
                AlarmKind::DataGap,
                &mut self.data_gap,
                after.alarms.gap_after.is_none(),
            ),
            (AlarmKind::Step, &mut self.step, after.steps.is_none()),
            (
                AlarmKind::ScreenLockedOut,
                &mut self.screen_locked_out,
                !after.screening.enabled,
            ),
            (AlarmKind::Stuck, &mut self.stuck, !after.screening.enabled),
            (
                AlarmKind::CorrectionLimit,
                &mut self.correction_limit,
                after.monitor_only
                    || after.max_correction.is_none() && after.max_correction_rate.is_none(),
            ),
        ];
        for (kind, alarm, _) in unasked.into_iter().filter(|(_, _, unasked)| *unasked) {
            if std::mem::take(alarm).is_raised() {
                let why = "its limit is no longer configured";
                report.say(dismissed(channel, kind, after, now, why));
            }
        }
    }
}

/// An alarm that is cleared by a person's or the node's doing, not by its condition.
fn dismissed(
    channel: ChannelId,
    kind: AlarmKind,
    setup: &ChannelSetup,
    at: Timestamp,
    why: &str,
) -> Output {
    Output::Alarm(AlarmChange {
        subject: Subject::Channel(channel),
        kind,
        state: AlarmState::Normal,
        at,
        since: at,
        value: 0.0,
        limit: 0.0,
        unit: String::new(),
        text: format!("{}: {why}", setup.name),
    })
}

/// On- and off-delay as configured.
pub(super) fn delays(setup: &ChannelSetup) -> Delays {
    let needed = setup.alarms.delay.max(1);
    Delays {
        on: needed,
        off: needed,
    }
}

/// Whether a magnitude is past its limit, or clear of it by the deadband. The deadband is at most
/// half the limit, so that an alarm can clear however uncertain the value is.
pub(super) fn beyond(value: f64, limit: f64, deadband: f64) -> Condition {
    let size = value.abs();
    if size > limit {
        Condition::Holds
    } else if size <= limit - deadband.min(0.5 * limit) {
        Condition::Gone
    } else {
        Condition::Between
    }
}

/// Whether an instant so far ahead is within the service horizon, or clear of it by a quarter.
/// Without good evidence of a drift nothing is raised, but what is raised stays.
fn within_horizon(ahead: Duration, drifts: bool, setup: &ChannelSetup) -> Condition {
    let horizon = setup.service_horizon;
    if ahead <= horizon && drifts {
        Condition::Holds
    } else if ahead.0 <= horizon.0.saturating_add(horizon.0 / 4) {
        Condition::Between
    } else {
        Condition::Gone
    }
}

/// Says that an alarm moved, if it did. `said` is asked for only then: most evaluations move
/// nothing.
pub(super) fn tell(
    kind: AlarmKind,
    step: Option<Move>,
    said: impl FnOnce() -> Said,
    scene: &Scene<'_>,
    report: &mut Report<'_>,
) {
    let Some(step) = step else { return };
    let said = said();
    let text = if step.state == AlarmState::Normal {
        said.cleared
    } else {
        said.raised
    };
    report.say(Output::Alarm(AlarmChange {
        subject: Subject::Channel(scene.id),
        kind,
        state: step.state,
        at: scene.now,
        since: step.since,
        value: said.value + 0.0,
        limit: said.limit,
        unit: said.unit,
        text: format!("{}: {text}", scene.setup.name),
    }));
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    #[test]
    fn the_deadband_keeps_an_alarm_and_never_locks_it() {
        assert_eq!(beyond(-1.1, 1.0, 0.2), Condition::Holds);
        assert_eq!(beyond(0.9, 1.0, 0.2), Condition::Between);
        assert_eq!(beyond(0.8, 1.0, 0.2), Condition::Gone);
        assert_eq!(beyond(0.4, 1.0, 50.0), Condition::Gone);
    }
}
