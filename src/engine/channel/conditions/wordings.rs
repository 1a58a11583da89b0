//! What the alarms that follow from judgements say.

use super::super::Scene;
use super::super::judgement::Judgement;
use super::Said;
use crate::event::TimeToLimit;
use crate::setup::ChannelSetup;
use crate::time::{Duration, Timestamp};
use crate::wording::readable;

pub(super) fn error_limit(judgement: &Judgement, limit: f64, setup: &ChannelSetup) -> Said {
    let unit = &setup.unit;
    let error = readable(judgement.error);
    let expanded = readable(judgement.k * judgement.u);
    let limit_read = readable(limit);
    Said {
        value: judgement.error,
        limit,
        unit: unit.clone(),
        raised: format!(
            "the error of {error} {unit} (±{expanded} {unit}) exceeds the maximum permissible \
             error of {limit_read} {unit}; service or recalibrate the sensor"
        ),
        cleared: format!(
            "the error of {error} {unit} (±{expanded} {unit}) is within the maximum \
             permissible error of {limit_read} {unit} again"
        ),
    }
}

pub(super) fn drift_rate(judgement: &Judgement, limit: f64, setup: &ChannelSetup) -> Said {
    let unit = format!("{}/d", setup.unit);
    let slope = readable(judgement.slope);
    let slope_u = readable(judgement.slope_expanded(setup.coverage));
    let limit_read = readable(limit);
    Said {
        value: judgement.slope,
        limit,
        raised: format!(
            "drifts by {slope} {unit} (±{slope_u} {unit}), faster than {limit_read} {unit}; find \
             the cause: fouling, ageing or a failing reference"
        ),
        cleared: format!("drifts by {slope} {unit}, within {limit_read} {unit} again"),
        unit,
    }
}

pub(super) fn limit_ahead(forecast: TimeToLimit, scene: &Scene<'_>) -> Said {
    let setup = scene.setup;
    let unit = &setup.unit;
    let limit = readable(setup.max_permissible_error.unwrap_or(0.0));
    let horizon = setup.service_horizon.days();
    let (value, raised) = match forecast {
        TimeToLimit::Forecast {
            earliest,
            central,
            latest,
            ..
        } => {
            let when = |instant: Option<Timestamp>| {
                instant.map_or("beyond the horizon".to_owned(), |it| {
                    it.up_to_second().to_string()
                })
            };
            let text = format!(
                "the error reaches the maximum permissible error of {limit} {unit} at the earliest \
                 {} (most likely {}, at the latest {}); plan service \
                 before the earliest",
                earliest.up_to_second(),
                when(central),
                when(latest)
            );
            (earliest.since(scene.now).days(), text)
        }
        _ => (0.0, String::new()),
    };
    let cleared = match forecast {
        TimeToLimit::Reached => {
            format!("the limit of {limit} {unit} is reached: see the error-limit alarm")
        }
        TimeToLimit::NoLine => "its history begins anew, nothing can be forecast yet".to_owned(),
        _ => format!(
            "no longer expected to reach {limit} {unit} within {} d",
            readable(horizon)
        ),
    };
    Said {
        value,
        limit: horizon,
        unit: "d".to_owned(),
        raised,
        cleared,
    }
}

pub(super) fn locked(innovation: f64, scene: &Scene<'_>) -> Said {
    let unit = &scene.setup.unit;
    let count = scene.setup.screening.lock_out_after;
    let read = readable(innovation);
    Said {
        value: innovation,
        limit: f64::from(count),
        unit: unit.clone(),
        raised: format!(
            "{count} pairs in a row lay off the fit to one side, the last by {read} {unit}: a \
             step of the sensor or a wrong value of reference {}; the fit follows it, check both",
            scene.reference.name
        ),
        cleared: "pairs fit again".to_owned(),
    }
}

pub(super) fn data_gap(silent: Duration, limit: Duration) -> Said {
    let hours = |duration: Duration| duration.seconds() / 3600.0;
    Said {
        value: hours(silent),
        limit: hours(limit),
        unit: "h".to_owned(),
        raised: format!(
            "no indication for {} h (limit {} h) while others report; look at the sensor, \
             its power and its link",
            readable(hours(silent)),
            readable(hours(limit))
        ),
        cleared: "indications arrive again".to_owned(),
    }
}
