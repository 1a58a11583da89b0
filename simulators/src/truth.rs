//! What is true about a run: drawn parameters, planted faults, and the alarm that each fault must
//! raise.
//!
//! Only these alarms are expected: error limit, time to limit, drift rate, step, stuck, stale
//! reference, data gap. The rules are derived from the planted error alone, never from what a
//! fit makes of it.

use crate::behaviour::disturbance::{DYING_DAYS, Disturbance};
use crate::behaviour::{Behaviour, Drawn, Planted, curve::Curve};
use crate::message::time_text;
use crate::plant::{Plant, instant};
use crate::scenario::Kit;
use holdtrue_engine::time::Timestamp;
use serde::{Serialize, Serializer};

/// Hours without an indication after which a sensor counts as silent.
pub const GAP_AFTER_HOURS: f64 = 3.0;
/// Hours without a value after which a reference counts as stale.
pub const STALE_AFTER_HOURS: f64 = 8.0;

/// A drift whose rate is watched must be noticed by the time it has grown to so many standard
/// deviations of the noise.
const DRIFT_PLAIN: f64 = 8.0;

/// How far ahead of its limit an error may raise the time-to-limit alarm: twice the service horizon
/// of 14 days, since the band of an honest forecast gets there before the error does.
const FORETOLD_DAYS: f64 = 28.0;
/// An even drift that takes so many windows from its onset to its limit must be foretold.
const FORETELLING_WINDOWS: f64 = 1.5;

/// What can be asked of a correction for this sensor.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Expectation {
    /// It drifts in a way that pairs with a reference show: the true RMS error must at least halve.
    Halve,
    /// Nothing that a polynomial in time could remove: the true RMS error must not grow by more
    /// than 0.05σ.
    LeaveAlone,
    /// Broken: only the alarm matters.
    AlarmOnly,
}

/// Whose alarm.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Subject {
    /// The channel's.
    Channel,
    /// Its reference's.
    Reference,
}

/// An alarm that a planted fault must raise.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ExpectedAlarm {
    /// Position of the sensor in the scenario.
    #[serde(skip)]
    pub sensor: usize,
    /// Whose alarm.
    pub subject: Subject,
    /// The name of the channel or reference.
    pub name: String,
    /// The alarm's kind, as in its topic.
    pub kind: &'static str,
    /// When the fault happens; detection delays count from here.
    #[serde(serialize_with = "as_text")]
    pub planted_at: Timestamp,
    /// An alarm before this instant is a false one.
    #[serde(serialize_with = "as_text")]
    pub earliest: Timestamp,
    /// It must have been raised by then.
    #[serde(serialize_with = "as_text")]
    pub due: Timestamp,
    /// An alarm raised after this instant has another cause; `None`: the fault lasts.
    #[serde(serialize_with = "as_text_or_null")]
    pub ends: Option<Timestamp>,
    /// False if the run ends before it is due.
    pub required: bool,
}

/// The truth about one sensor.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SensorTruth {
    /// Its channel.
    pub channel: &'static str,
    /// Its unit.
    pub unit: &'static str,
    /// Standard deviation of its noise.
    pub noise: f64,
    /// What it does.
    pub behaviour: &'static str,
    /// What a correction can do for it.
    pub expectation: Expectation,
    /// The drawn parameters.
    pub drawn: Vec<Drawn>,
    /// The alarms that it must raise.
    pub alarms: Vec<ExpectedAlarm>,
}

/// The truth about a run, as written beside its readings.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Truth {
    /// The scenario.
    pub scenario: &'static str,
    /// The seed.
    pub seed: u64,
    /// The run's length.
    pub days: f64,
    /// Its beginning.
    #[serde(serialize_with = "as_text")]
    pub start: Timestamp,
    /// Sensor by sensor.
    pub sensors: Vec<SensorTruth>,
}

impl Truth {
    /// The truth about `plant`, as far as `end` days from its start.
    #[must_use]
    pub fn of(plant: &Plant, end: f64) -> Self {
        let sensors = plant
            .scenario
            .kits
            .iter()
            .zip(&plant.planted)
            .enumerate()
            .map(|(index, (kit, planted))| SensorTruth {
                channel: kit.instrument.name,
                unit: kit.instrument.unit,
                noise: kit.instrument.noise,
                behaviour: kit.behaviour.name(),
                expectation: expectation(&kit.behaviour),
                drawn: planted.drawn.clone(),
                alarms: alarms(index, kit, planted, end),
            })
            .collect();
        Self {
            scenario: plant.scenario.name,
            seed: plant.seed,
            days: end,
            start: instant(0.0),
            sensors,
        }
    }
}

/// What a correction can do for a sensor that behaves so.
fn expectation(behaviour: &Behaviour) -> Expectation {
    match behaviour {
        Behaviour::Linear { .. }
        | Behaviour::Exponential { .. }
        | Behaviour::Quadratic { .. }
        | Behaviour::SawTooth { .. }
        | Behaviour::Step { .. } => Expectation::Halve,
        Behaviour::Steady
        | Behaviour::Spikes { .. }
        | Behaviour::DailyCycle { .. }
        | Behaviour::ReferenceDying { .. }
        | Behaviour::DataGap { .. } => Expectation::LeaveAlone,
        Behaviour::Stuck { .. } => Expectation::AlarmOnly,
    }
}

/// Collects the alarms of one sensor, times in days from the start.
struct Expected<'a> {
    sensor: usize,
    kit: &'a Kit,
    end: f64,
    alarms: Vec<ExpectedAlarm>,
}

impl Expected<'_> {
    /// Adds one, if it is planted within the run.
    fn add(&mut self, subject: Subject, kind: &'static str, at: f64, window: (f64, f64, f64)) {
        let (earliest, due, ends) = window;
        if earliest >= self.end {
            return;
        }
        self.alarms.push(ExpectedAlarm {
            sensor: self.sensor,
            subject,
            name: match subject {
                Subject::Channel => self.kit.instrument.name.to_owned(),
                Subject::Reference => self.kit.instrument.reference(),
            },
            kind,
            planted_at: instant(at),
            earliest: instant(earliest),
            due: instant(due),
            ends: (ends < f64::MAX).then(|| instant(ends)),
            required: due < self.end,
        });
    }
}

/// The alarms that one sensor must raise.
fn alarms(sensor: usize, kit: &Kit, planted: &Planted, end: f64) -> Vec<ExpectedAlarm> {
    let mut expected = Expected {
        sensor,
        kit,
        end,
        alarms: Vec::new(),
    };
    limit_alarms(&mut expected, &planted.curve);
    foretelling_alarms(&mut expected, &planted.curve);
    for jump in planted.curve.jumps(end) {
        // A step told later than two days after it is about something else.
        let window = (jump, jump + 1.0, jump + 2.0);
        expected.add(Subject::Channel, "step", jump, window);
    }
    match planted.disturbance {
        // Within two days the true value has moved far enough away for long enough.
        Disturbance::Stuck { at } => {
            expected.add(Subject::Channel, "stuck", at, (at, at + 2.0, f64::MAX));
        }
        Disturbance::ReferenceDying { at } => {
            let due = at + (STALE_AFTER_HOURS + 2.0) / 24.0;
            let window = (at - DYING_DAYS, due, f64::MAX);
            expected.add(Subject::Reference, "reference-stale", at, window);
        }
        Disturbance::DataGap { from, to } => {
            let due = from + (GAP_AFTER_HOURS + 2.0) / 24.0;
            expected.add(Subject::Channel, "data-gap", from, (from, due, to));
        }
        Disturbance::None | Disturbance::Spikes { .. } => {}
    }
    expected.alarms
}

/// Alarms on the error and on its rate.
fn limit_alarms(expected: &mut Expected, curve: &Curve) {
    let limit = expected.kit.instrument.max_permissible_error;
    let passed = |share: f64| first_passing(curve, share * limit, expected.end);
    if let Some(at) = passed(1.0) {
        // Between 0.9 and 1.1 of the limit an honest estimate may fall on either side.
        let earliest = passed(0.9).unwrap_or(at);
        let due = passed(1.1).map_or(f64::MAX, |sure| sure + 1.0);
        expected.add(
            Subject::Channel,
            "error-limit",
            at,
            (earliest, due, f64::MAX),
        );
    }
    if let Curve::Linear { onset, rate } = *curve
        && expected.kit.rate_watched
    {
        // By then the drift stands far out of the noise, whatever the length of the run.
        let due = onset + DRIFT_PLAIN * expected.kit.instrument.noise / rate.abs();
        expected.add(
            Subject::Channel,
            "drift-rate",
            onset,
            (onset, due, f64::MAX),
        );
    }
}

/// When a drift begins.
fn onset(curve: &Curve) -> f64 {
    match *curve {
        Curve::Linear { onset, .. }
        | Curve::Exponential { onset, .. }
        | Curve::Quadratic { onset, .. } => onset,
        _ => 0.0,
    }
}

/// Alarms that foretell the limit. One is right where the error, left alone, would pass the limit
/// soon; delays from the passing are negative and say by how much it came ahead.
fn foretelling_alarms(expected: &mut Expected, curve: &Curve) {
    let (instrument, end) = (expected.kit.instrument, expected.end);
    let (limit, window) = (instrument.max_permissible_error, instrument.window_days);
    let mut foretell = |passing: f64, onset: f64, due: f64, ends: f64| {
        let earliest = onset.max(passing - FORETOLD_DAYS);
        let instants = (earliest, due, ends);
        expected.add(Subject::Channel, "time-to-limit", passing, instants);
    };
    match *curve {
        Curve::SawTooth { period, height } => {
            let run_up = period * limit / height.abs();
            let mut cleaned = 0.0;
            // Each ramp would go on if nobody cleaned; what the window still holds of it may be
            // said until that has left.
            while run_up - period <= 2.0 * window && cleaned < end {
                let ends = cleaned + period + window;
                foretell(cleaned + run_up, cleaned, f64::MAX, ends);
                cleaned += period;
            }
        }
        Curve::Linear { .. }
        | Curve::Exponential { .. }
        | Curve::Quadratic { .. }
        | Curve::Growth { .. } => {
            let onset = onset(curve);
            let passed = |share: f64| first_passing(curve, share * limit, end + FORETOLD_DAYS);
            let Some(passing) = passed(1.0) else { return };
            let even = matches!(curve, Curve::Linear { .. });
            let slow = passing - onset >= FORETELLING_WINDOWS * window;
            let due = if even && slow { passing } else { f64::MAX };
            let ends = passed(1.1).map_or(f64::MAX, |sure| sure + 1.0);
            foretell(passing, onset, due, ends);
        }
        Curve::None | Curve::Step { .. } | Curve::DailyCycle { .. } => {}
    }
}

/// The first instant, to the minute, at which the size of the error reaches `limit`.
fn first_passing(curve: &Curve, limit: f64, end: f64) -> Option<f64> {
    let minutes = libm::floor(end * 1440.0);
    let mut minute = 0.0;
    while minute <= minutes {
        let day = minute / 1440.0;
        if curve.error(day).abs() >= limit {
            return Some(day);
        }
        minute += 1.0;
    }
    None
}

/// A timestamp as RFC 3339 text.
#[allow(
    clippy::trivially_copy_pass_by_ref,
    reason = "the signature that serde asks for"
)]
fn as_text<S: Serializer>(at: &Timestamp, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.serialize_str(&time_text(*at))
}

/// The same, or null.
#[allow(clippy::ref_option, reason = "the signature that serde asks for")]
fn as_text_or_null<S: Serializer>(
    at: &Option<Timestamp>,
    serializer: S,
) -> Result<S::Ok, S::Error> {
    match at {
        Some(at) => as_text(at, serializer),
        None => serializer.serialize_none(),
    }
}
