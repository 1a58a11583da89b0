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
    /// Sensors whose drift has a degree …
    pub graded: u32,
    /// … those that were raised beyond it …
    pub false_raises: u32,
    /// … and those that never reached it.
    pub missed_raises: u32,
    /// Steps where none was planted, or told once more.
    pub false_steps: u32,
    /// Other words about a planted fault after the first.
    pub repeated: u32,
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
    /// Takes the systematic error at `day`. Readings may come in any order.
    pub fn see(&mut self, day: f64, systematic: f64, limit: Option<f64>) {
        let Some(limit) = limit else { return };
        self.halfway |= systematic.abs() >= HALF_WAY * limit;
        if systematic.abs() >= NEAR_LIMIT * limit {
            self.near.push(day);
        }
        if systematic.abs() >= limit {
            self.crossing = Some(self.crossing.map_or(day, |first| first.min(day)));
        }
    }

    /// Whether an alarm at `day` that the limit is passed has a reason.
    fn explains(&self, day: f64) -> bool {
        let echoes = day - LIMIT_ECHO_DAYS..=day;
        self.near.iter().any(|near| echoes.contains(near))
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
    let mut told = vec![Vec::new(); world.faults.len()];
    for it in said {
        match explain(world, it, &mut told) {
            Explained::First => {}
            Explained::Again if it.word == STEP => findings.false_steps += 1,
            Explained::Again => findings.repeated += 1,
            Explained::Not => judge_word(it, limits, &mut findings),
        }
    }
    judge_raises(world, said, &mut findings);
    judge_leads(said, limits, &mut findings);
    findings
}

/// Whether a word is about this fault.
fn answers(said: &Said, fault: &Fault) -> bool {
    said.place == Some(fault.place) && fault.answers.iter().any(|word| *word == said.word)
}

/// Whether something planted explains a word.
enum Explained {
    /// The fault had not been told in this word.
    First,
    /// All that might explain it had been told before.
    Again,
    /// Nothing does.
    Not,
}

/// Finds the fault that explains a word. `told`: in which words each has been told.
fn explain<'a>(world: &World, said: &'a Said, told: &mut [Vec<&'a str>]) -> Explained {
    let mut explained = Explained::Not;
    for (fault, told) in world.faults.iter().zip(told) {
        if !answers(said, fault) || said.day < fault.at || said.day > fault.until {
            continue;
        }
        if !told.contains(&said.word.as_str()) {
            told.push(&said.word);
            return Explained::First;
        }
        explained = Explained::Again;
    }
    explained
}

/// Counts a word that nothing planted explains.
fn judge_word(said: &Said, limits: &[Limits], findings: &mut Findings) {
    let of_sensor = match said.place {
        Some(Place::Sensor(sensor)) => limits.get(sensor),
        _ => None,
    };
    match said.word.as_str() {
        // A raise is judged with all others of its sensor.
        DEGREE_RAISED => {}
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

/// Counts sensors that went beyond the degree that their drift has, or never reached it.
fn judge_raises(world: &World, said: &[Said], findings: &mut Findings) {
    for (index, sensor) in world.sensors.iter().enumerate() {
        let Some((least, most)) = sensor.degrees else {
            continue;
        };
        let reached = said
            .iter()
            .filter(|it| it.place == Some(Place::Sensor(index)))
            .filter_map(|it| it.degree)
            .max()
            .unwrap_or(0);
        findings.graded += 1;
        findings.false_raises += u32::from(reached > most);
        findings.missed_raises += u32::from(reached < least);
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

    /// A drift of degree 1, and a jump of 1 on day 10.
    fn world() -> World {
        let mut world = one(Chooser::new("test", 1), WHITE);
        world.faults.push(Fault::jump(0, 10.0, 1.0));
        world.expect_degrees(1, 1);
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
        let late = judge(&world(), &[said(STEP, 12.0, None)], &[]);
        assert_eq!((late.missed, late.false_steps), (1, 0));
        for day in [9.0, 12.5] {
            let elsewhere = judge(&world(), &[said(STEP, day, None)], &[]);
            assert_eq!((elsewhere.missed, elsewhere.false_steps), (1, 1), "{day}");
        }
    }

    #[test]
    fn a_fault_explains_one_word_of_each_kind() {
        let twice = [said(STEP, 10.5, None), said(STEP, 10.8, None)];
        let found = judge(&world(), &twice, &[]);
        assert_eq!((found.missed, found.false_steps), (0, 1));
        assert_eq!((found.delays.len(), found.repeated), (1, 0));
        // Two jumps close to each other explain two steps.
        let mut world = world();
        world.faults.push(Fault::jump(0, 10.7, 1.0));
        assert_eq!(judge(&world, &twice, &[]).false_steps, 0);
        let excuse = Fault::excuse(Place::Sensor(0), 10.0, 11.0, &["stuck", "noise-growth"]);
        world.faults.push(excuse);
        let words = ["stuck", "noise-growth", "stuck"].map(|word| said(word, 10.5, None));
        let found = judge(&world, &words, &[]);
        assert!(found.false_alarms.is_empty());
        assert_eq!((found.planted, found.repeated), (2, 1));
        let later = judge(&world, &[said("stuck", 11.5, None)], &[]);
        assert_eq!(later.false_alarms.get("stuck"), Some(&1));
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
        let raises = |degrees: &[u8]| {
            let said: Vec<Said> = degrees
                .iter()
                .map(|degree| said(DEGREE_RAISED, 5.0, Some(*degree)))
                .collect();
            let found = judge(&world(), &said, &[]);
            assert_eq!(found.graded, 1);
            (found.false_raises, found.missed_raises)
        };
        assert_eq!(raises(&[]), (0, 1));
        assert_eq!(raises(&[1]), (0, 0));
        assert_eq!(raises(&[1, 2]), (1, 0));
        // One sensor, however often.
        assert_eq!(raises(&[1, 2, 2]), (1, 0));
        let mut world = world();
        world.sensors[0].degrees = None;
        assert_eq!(judge(&world, &[], &[]).graded, 0);
    }

    #[test]
    fn limit_alarms_need_an_error_near_the_limit() {
        let mut limits = Limits::default();
        // Out of order, as readings that overtake each other come.
        for (day, error) in [
            (1.0, 0.5),
            (3.5, 1.1),
            (2.0, -0.95),
            (3.0, 1.05),
            (4.0, 0.2),
        ] {
            limits.see(day, error, Some(1.0));
        }
        for (day, explained) in [(1.5, false), (2.0, true), (5.5, true), (5.6, false)] {
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
