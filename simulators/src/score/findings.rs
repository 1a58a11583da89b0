//! What was said, held against what was planted: found, missed, false.

use super::observe::{DEGREE_RAISED, STEP, Said};
use super::world::{Fault, Place, World};
use serde::Serialize;
use std::collections::BTreeMap;

/// The word of the error-limit alarm.
const ERROR_LIMIT: &str = "error-limit";
/// The word of the time-to-limit alarm.
const TIME_TO_LIMIT: &str = "time-to-limit";

/// Between this part of the limit and the limit itself an honest estimate may fall on either side.
const NEAR_LIMIT: f64 = 0.9;
/// From this part of the limit on, a drift is on its way to it.
const HALF_WAY: f64 = 0.5;
/// An error-limit alarm may come so many days after the error was last near its limit: the fit
/// looks back.
const LIMIT_ECHO_DAYS: f64 = 2.0;

/// What one run found.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Findings {
    /// Planted faults that had to be noticed.
    pub planted: u32,
    /// Those that were not, in time.
    pub missed: u32,
    /// Readings of the sensor from fault to word, for those that were.
    pub delays: Vec<f64>,
    /// Readings between a jump and the time that was told for it.
    pub jump_times: Vec<f64>,
    /// Error of the size that was told for it, in the u that was told with it.
    pub jump_sizes: Vec<f64>,
    /// Raises beyond the true degree.
    pub false_raises: u32,
    /// Sensors whose drift never raised the degree.
    pub missed_raises: u32,
    /// Steps where none was planted.
    pub false_steps: u32,
    /// Limit alarms while the true error was well inside.
    pub false_limits: u32,
    /// Other alarms that no planted fault explains, by kind.
    pub false_alarms: BTreeMap<String, u32>,
    /// Times at which the true error passed its limit for the first time …
    pub crossings: u32,
    /// … and, where a time-to-limit alarm came before, by how many days.
    pub leads: Vec<f64>,
}

/// How the true error of a sensor stood against its limit over the run.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Limits {
    /// Days at which it was at least near its limit.
    near: Vec<f64>,
    /// When it first passed it.
    crossing: Option<f64>,
    /// Whether it ever went half of the way: then telling that it would pass was no false alarm,
    /// even if the run or a cleaning ended the drift before.
    halfway: bool,
}

impl Limits {
    /// Takes the systematic error at `day`.
    pub fn see(&mut self, day: f64, systematic: f64, limit: Option<f64>) {
        let Some(limit) = limit else { return };
        self.halfway |= systematic.abs() >= HALF_WAY * limit;
        if systematic.abs() >= NEAR_LIMIT * limit {
            self.near.push(day);
        }
        if systematic.abs() >= limit && self.crossing.is_none() {
            self.crossing = Some(day);
        }
    }

    /// Whether an alarm at `day` that the limit is passed has a reason.
    fn explains(&self, day: f64) -> bool {
        let reached = self.near.partition_point(|near| *near <= day);
        reached > 0 && day - self.near[reached - 1] <= LIMIT_ECHO_DAYS
    }
}

/// Judges what was said in a run of `world`.
#[must_use]
pub fn judge(world: &World, said: &[Said], limits: &[Limits]) -> Findings {
    let mut findings = Findings::default();
    let cadence_days = world.cadence_seconds as f64 / 86_400.0;
    for fault in world.faults.iter().filter(|fault| fault.required) {
        findings.planted += 1;
        let answer = said
            .iter()
            .find(|it| answers(it, fault) && it.day >= fault.at && it.day <= fault.due);
        match answer {
            Some(answer) => {
                let readings = |days: f64| days / cadence_days;
                findings.delays.push(readings(answer.day - fault.at));
                if let (Some(jump), Some(size)) = (answer.jump, fault.size) {
                    let off = readings((jump.day - fault.at).abs());
                    findings.jump_times.push(off);
                    findings.jump_sizes.push((jump.size - size).abs() / jump.u);
                }
            }
            None => findings.missed += 1,
        }
    }
    for it in said {
        judge_word(world, it, limits, &mut findings);
    }
    judge_raises(world, said, &mut findings);
    judge_leads(said, limits, &mut findings);
    findings
}

/// Whether a word is about this fault.
fn answers(said: &Said, fault: &Fault) -> bool {
    said.place == Some(fault.place) && fault.answers.iter().any(|word| *word == said.word)
}

/// Counts a word that nothing planted explains.
fn judge_word(world: &World, said: &Said, limits: &[Limits], findings: &mut Findings) {
    let planted = world
        .faults
        .iter()
        .any(|fault| answers(said, fault) && said.day >= fault.at && said.day <= fault.until);
    if planted || world.tolerated.iter().any(|word| *word == said.word) {
        return;
    }
    let of_sensor = match said.place {
        Some(Place::Sensor(sensor)) => limits.get(sensor),
        _ => None,
    };
    match said.word.as_str() {
        DEGREE_RAISED => {
            let degree = said.degree.unwrap_or_default();
            if world.degrees.is_some_and(|(_, most)| degree > most) {
                findings.false_raises += 1;
            }
        }
        STEP => findings.false_steps += 1,
        ERROR_LIMIT => {
            if !of_sensor.is_some_and(|limits| limits.explains(said.day)) {
                findings.false_limits += 1;
            }
        }
        TIME_TO_LIMIT if of_sensor.is_some_and(|limits| limits.halfway) => {}
        word => *findings.false_alarms.entry(word.to_owned()).or_default() += 1,
    }
}

/// Counts sensors that never reached the degree that their drift has.
fn judge_raises(world: &World, said: &[Said], findings: &mut Findings) {
    let Some((least, _)) = world.degrees else {
        return;
    };
    for sensor in 0..world.sensors.len() {
        let reached = said
            .iter()
            .filter(|it| it.place == Some(Place::Sensor(sensor)))
            .filter_map(|it| it.degree)
            .max();
        if reached.unwrap_or(0) < least {
            findings.missed_raises += 1;
        }
    }
}

/// Notes by how much each crossing was foretold.
fn judge_leads(said: &[Said], limits: &[Limits], findings: &mut Findings) {
    for (sensor, limits) in limits.iter().enumerate() {
        let Some(crossing) = limits.crossing else {
            continue;
        };
        findings.crossings += 1;
        let foretold = said.iter().find(|it| {
            it.word == TIME_TO_LIMIT && it.place == Some(Place::Sensor(sensor)) && it.day < crossing
        });
        if let Some(foretold) = foretold {
            findings.leads.push(crossing - foretold.day);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::score::chooser::Chooser;
    use crate::score::ground::{WHITE, one};
    use crate::score::observe::Jump;

    fn said(word: &str, day: f64, degree: Option<u8>) -> Said {
        Said {
            word: word.to_owned(),
            place: Some(Place::Sensor(0)),
            day,
            degree,
            jump: None,
        }
    }

    fn world() -> World {
        let mut world = one(Chooser::new("test", 1), WHITE);
        world.faults.push(Fault {
            answers: vec![STEP],
            place: Place::Sensor(0),
            at: 10.0,
            due: 12.0,
            until: 14.0,
            size: Some(2.0),
            required: true,
        });
        world.degrees = Some((1, 1));
        world
    }

    #[test]
    fn a_fault_is_found_in_time_or_missed() {
        let in_time = judge(&world(), &[said(STEP, 11.0, None)], &[]);
        assert_eq!((in_time.planted, in_time.missed), (1, 0));
        // Ten-minute readings: 144 a day.
        assert_eq!(in_time.delays.len(), 1);
        assert!((in_time.delays[0] - 144.0).abs() < 1e-9);
        // Too late to count as found, but about this fault all the same.
        let late = judge(&world(), &[said(STEP, 13.0, None)], &[]);
        assert_eq!((late.missed, late.false_steps), (1, 0));
        for day in [9.0, 15.0] {
            let elsewhere = judge(&world(), &[said(STEP, day, None)], &[]);
            assert_eq!((elsewhere.missed, elsewhere.false_steps), (1, 1), "{day}");
        }
    }

    #[test]
    fn a_found_jump_is_held_against_its_time_and_size() {
        let mut found = said(STEP, 10.5, None);
        found.jump = Some(Jump {
            day: 9.75,
            size: 1.5,
            u: 0.25,
        });
        let findings = judge(&world(), &[found], &[]);
        assert_eq!(findings.jump_times, [36.0]);
        assert_eq!(findings.jump_sizes, [2.0]);
    }

    #[test]
    fn raises_beyond_the_true_degree_are_false_and_none_at_all_is_a_miss() {
        let none = judge(&world(), &[], &[]);
        assert_eq!((none.false_raises, none.missed_raises), (0, 1));
        let right = judge(&world(), &[said(DEGREE_RAISED, 5.0, Some(1))], &[]);
        assert_eq!((right.false_raises, right.missed_raises), (0, 0));
        let far = judge(&world(), &[said(DEGREE_RAISED, 5.0, Some(2))], &[]);
        assert_eq!((far.false_raises, far.missed_raises), (1, 0));
    }

    #[test]
    fn limit_alarms_need_an_error_near_the_limit() {
        let mut limits = Limits::default();
        for (day, error) in [(1.0, 0.5), (2.0, -0.95), (3.0, 1.05), (4.0, 0.2)] {
            limits.see(day, error, Some(1.0));
        }
        for (day, explained) in [(1.5, false), (2.0, true), (4.5, true), (5.5, false)] {
            let found = judge(
                &world(),
                &[said(ERROR_LIMIT, day, None)],
                std::slice::from_ref(&limits),
            );
            assert_eq!(found.false_limits == 0, explained, "{day}");
        }
        let foretold = judge(
            &world(),
            &[said(TIME_TO_LIMIT, 1.0, None)],
            std::slice::from_ref(&limits),
        );
        assert_eq!((foretold.crossings, foretold.leads), (1, vec![2.0]));
        assert!(foretold.false_alarms.is_empty());
        let never = judge(
            &world(),
            &[said(TIME_TO_LIMIT, 1.0, None)],
            &[Limits::default()],
        );
        assert_eq!(never.false_alarms.get(TIME_TO_LIMIT), Some(&1));
    }
}
