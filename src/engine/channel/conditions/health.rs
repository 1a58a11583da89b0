//! The alarms of a sensor that is broken rather than drifting: stuck, and grown noise.

use super::super::Scene;
use super::super::checks::{Precision, Stuck};
use super::{ChannelAlarms, Said, delays, tell};
use crate::alarm::{Condition, Delays};
use crate::event::AlarmKind;
use crate::report::Report;
use crate::wording::readable;

impl ChannelAlarms {
    /// Evaluates whether the sensor is stuck, after an indication or a pair. The count of repeats
    /// is the delay: raised at once.
    pub(crate) fn stuck(
        &mut self,
        stuck: Option<Stuck>,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let delays = Delays {
            on: 1,
            ..delays(scene.setup)
        };
        let condition = condition(stuck.is_some());
        let step = self.stuck.evaluate(condition, scene.now, delays);
        let said = || stuck_said(stuck, scene);
        tell(AlarmKind::Stuck, step, said, scene, report);
    }

    /// Evaluates the precision, after a pair. The chart is the delay.
    pub(crate) fn precision(
        &mut self,
        chart: &Precision,
        scene: &Scene<'_>,
        report: &mut Report<'_>,
    ) {
        let delays = Delays { on: 1, off: 1 };
        let condition = condition(chart.has_grown());
        let step = self.noise_growth.evaluate(condition, scene.now, delays);
        let said = || noise_said(chart, scene);
        tell(AlarmKind::NoiseGrowth, step, said, scene, report);
    }
}

fn condition(holds: bool) -> Condition {
    if holds {
        Condition::Holds
    } else {
        Condition::Gone
    }
}

fn stuck_said(stuck: Option<Stuck>, scene: &Scene<'_>) -> Said {
    let unit = &scene.setup.unit;
    let (value, limit, told_in, raised) = match stuck {
        Some(Stuck::Repeats {
            value,
            times,
            limit,
        }) => (
            f64::from(times),
            f64::from(limit),
            "1".to_owned(),
            format!(
                "has shown {} {unit} {times} times in a row, which its noise and resolution make \
                 impossible; it is not believed until it moves: look at the sensor",
                readable(value)
            ),
        ),
        Some(Stuck::Unmoved {
            value,
            reference_moved,
            limit,
        }) => (
            reference_moved,
            limit,
            unit.clone(),
            format!(
                "still shows {} {unit} while reference {} moved by {} {unit}; it is not believed \
                 until it moves: look at the sensor",
                readable(value),
                scene.reference.name,
                readable(reference_moved)
            ),
        ),
        None => (0.0, 0.0, unit.clone(), String::new()),
    };
    Said {
        value,
        limit,
        unit: told_in,
        raised,
        cleared: "the sensor moves again".to_owned(),
    }
}

fn noise_said(chart: &Precision, scene: &Scene<'_>) -> Said {
    let unit = &scene.setup.unit;
    let (usual, recent) = (readable(chart.usual_sd()), readable(chart.recent_sd()));
    Said {
        value: chart.recent_sd(),
        limit: chart.usual_sd(),
        unit: unit.clone(),
        raised: format!(
            "its noise has grown from {usual} {unit} to about {recent} {unit}, the mean apart; \
             look for a loose contact, bubbles, interference, or an ageing sensor"
        ),
        cleared: format!("its noise is back at about {recent} {unit}"),
    }
}
