//! A whole scenario at work: the samples of all its sensors in order of time.

use crate::behaviour::Planted;
use crate::scenario::Scenario;
use crate::sensor::{START, Sample, Sensor};
use holdtrue_engine::time::{Duration, Timestamp};

/// A scenario with everything drawn. Iterating gives samples in order of time; at one instant in
/// the order of sensors, indication before reference.
#[derive(Clone, Debug)]
pub struct Plant {
    /// The scenario.
    pub scenario: Scenario,
    /// The seed.
    pub seed: u64,
    /// Days that the run is laid out for; parts of the run count from these.
    pub days: f64,
    /// What was drawn, sensor by sensor.
    pub planted: Vec<Planted>,
    sensors: Vec<Sensor>,
    end: Option<Timestamp>,
}

impl Plant {
    /// The scenario's run of `days` days.
    #[must_use]
    pub fn new(scenario: Scenario, seed: u64, days: f64) -> Self {
        let planted: Vec<Planted> = scenario
            .kits
            .iter()
            .map(|kit| {
                kit.behaviour
                    .draw(&kit.instrument, kit.position, seed, days)
            })
            .collect();
        let sensors = scenario
            .kits
            .iter()
            .zip(&planted)
            .enumerate()
            .map(|(index, (kit, planted))| Sensor::new(index, kit, planted, seed))
            .collect();
        let end = Some(instant(days));
        Self {
            scenario,
            seed,
            days,
            planted,
            sensors,
            end,
        }
    }

    /// The same run, going on after its last day for ever.
    #[must_use]
    pub fn endless(mut self) -> Self {
        self.end = None;
        self
    }

    /// How many samples the run has at most; for progress.
    #[must_use]
    pub fn expected_samples(&self) -> u64 {
        let per_day = |seconds: i64| self.days * 86_400.0 / seconds as f64;
        let indications = per_day(crate::instrument::CADENCE_SECONDS);
        let each: f64 = self
            .scenario
            .kits
            .iter()
            .map(|kit| indications * (1.0 + 1.0 / f64::from(kit.instrument.reference_every)))
            .sum();
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a count"
        )]
        let count = each.ceil() as u64;
        count
    }
}

impl Iterator for Plant {
    type Item = Sample;

    fn next(&mut self) -> Option<Sample> {
        let mut first: Option<(Timestamp, usize)> = None;
        for (index, sensor) in self.sensors.iter_mut().enumerate() {
            let at = sensor.peek()?.at;
            if first.is_none_or(|(earliest, _)| at < earliest) {
                first = Some((at, index));
            }
        }
        let (at, index) = first?;
        if self.end.is_some_and(|end| at >= end) {
            return None;
        }
        self.sensors[index].take()
    }
}

/// The instant `days` days after the start, to the nearest nanosecond.
#[must_use]
pub fn instant(days: f64) -> Timestamp {
    #[allow(
        clippy::cast_possible_truncation,
        reason = "runs of years are far below 2^63 ns"
    )]
    let nanoseconds = libm::round(days * 86_400e9) as i64;
    START.plus(Duration(nanoseconds))
}
