//! What was seen against what is true: the errors before and after correction, the alarms against
//! the planted faults.

use super::heard::{Alarm, Correction, Heard};
use holdtrue_engine::time::Timestamp;
use holdtrue_simulators::plant::Plant;
use holdtrue_simulators::truth::{Expectation, ExpectedAlarm, SensorTruth, Subject, Truth};
use serde::Serialize;

/// A correctable error must shrink to this part.
const HALF: f64 = 0.5;
/// What must be left alone may grow by this part of its noise.
const WORSENED_MAX: f64 = 0.05;

/// The result of a demo.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Score {
    /// The seed.
    pub seed: u64,
    /// How many days were judged.
    pub days: f64,
    /// Channel by channel.
    pub channels: Vec<ChannelScore>,
    /// What is not as it should be, in sentences; empty: all is well.
    pub failures: Vec<String>,
}

/// The result for one channel.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ChannelScore {
    /// Its name.
    pub channel: String,
    /// The unit of all its values.
    pub unit: String,
    /// What was planted.
    pub behaviour: &'static str,
    /// What was to be done about it.
    pub expectation: Expectation,
    /// Root mean square of indication − true value, noise included.
    pub rms_before: f64,
    /// The same of indication + correction in force − true value.
    pub rms_after: f64,
    /// Correction documents seen.
    pub corrections: usize,
    /// The last document's degree.
    pub degree: Option<u8>,
    /// Its expanded uncertainty.
    pub expanded_uncertainty: Option<f64>,
    /// Its zone.
    pub zone: Option<String>,
    /// The planted faults and what was heard of them.
    pub alarms: Vec<AlarmScore>,
}

/// A planted fault and its alarm.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct AlarmScore {
    /// What must be raised.
    #[serde(flatten)]
    pub expected: ExpectedAlarm,
    /// Hours from the fault to its alarm; `None`: never raised.
    pub delay_hours: Option<f64>,
}

impl Score {
    /// Whether everything is as it should be.
    #[must_use]
    pub fn is_good(&self) -> bool {
        self.failures.is_empty()
    }

    /// Judges what was `heard` against a run of `plant` up to `end`.
    #[must_use]
    pub fn new(plant: Plant, truth: &Truth, heard: &Heard, end: Timestamp) -> Self {
        let errors = errors(plant, truth, heard, end);
        let mut failures = Vec::new();
        let channels = truth
            .sensors
            .iter()
            .zip(errors)
            .map(|(sensor, errors)| channel(sensor, errors, heard, &mut failures))
            .collect();
        failures.extend(unexpected(truth, heard));
        failures.extend(heard.contradictions.iter().cloned());
        Self {
            seed: truth.seed,
            days: truth.days,
            channels,
            failures,
        }
    }
}

/// Sums of squared errors of one channel.
#[derive(Clone, Copy, Debug, Default)]
struct Errors {
    count: f64,
    before: f64,
    after: f64,
}

/// Goes through the truth with the corrections as they were in force at each instant.
fn errors(plant: Plant, truth: &Truth, heard: &Heard, end: Timestamp) -> Vec<Errors> {
    let none = Vec::new();
    let mut documents: Vec<InForce> = truth
        .sensors
        .iter()
        .map(|sensor| InForce {
            documents: heard.corrections.get(sensor.channel).unwrap_or(&none),
            next: 0,
        })
        .collect();
    let mut sums = vec![Errors::default(); truth.sensors.len()];
    let indications = plant
        .take_while(|sample| sample.at < end)
        .filter(|s| !s.is_reference);
    for sample in indications {
        let error = sample.true_error();
        let correction = documents[sample.sensor]
            .at(sample.at)
            .map_or(0.0, |document| document.of(sample.value, sample.at));
        let sums = &mut sums[sample.sensor];
        sums.count += 1.0;
        sums.before += error * error;
        sums.after += (error + correction) * (error + correction);
    }
    sums
}

/// The documents of one channel, walked through in time.
struct InForce<'a> {
    documents: &'a [Correction],
    next: usize,
}

impl InForce<'_> {
    /// The latest document issued by `at`, if it holds then; `at` must not go back.
    fn at(&mut self, at: Timestamp) -> Option<&Correction> {
        while self
            .documents
            .get(self.next)
            .is_some_and(|document| document.issued <= at)
        {
            self.next += 1;
        }
        let latest = self.documents.get(self.next.checked_sub(1)?)?;
        latest.holds(at).then_some(latest)
    }
}

/// The result for one channel; adds what is not as it should be.
fn channel(
    sensor: &SensorTruth,
    errors: Errors,
    heard: &Heard,
    failures: &mut Vec<String>,
) -> ChannelScore {
    let rms = |sum: f64| {
        if errors.count > 0.0 {
            (sum / errors.count).sqrt()
        } else {
            0.0
        }
    };
    let (before, after) = (rms(errors.before), rms(errors.after));
    let (name, unit) = (sensor.channel, sensor.unit);
    // Asked this way round so that what is no number fails as well.
    let halved = after <= HALF * before;
    let left_alone = after - before <= WORSENED_MAX * sensor.noise;
    match sensor.expectation {
        Expectation::Halve if !halved => failures.push(format!(
            "{name}: the true RMS error went from {before:.4} to {after:.4} {unit}, not to half"
        )),
        Expectation::LeaveAlone if !left_alone => {
            failures.push(format!(
                "{name}: the true RMS error went from {before:.4} to {after:.4} {unit}, \
                 worse by more than {WORSENED_MAX} of its noise of {} {unit}",
                sensor.noise
            ));
        }
        _ => {}
    }
    let alarms: Vec<AlarmScore> = sensor
        .alarms
        .iter()
        .map(|expected| alarm(expected, heard))
        .collect();
    for missed in alarms
        .iter()
        .filter(|it| it.expected.required && it.delay_hours.is_none())
    {
        let ExpectedAlarm { name, kind, .. } = &missed.expected;
        failures.push(format!("{name}: {kind} was not raised in time"));
    }
    let documents = heard
        .corrections
        .get(sensor.channel)
        .map_or(&[][..], Vec::as_slice);
    let last = documents.last();
    ChannelScore {
        channel: name.to_owned(),
        unit: unit.to_owned(),
        behaviour: sensor.behaviour,
        expectation: sensor.expectation,
        rms_before: before,
        rms_after: after,
        corrections: documents.len(),
        degree: last.map(|document| document.degree),
        expanded_uncertainty: last.map(|document| document.expanded_uncertainty),
        zone: last.and_then(|document| document.zone.clone()),
        alarms,
    }
}

/// Whether the alarm of a planted fault was raised in time.
fn alarm(expected: &ExpectedAlarm, heard: &Heard) -> AlarmScore {
    let raised = heard
        .alarms
        .iter()
        .filter(|alarm| is_of(alarm, expected) && alarm.is_raised())
        .filter(|alarm| expected.ends.is_none_or(|ends| alarm.at <= ends))
        .find(|alarm| alarm.at >= expected.earliest && alarm.at <= expected.due);
    AlarmScore {
        expected: expected.clone(),
        delay_hours: raised.map(|alarm| alarm.at.since(expected.planted_at).seconds() / 3600.0),
    }
}

/// Whether a document is about this alarm.
fn is_of(alarm: &Alarm, expected: &ExpectedAlarm) -> bool {
    let subject = match expected.subject {
        Subject::Channel => "channel",
        Subject::Reference => "reference",
    };
    alarm.subject == subject && alarm.name == expected.name && alarm.kind == expected.kind
}

/// Alarms that no planted fault explains.
fn unexpected(truth: &Truth, heard: &Heard) -> Vec<String> {
    let expected: Vec<&ExpectedAlarm> = truth
        .sensors
        .iter()
        .flat_map(|sensor| &sensor.alarms)
        .collect();
    heard
        .alarms
        .iter()
        .filter(|alarm| alarm.is_raised())
        .filter(|alarm| {
            !expected.iter().any(|expected| {
                is_of(alarm, expected)
                    && alarm.at >= expected.earliest
                    && expected.ends.is_none_or(|ends| alarm.at <= ends)
            })
        })
        .map(|alarm| {
            let Alarm {
                name,
                kind,
                at,
                text,
                ..
            } = alarm;
            let at = holdtrue_simulators::message::time_text(*at);
            format!("{name}: {kind} at {at} without a planted fault ({text})")
        })
        .collect()
}
