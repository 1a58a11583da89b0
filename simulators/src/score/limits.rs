//! The limits that the scorecard holds the engine to, each with its reason.

use super::library::{Class, Scenario};
use super::rare;
use super::summary::{Figure, Summary};
use serde::Serialize;
use std::fmt;

/// For which scenarios a limit is meant.
#[derive(Clone, Copy, Debug)]
enum Meant {
    /// For all of a class, except these.
    Class(Class, &'static [&'static str]),
    /// For these.
    Only(&'static [&'static str]),
    /// For all, except these.
    All(&'static [&'static str]),
}

/// How a figure is bounded.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Bound {
    /// It must not be more.
    AtMost(f64),
    /// It must not be less.
    AtLeast(f64),
    /// It must be from one to the other.
    Within(f64, f64),
}

impl Bound {
    /// Whether `value` is within.
    #[must_use]
    pub fn holds(self, value: f64) -> bool {
        match self {
            Self::AtMost(most) => value <= most,
            Self::AtLeast(least) => value >= least,
            Self::Within(least, most) => (least..=most).contains(&value),
        }
    }
}

impl fmt::Display for Bound {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::AtMost(most) => write!(out, "at most {most}"),
            Self::AtLeast(least) => write!(out, "at least {least}"),
            Self::Within(least, most) => write!(out, "from {least} to {most}"),
        }
    }
}

/// One row of the table of limits.
struct Limit {
    meant: Meant,
    figure: Figure,
    bound: Bound,
    reason: &'static str,
}

const fn limit(meant: Meant, figure: Figure, bound: Bound, reason: &'static str) -> Limit {
    Limit {
        meant,
        figure,
        bound,
        reason,
    }
}

/// Scenarios whose noise has memory.
const CORRELATED: &[&str] = &["ar-0.5", "ar-0.8", "ar-0.9", "white-and-slow"];

/// Scenarios in which sensors jump by three sigma or more in white noise.
const JUMPING: &[&str] = &["step", "auto-baseline", "saw-tooth-undeclared"];

/// Scenarios in which a reference goes bad, and nothing else does.
const ONE_ALARM: &[&str] = &[
    "fleet-one-bad-reference",
    "reference-step",
    "reference-stuck",
];

/// Scenarios without a drift that can be seen, outside the class of those.
const STEADY: &[&str] = &["span-steady-noisy-reference", "clock-step"];

/// The table.
const LIMITS: &[Limit] = &[
    limit(
        Meant::Class(Class::Correctable, &[]),
        Figure::Remaining,
        Bound::AtMost(0.25),
        "a drift that pairs show must be gone to three quarters at the newest instant",
    ),
    limit(
        Meant::Class(Class::Correctable, &[]),
        Figure::MissedRaises,
        Bound::AtMost(0.0),
        "drifts of many sigma must be named as drift",
    ),
    limit(
        Meant::Class(Class::Correctable, &["late-laboratory"]),
        Figure::Claimed,
        Bound::AtLeast(0.9),
        "coverage must not be bought by withdrawing",
    ),
    limit(
        Meant::Only(&["late-laboratory"]),
        Figure::Claimed,
        Bound::AtLeast(0.8),
        "nothing is known before the first values are back, and young corrections end soon",
    ),
    limit(
        Meant::Class(Class::Stationary, &[]),
        Figure::Worsened,
        Bound::AtMost(1.0),
        "what does not drift may be worsened by 0.05 sigma or 0.6 of the correction's own u",
    ),
    limit(
        Meant::Class(Class::Stationary, &[]),
        Figure::FalseRaises,
        Bound::AtMost(0.05),
        "noise is no drift: one sensor in twenty over six windows at most",
    ),
    limit(
        Meant::Class(Class::Stationary, &["temperature-undeclared"]),
        Figure::Coverage,
        Bound::AtLeast(0.93),
        "a 95 % interval, degree free, averaged over time (an undeclared influence is outside it)",
    ),
    limit(
        Meant::Only(&["references-disagree", "reference-drift"]),
        Figure::Coverage,
        Bound::AtLeast(0.93),
        "a 95 % interval holds the declared common error of the reference",
    ),
    limit(
        Meant::Only(&["references-disagree", "reference-drift"]),
        Figure::Claimed,
        Bound::AtLeast(0.9),
        "coverage must not be bought by withdrawing",
    ),
    limit(
        Meant::Only(&["span-ramp-constant-level"]),
        Figure::Remaining,
        Bound::AtMost(0.25),
        "near the one level that is seen, a fading span is an offset that can be corrected",
    ),
    limit(
        Meant::Only(&["span-ramp-constant-level"]),
        Figure::SpanClaims,
        Bound::AtMost(0.0),
        "at one level a span can't be told from a zero",
    ),
    limit(
        Meant::Only(&["span-steady-noisy-reference"]),
        Figure::SpanClaims,
        Bound::AtMost(0.01),
        "noise in the regressor makes up a slope: it must not be claimed",
    ),
    limit(
        Meant::Only(&["span-ramp"]),
        Figure::SpanClaims,
        Bound::AtLeast(0.95),
        "a span that fades by 5 % and more while the level varies can be seen",
    ),
    limit(
        Meant::Only(&["beyond-learned-range"]),
        Figure::Unflagged,
        Bound::AtMost(0.0),
        "beyond what the fit has seen nothing is known, and every corrected value must say so",
    ),
    limit(
        Meant::Only(STEADY),
        Figure::Worsened,
        Bound::AtMost(1.0),
        "what does not drift is left alone, whatever the other side of the pair does",
    ),
    limit(
        Meant::Class(Class::Stationary, &[]),
        Figure::Claimed,
        Bound::AtLeast(0.9),
        "to leave alone is to say so: withdrawing worsens nothing and covers everything",
    ),
    limit(
        Meant::Only(STEADY),
        Figure::Claimed,
        Bound::AtLeast(0.9),
        "to leave alone is to say so: withdrawing worsens nothing",
    ),
    limit(
        Meant::Only(&[
            "span-steady-noisy-reference",
            "group-common-mode",
            "temperature-declared",
            "saw-tooth-ordered",
        ]),
        Figure::FalseRaises,
        Bound::AtMost(0.05),
        "time explains no more of it: one sensor in twenty over six windows at most",
    ),
    limit(
        Meant::Class(Class::Correctable, &[]),
        Figure::Coverage,
        Bound::AtLeast(0.93),
        "a 95 % interval, degree free, averaged over time",
    ),
    limit(
        Meant::All(CORRELATED),
        Figure::FalseSteps,
        Bound::AtMost(1.0),
        "a step closes the history: one false one in 100 000 readings at most",
    ),
    limit(
        Meant::Only(CORRELATED),
        Figure::FalseSteps,
        Bound::AtMost(3.0),
        "correlated noise looks like steps: the chart widens itself, but not without end",
    ),
    limit(
        Meant::All(&[]),
        Figure::FalseLimits,
        Bound::AtMost(0.0),
        "the limit is ten sigma away: no honest estimate crosses it by chance",
    ),
    limit(
        Meant::All(ONE_ALARM),
        Figure::FalseAlarms,
        Bound::AtMost(1.0),
        "an alarm without a fault teaches people to ignore alarms: one in 100 000 readings at most",
    ),
    limit(
        Meant::Only(JUMPING),
        Figure::JumpTime,
        Bound::AtMost(5.0),
        "the time of a jump is told within five readings, half of the time",
    ),
    limit(
        Meant::Only(ONE_ALARM),
        Figure::FalseAlarms,
        Bound::AtMost(0.0),
        "one bad reference is one alarm, not one for each of its channels",
    ),
    limit(
        Meant::Only(ONE_ALARM),
        Figure::Repeated,
        Bound::AtMost(0.0),
        "one bad reference is one alarm, not one each time that it is looked at",
    ),
    limit(
        Meant::Class(Class::Detection, &[]),
        Figure::Missed,
        Bound::AtMost(0.0),
        "what breaks must be noticed in the time that the scenario states",
    ),
    limit(
        Meant::Only(JUMPING),
        Figure::DelayMedian,
        Bound::AtMost(12.0),
        "a jump of three sigma in white noise is found within a dozen readings",
    ),
    limit(
        Meant::Only(JUMPING),
        Figure::Delay95,
        Bound::AtMost(30.0),
        "a jump of three sigma in white noise is found within 30 readings, 95 times in 100",
    ),
    limit(
        Meant::Only(ONE_ALARM),
        Figure::Moved,
        Bound::AtMost(1.0),
        "a reference known to be bad moves no correction by more than its own u",
    ),
    limit(
        Meant::Only(&["fleet-one-bad-reference", "group-common-mode"]),
        Figure::Claimed,
        Bound::AtLeast(0.9),
        "nothing is moved where nothing is claimed: the sound sensors go on",
    ),
    limit(
        Meant::Only(&["offset-ramp", "biofouling", "bad-delivery"]),
        Figure::Unforetold,
        Bound::AtMost(0.05),
        "that a drift will pass its limit is told before it does",
    ),
    limit(
        Meant::Only(&["group-common-mode"]),
        Figure::Moved,
        Bound::AtMost(1.0),
        "what all members share cancels: a correction from a group can't know of it",
    ),
];

/// A limit that this version is known to break.
struct Known {
    scenario: &'static str,
    figure: Figure,
    /// It breaks it by no more.
    bound: Bound,
}

/// Broken limits that are known, with what has been seen of them; DEVELOPERS.md says why. A row
/// goes when its limit holds.
const KNOWN: &[Known] = &[Known {
    scenario: "span-ramp",
    figure: Figure::Coverage,
    bound: Bound::AtLeast(0.82),
}];

/// A limit held against a scenario's figures.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Verdict {
    /// The figure.
    pub figure: Figure,
    /// Its value; `None` if the runs say nothing about it, which breaks the limit.
    pub value: Option<f64>,
    /// The bound.
    pub bound: Bound,
    /// Whether it holds.
    pub holds: bool,
    /// Whether it is known to be broken, and not worse than known.
    pub known: bool,
    /// Why this bound.
    pub reason: &'static str,
}

/// Holds a scenario's figures against its limits.
#[must_use]
pub fn judge(scenario: &Scenario, summary: &Summary) -> Vec<Verdict> {
    LIMITS
        .iter()
        .filter(|limit| is_meant(limit.meant, scenario))
        .map(|limit| {
            let value = summary.figures.get(&limit.figure).copied();
            let bound = match (limit.figure, limit.bound) {
                (Figure::FalseSteps | Figure::FalseAlarms, Bound::AtMost(rate)) if rate > 0.0 => {
                    Bound::AtMost(rare::permitted(rate, summary.indications))
                }
                (_, bound) => bound,
            };
            let keeps = |bound: Bound| value.is_some_and(|value| bound.holds(value));
            let holds = keeps(bound);
            let known = KNOWN
                .iter()
                .filter(|known| known.scenario == scenario.name && known.figure == limit.figure);
            Verdict {
                figure: limit.figure,
                value,
                bound,
                holds,
                known: !holds && known.clone().any(|known| keeps(known.bound)),
                reason: limit.reason,
            }
        })
        .collect()
}

fn is_meant(meant: Meant, scenario: &Scenario) -> bool {
    match meant {
        Meant::Class(class, except) => class == scenario.class && !except.contains(&scenario.name),
        Meant::Only(names) => names.contains(&scenario.name),
        Meant::All(except) => !except.contains(&scenario.name),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::score::library;

    #[test]
    fn names_in_the_table_exist_and_every_scenario_has_limits_of_its_class() {
        for limit in LIMITS {
            let (Meant::Class(_, names) | Meant::Only(names) | Meant::All(names)) = limit.meant;
            for name in names {
                assert!(library::find(name).is_some(), "{name}");
            }
        }
        for known in KNOWN {
            let scenario = library::find(known.scenario).expect(known.scenario);
            let limited =
                |limit: &&Limit| limit.figure == known.figure && is_meant(limit.meant, &scenario);
            assert!(
                LIMITS.iter().any(|limit| limited(&limit)),
                "{}",
                known.scenario
            );
        }
        for scenario in library::all() {
            let own = |limit: &&Limit| {
                !matches!(limit.meant, Meant::All(_)) && is_meant(limit.meant, &scenario)
            };
            assert!(LIMITS.iter().any(|limit| own(&limit)), "{}", scenario.name);
        }
    }

    /// What `figure` of a scenario comes to, from so many indications.
    fn verdict(name: &str, figure: Figure, value: f64, indications: f64) -> Verdict {
        let summary = Summary {
            indications,
            figures: [(figure, value)].into(),
            ..Summary::default()
        };
        let scenario = library::find(name).unwrap();
        let all = judge(&scenario, &summary);
        all.into_iter().find(|it| it.figure == figure).unwrap()
    }

    #[test]
    fn what_is_known_to_break_may_not_get_worse() {
        for (value, holds, known) in [
            (0.95, true, false),
            (0.85, false, true),
            (0.5, false, false),
        ] {
            let found = verdict("span-ramp", Figure::Coverage, value, 1e5);
            assert_eq!((found.holds, found.known), (holds, known), "{value}");
        }
        let other = verdict("offset-ramp", Figure::Coverage, 0.85, 1e5);
        assert!(!other.holds && !other.known);
    }

    /// One false step among 20 000 says nothing against one in 100 000; six of 300 000 do not yet,
    /// seven do.
    #[test]
    fn rates_are_held_to_what_their_sample_can_tell() {
        for (steps, indications, holds) in [(1.0, 2e4, true), (6.0, 3e5, true), (7.0, 3e5, false)] {
            let value = steps / indications * 1e5;
            let found = verdict("step", Figure::FalseSteps, value, indications);
            assert_eq!(found.holds, holds, "{steps} of {indications}");
        }
    }

    #[test]
    fn bounds_include_their_ends_and_refuse_what_is_no_number() {
        assert!(Bound::AtMost(0.25).holds(0.25) && !Bound::AtMost(0.25).holds(0.26));
        assert!(Bound::AtLeast(0.93).holds(0.93) && !Bound::AtLeast(0.93).holds(0.92));
        let within = Bound::Within(0.93, 0.99);
        assert!(within.holds(0.93) && within.holds(0.99));
        assert!(!within.holds(0.92) && !within.holds(1.0));
        for bound in [Bound::AtMost(1.0), Bound::AtLeast(1.0), within] {
            assert!(!bound.holds(f64::NAN), "{bound}");
        }
    }
}
