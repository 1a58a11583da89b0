//! What happens to single readings and to whole streams, apart from drift.

use crate::range::Draw;

/// A disturbance of a stream; times in days from the start.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Disturbance {
    /// Nothing.
    None,
    /// From `at` on the last value is repeated.
    Stuck {
        /// When.
        at: f64,
    },
    /// Single readings and bursts far off.
    Spikes {
        /// Mean days between two.
        every: f64,
        /// How far, in the channel's unit.
        height: f64,
        /// Longest burst, readings.
        longest: u32,
    },
    /// Half of the reference's values are missing for a day before `at`, all after it.
    ReferenceDying {
        /// When the last value has come.
        at: f64,
    },
    /// No indications from `from` to `to`.
    DataGap {
        /// Beginning.
        from: f64,
        /// End.
        to: f64,
    },
}

/// Days during which a dying reference still sends some of its values.
pub const DYING_DAYS: f64 = 1.0;

/// A disturbance at work on one stream of readings.
#[derive(Clone, Debug)]
pub struct Disturber {
    disturbance: Disturbance,
    draw: Draw,
    held: Option<f64>,
    burst_left: u32,
    burst: f64,
    /// Readings for which it rests after a disturbance: two bursts in a row would be one that is
    /// longer than stated.
    rest: u32,
}

impl Disturber {
    /// The disturbance with its source of random numbers.
    #[must_use]
    pub fn new(disturbance: Disturbance, draw: Draw) -> Self {
        Self {
            disturbance,
            draw,
            held: None,
            burst_left: 0,
            burst: 0.0,
            rest: 0,
        }
    }

    /// What the sensor sends instead of `value`, `step` days after the reading before; `None`:
    /// nothing.
    pub fn indication(&mut self, day: f64, step: f64, value: f64) -> Option<f64> {
        match self.disturbance {
            Disturbance::DataGap { from, to } if day >= from && day < to => None,
            Disturbance::Stuck { at } if day >= at => Some(*self.held.get_or_insert(value)),
            Disturbance::Spikes {
                every,
                height,
                longest,
            } => Some(value + self.spike(step / every, height, longest)),
            _ => Some(value),
        }
    }

    /// Whether the sensor repeats an old value at `day`.
    #[must_use]
    pub fn is_stuck(&self, day: f64) -> bool {
        matches!(self.disturbance, Disturbance::Stuck { at } if day >= at)
    }

    /// Whether the reference's value at `day` is sent.
    pub fn reference_arrives(&mut self, day: f64) -> bool {
        match self.disturbance {
            Disturbance::ReferenceDying { at } if day >= at => false,
            Disturbance::ReferenceDying { at } if day >= at - DYING_DAYS => self.draw.unit() < 0.5,
            _ => true,
        }
    }

    /// The offset of this reading: zero, or that of a running burst.
    fn spike(&mut self, chance: f64, height: f64, longest: u32) -> f64 {
        if self.rest > 0 {
            self.rest -= 1;
            return 0.0;
        }
        if self.burst_left == 0 {
            if self.draw.unit() >= chance {
                return 0.0;
            }
            self.burst = height * self.draw.sign();
            // Half of the disturbances are single spikes, the others bursts of 2 … longest
            // readings.
            let mut length = 1;
            if self.draw.unit() < 0.5 {
                while length < longest && self.draw.unit() < 0.6 {
                    length += 1;
                }
            }
            self.burst_left = length;
        }
        self.burst_left -= 1;
        if self.burst_left == 0 {
            self.rest = longest;
        }
        self.burst
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::range::Duty;

    fn disturber(disturbance: Disturbance) -> Disturber {
        Disturber::new(disturbance, Draw::new(1, 0, Duty::Disturbance))
    }

    #[test]
    fn a_stuck_sensor_repeats_one_value() {
        let mut stuck = disturber(Disturbance::Stuck { at: 2.0 });
        let sent: Vec<_> = [(1.0, 5.0), (2.0, 6.0), (3.0, 7.0)]
            .map(|(day, value)| stuck.indication(day, 1.0, value))
            .to_vec();
        assert_eq!(sent, [Some(5.0), Some(6.0), Some(6.0)]);
    }

    #[test]
    fn a_gap_is_silent_between_its_ends_only() {
        let mut gap = disturber(Disturbance::DataGap { from: 1.0, to: 2.0 });
        let sent = [0.9, 1.0, 1.9, 2.0].map(|day| gap.indication(day, 0.1, 4.0));
        assert_eq!(sent, [Some(4.0), None, None, Some(4.0)]);
    }

    #[test]
    fn spikes_come_as_often_and_as_long_as_stated() {
        let mut spikes = disturber(Disturbance::Spikes {
            every: 1.0,
            height: 9.0,
            longest: 4,
        });
        let step = 1.0 / 72.0;
        let offsets: Vec<f64> = (0..72_000)
            .filter_map(|k| spikes.indication(f64::from(k) * step, step, 0.0))
            .collect();
        assert!(offsets.iter().all(|o| [0.0, 9.0, -9.0].contains(o)));
        let starts = offsets
            .windows(2)
            .filter(|pair| pair[0] == 0.0 && pair[1] != 0.0)
            .count();
        // One a day, less the share of the time that is burst or rest (6 of 72 readings): a count
        // of about 920 with four standard deviations.
        assert!((800..1040).contains(&starts), "{starts}");
        let mut longest = 0;
        let mut run = 0;
        for offset in &offsets {
            run = if *offset == 0.0 { 0 } else { run + 1 };
            longest = longest.max(run);
        }
        assert_eq!(longest, 4);
    }

    #[test]
    fn a_dying_reference_thins_out_then_stops() {
        let mut dying = disturber(Disturbance::ReferenceDying { at: 10.0 });
        let hours = |from: u32, to: u32, dying: &mut Disturber| {
            (from..to)
                .filter(|h| dying.reference_arrives(f64::from(*h) / 24.0))
                .count()
        };
        assert_eq!(hours(0, 216, &mut dying), 216);
        let thin = hours(216, 240, &mut dying);
        assert!((4..=20).contains(&thin), "{thin}");
        assert_eq!(hours(240, 480, &mut dying), 0);
    }
}
