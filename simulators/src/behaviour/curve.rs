//! Drifts: the systematic error of a sensor as a function of time.

use std::f64::consts::TAU;

/// A systematic error over time; times in days from the start, sizes in the channel's unit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Curve {
    /// Always zero.
    None,
    /// Zero until `onset`, then `rate` per day.
    Linear {
        /// Beginning.
        onset: f64,
        /// Change per day.
        rate: f64,
    },
    /// Zero until `onset`, then `change·(1 − exp(−(t − onset)/time_constant))`.
    Exponential {
        /// Beginning.
        onset: f64,
        /// Final error.
        change: f64,
        /// Days after which 63 % of it is reached.
        time_constant: f64,
    },
    /// Zero until `onset`, then `factor·(t − onset)²`.
    Quadratic {
        /// Beginning.
        onset: f64,
        /// Change per day².
        factor: f64,
    },
    /// Growth that feeds itself, as of a biofilm: `change·(exp(t/time_constant) − 1)/(exp(end/
    /// time_constant) − 1)`.
    Growth {
        /// Error at `end`.
        change: f64,
        /// Days in which it grows e-fold.
        time_constant: f64,
        /// When `change` is reached.
        end: f64,
    },
    /// Grows evenly to `height` within `period`, then falls to zero (cleaning).
    SawTooth {
        /// Days between cleanings.
        period: f64,
        /// Error just before a cleaning.
        height: f64,
    },
    /// Zero, from `at` on `size`.
    Step {
        /// When it jumps.
        at: f64,
        /// By how much.
        size: f64,
    },
    /// amplitude·sin(2π(t + phase)), t in days.
    DailyCycle {
        /// Amplitude.
        amplitude: f64,
        /// Part of a day.
        phase: f64,
    },
}

impl Curve {
    /// An even change from `onset` on, of `change` by `end`.
    #[must_use]
    pub fn creeping(onset: f64, change: f64, end: f64) -> Self {
        Self::Linear {
            onset,
            rate: change / (end - onset),
        }
    }

    /// The systematic error `day` days from the start.
    #[must_use]
    pub fn error(&self, day: f64) -> f64 {
        match *self {
            Self::None => 0.0,
            Self::Linear { onset, rate } => rate * (day - onset).max(0.0),
            Self::Exponential {
                onset,
                change,
                time_constant,
            } => change * (1.0 - libm::exp(-(day - onset).max(0.0) / time_constant)),
            Self::Quadratic { onset, factor } => {
                let run = (day - onset).max(0.0);
                factor * run * run
            }
            Self::Growth {
                change,
                time_constant,
                end,
            } => change * libm::expm1(day / time_constant) / libm::expm1(end / time_constant),
            Self::SawTooth { period, height } => {
                let turn = day / period;
                height * (turn - libm::floor(turn))
            }
            Self::Step { at, size } => {
                if day >= at {
                    size
                } else {
                    0.0
                }
            }
            Self::DailyCycle { amplitude, phase } => amplitude * libm::sin(TAU * (day + phase)),
        }
    }

    /// Instants up to `end` at which the error jumps.
    #[must_use]
    pub fn jumps(&self, end: f64) -> Vec<f64> {
        match *self {
            Self::Step { at, .. } if at < end => vec![at],
            Self::SawTooth { period, .. } => {
                let mut jumps = Vec::new();
                let mut at = period;
                while at < end {
                    jumps.push(at);
                    at = period * (jumps.len() as f64 + 1.0);
                }
                jumps
            }
            _ => Vec::new(),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn curves_take_their_stated_values() {
        let linear = Curve::Linear {
            onset: 2.0,
            rate: 0.5,
        };
        let quadratic = Curve::Quadratic {
            onset: 1.0,
            factor: -2.0,
        };
        let saw_tooth = Curve::SawTooth {
            period: 4.0,
            height: 2.0,
        };
        let step = Curve::Step {
            at: 5.0,
            size: -1.0,
        };
        let cycle = Curve::DailyCycle {
            amplitude: 3.0,
            phase: 0.0,
        };
        let ageing = Curve::Exponential {
            onset: 1.0,
            change: 10.0,
            time_constant: 2.0,
        };
        let growth = Curve::Growth {
            change: 3.0,
            time_constant: 2.0,
            end: 8.0,
        };
        let cases = [
            (growth, 0.0, 0.0),
            (growth, 8.0, 3.0),
            // 3·(e¹ − 1)/(e⁴ − 1)
            (growth, 2.0, 0.096_175_809_840_255),
            (Curve::None, 3.0, 0.0),
            (linear, 1.0, 0.0),
            (linear, 4.0, 1.0),
            (quadratic, 3.0, -8.0),
            (saw_tooth, 3.0, 1.5),
            (saw_tooth, 4.0, 0.0),
            (step, 4.999, 0.0),
            (step, 5.0, -1.0),
            (cycle, 0.25, 3.0),
            // 10·(1 − 1/e)
            (ageing, 3.0, 6.321_205_588_285_577),
        ];
        for (curve, day, expected) in cases {
            assert!(
                (curve.error(day) - expected).abs() < 1e-12,
                "{curve:?} at {day}"
            );
        }
    }

    #[test]
    fn jumps_are_where_the_error_falls_or_steps() {
        assert_eq!(
            Curve::SawTooth {
                period: 4.0,
                height: 2.0
            }
            .jumps(12.5),
            [4.0, 8.0, 12.0]
        );
        assert_eq!(
            Curve::Step {
                at: 5.0,
                size: -1.0
            }
            .jumps(6.0),
            [5.0]
        );
        assert_eq!(
            Curve::Step {
                at: 5.0,
                size: -1.0
            }
            .jumps(4.0),
            [0.0; 0]
        );
        assert_eq!(
            Curve::Linear {
                onset: 2.0,
                rate: 0.5
            }
            .jumps(9.0),
            [0.0; 0]
        );
    }
}
