//! The limits that a channel's correction itself has: its size and how fast it changes.

use super::Scene;
use super::conditions::{ChannelAlarms, Said, beyond, delays, tell};
use super::judgement::Judgement;
use crate::alarm::Condition;
use crate::event::AlarmKind;
use crate::report::Report;
use crate::setup::ChannelSetup;
use crate::wording::readable;

/// What bounds a channel's correction.
pub(super) struct Bounds {
    /// Its size, in the channel's unit.
    pub(super) size: Option<f64>,
    /// Its change per day.
    pub(super) rate: Option<f64>,
}

impl Bounds {
    /// As configured: a sensor that needs more correction than its maximum permissible error is to
    /// be serviced, unless something else is said.
    pub(super) fn of(setup: &ChannelSetup) -> Self {
        Self {
            size: setup.max_correction.or(setup.max_permissible_error),
            rate: setup.max_correction_rate,
        }
    }
}

impl ChannelAlarms {
    /// Evaluates the limits that the channel's correction itself has. (Where its size has none of
    /// its own, the maximum permissible error bounds it, and that alarm says so already. A channel
    /// that is monitored only has no correction.)
    pub(super) fn judge_correction(
        &mut self,
        judgement: &Judgement,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let setup = scene.setup;
        if setup.monitor_only {
            return;
        }
        let size = setup.max_correction.map(|limit| {
            let deadband = setup.alarms.deadband * judgement.u;
            let said: Wording = correction_size;
            (beyond(judgement.error, limit, deadband), limit, said)
        });
        let rate = setup.max_correction_rate.map(|limit| {
            let deadband = setup.alarms.deadband * judgement.slope_u;
            let said: Wording = correction_rate;
            (beyond(judgement.slope, limit, deadband), limit, said)
        });
        // Of both the one that speaks louder for the alarm.
        let loudness = |condition: Condition| match condition {
            Condition::Holds => 2,
            Condition::Between => 1,
            Condition::Gone => 0,
        };
        let both = [size, rate].into_iter().flatten().rev();
        let louder = both.max_by_key(|(condition, ..)| loudness(*condition));
        if let Some((condition, limit, said)) = louder {
            let said = || said(judgement, limit, &setup.unit);
            let step = self
                .correction_limit
                .evaluate(condition, scene.now, delays(setup));
            tell(AlarmKind::CorrectionLimit, step, said, scene, report);
        }
    }
}

/// What is said of a judgement and a limit in this unit.
type Wording = fn(&Judgement, f64, &str) -> Said;

fn correction_size(judgement: &Judgement, limit: f64, unit: &str) -> Said {
    let correction = readable(0.0 - judgement.error);
    let limit_read = readable(limit);
    Said {
        value: 0.0 - judgement.error,
        limit,
        unit: unit.to_owned(),
        raised: format!(
            "a correction of {correction} {unit} is needed, more than the {limit_read} {unit} \
             that are permitted; the last one permitted is held, then taken back; service the \
             sensor"
        ),
        cleared: format!(
            "the correction of {correction} {unit} is within {limit_read} {unit} again"
        ),
    }
}

fn correction_rate(judgement: &Judgement, limit: f64, unit: &str) -> Said {
    let rate = readable(0.0 - judgement.slope);
    let limit_read = readable(limit);
    Said {
        value: 0.0 - judgement.slope,
        limit,
        unit: format!("{unit}/d"),
        raised: format!(
            "the correction changes by {rate} {unit}/d, faster than the {limit_read} {unit}/d that \
             are permitted; the last one permitted is held, then taken back; look at the sensor"
        ),
        cleared: format!(
            "the correction changes by {rate} {unit}/d, within {limit_read} {unit}/d again"
        ),
    }
}
