//! A world at work: its readings in the order in which they arrive, each indication with its truth.

use super::ground::{channel_id, days, reference_id};
use super::world::{Delivery, Quantity, World};
use crate::behaviour::disturbance::Disturber;
use crate::noise::Autoregressive;
use crate::process::Process;
use crate::range::{Draw, Duty};
use crate::sensor::START;
use holdtrue_engine::event::{Input, Reading, Source};
use holdtrue_engine::time::{Duration, Timestamp};
use std::collections::VecDeque;

/// Something that arrives at the engine.
#[derive(Clone, Debug, PartialEq)]
pub struct Event {
    /// When it arrives.
    pub arrival: Timestamp,
    /// What the engine is told.
    pub input: Input,
    /// What only the simulator knows of an indication.
    pub truth: Option<Truth>,
}

/// The truth about one indication.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Truth {
    /// Whose.
    pub sensor: usize,
    /// When it was sampled, by a clock that is right.
    pub day: f64,
    /// The indication as sent.
    pub indication: f64,
    /// The true value that the sensor answers.
    pub true_value: f64,
    /// The systematic error at that instant.
    pub systematic: f64,
    /// The influence quantity.
    pub influence: f64,
    /// False while the sensor is broken, so that there is no such thing as its error.
    pub judged: bool,
}

/// All events of a run, in order of arrival; what arrives together comes indications first.
#[must_use]
pub fn events(world: &World) -> Vec<Event> {
    let mut lines: Vec<Line> = (0..world.sensors.len())
        .map(|sensor| Line::new(world, sensor))
        .collect();
    let mut posts: Vec<Post> = (0..world.references.len())
        .map(|reference| Post::new(world, reference))
        .collect();
    let mut processes: Vec<Process> = world
        .quantities
        .iter()
        .enumerate()
        .map(|(index, quantity)| process(world, quantity, index))
        .collect();
    let mut events = Vec::new();
    for step in 0..world.steps() {
        let day = step as f64 * world.cadence_seconds as f64 / 86_400.0;
        let values: Vec<f64> = processes.iter_mut().map(|p| p.next(day)).collect();
        for line in &mut lines {
            line.send(world, step, day, &values, &mut events);
        }
        for post in &mut posts {
            post.send(world, step, day, &values, &mut events);
        }
    }
    // Stable: what arrives together stays in the order of sending.
    events.sort_by_key(|event| event.arrival);
    events
}

/// The true value of the quantity at `index`.
fn process(world: &World, quantity: &Quantity, index: usize) -> Process {
    let draw = world.chooser.stream(index, Duty::Process);
    let shape = (quantity.level, quantity.swing, quantity.wander);
    Process::of(shape, world.cadence_seconds, draw)
}

/// One sensor's readings.
struct Line {
    sensor: usize,
    noise: Vec<Autoregressive>,
    noise_draw: Draw,
    delivery_draw: Draw,
    disturber: Disturber,
    influence: Option<Process>,
    /// True values that it has not answered yet.
    behind: VecDeque<f64>,
}

impl Line {
    fn new(world: &World, sensor: usize) -> Self {
        let plan = &world.sensors[sensor];
        let draw = |duty| world.chooser.stream(sensor, duty);
        // A stream apart from that of the quantity with the same number.
        let influence_draw = world.chooser.stream(900 + sensor % 100, Duty::Process);
        Self {
            sensor,
            noise: plan
                .noise
                .parts
                .iter()
                .map(|&(deviation, memory)| Autoregressive::new(deviation, memory))
                .collect(),
            noise_draw: draw(Duty::Noise),
            delivery_draw: draw(Duty::Delivery),
            disturber: Disturber::new(plan.disturbance, draw(Duty::Disturbance)),
            influence: plan.influence.map(|it| {
                let shape = (it.mean, it.swing, it.wander);
                Process::of(shape, world.cadence_seconds, influence_draw)
            }),
            behind: VecDeque::new(),
        }
    }

    /// Sends what the sensor shows at this step, unless it is silent or the reading is lost.
    fn send(
        &mut self,
        world: &World,
        step: i64,
        day: f64,
        values: &[f64],
        events: &mut Vec<Event>,
    ) {
        let plan = &world.sensors[self.sensor];
        self.behind.push_back(values[plan.quantity]);
        let mut noise: f64 = self
            .noise
            .iter_mut()
            .map(|part| part.next(&mut self.noise_draw))
            .sum();
        if let Some((from, factor)) = plan.noise.grows
            && day >= from
        {
            noise *= factor;
        }
        let influence = self.influence.as_mut().map_or(0.0, |it| it.next(day));
        if step < plan.lag {
            return;
        }
        let true_value = self.behind.pop_front().unwrap_or(values[plan.quantity]);
        let systematic = plan.systematic(day, true_value, influence);
        let step_days = world.cadence_seconds as f64 / 86_400.0;
        let mut shown = true_value + systematic + noise;
        let mut judged = !self.disturber.is_stuck(day);
        if let Some(other) = plan.other_unit
            && day >= other.from
        {
            shown = other.factor * shown + other.offset;
            judged = false;
        }
        let sent = self.disturber.indication(day, step_days, shown);
        let lost = plan.delivery.lost > 0.0 && self.delivery_draw.unit() < plan.delivery.lost;
        let Some(value) = sent.filter(|_| !lost) else {
            return;
        };
        let truth = Truth {
            sensor: self.sensor,
            day,
            indication: quantised(value, plan.resolution),
            true_value,
            systematic,
            influence,
            judged,
        };
        self.deliver(&plan.delivery, &truth, world.cadence_seconds, events);
    }

    /// Puts a reading on its way.
    fn deliver(&mut self, way: &Delivery, truth: &Truth, cadence: i64, events: &mut Vec<Event>) {
        let at = START.plus(days(truth.day));
        let stamped = match way.clock_off {
            Some((from, to, seconds)) if truth.day >= from && truth.day < to => {
                at.plus(Duration::from_seconds(seconds))
            }
            _ => at,
        };
        let mut copies = 1;
        if way.twice > 0.0 && self.delivery_draw.unit() < way.twice {
            copies = 2;
        }
        for copy in 0..copies {
            let steps = if way.delay > 0.0 {
                way.delay * self.delivery_draw.unit()
            } else {
                0.0
            };
            let arrival = at.plus(days(steps * cadence as f64 / 86_400.0));
            events.push(Event {
                arrival,
                input: Input::Reading(Reading {
                    source: Source::Indication(channel_id(self.sensor)),
                    received: arrival,
                    phenomenon: stamped,
                    value: truth.indication,
                    sequence: None,
                    excluded: false,
                }),
                // The second copy is the same indication, not one more to be judged.
                truth: (copy == 0).then_some(*truth),
            });
        }
    }
}

/// One reference's values.
struct Post {
    reference: usize,
    draw: Draw,
}

impl Post {
    fn new(world: &World, reference: usize) -> Self {
        Self {
            reference,
            draw: world.chooser.stream(reference, Duty::Reference),
        }
    }

    /// Sends the value of this step, if one is due.
    fn send(
        &mut self,
        world: &World,
        step: i64,
        day: f64,
        values: &[f64],
        events: &mut Vec<Event>,
    ) {
        let plan = &world.references[self.reference];
        let Some(quantity) = plan.quantity else {
            return;
        };
        if step % plan.every != 0 {
            return;
        }
        // Drawn in any case, so that a silent reference leaves the others' numbers as they were.
        let noise = plan.each * self.draw.normal();
        let way = plan.late.0 + (plan.late.1 - plan.late.0) * self.draw.unit();
        if plan.silent_from.is_some_and(|from| day >= from) {
            return;
        }
        let error: f64 = plan.error.iter().map(|curve| curve.error(day)).sum();
        let at = START.plus(days(day));
        let arrival = at.plus(days(way));
        events.push(Event {
            arrival,
            input: Input::Reading(Reading {
                source: Source::Reference(reference_id(self.reference)),
                received: arrival,
                phenomenon: at,
                value: values[quantity] + error + noise,
                sequence: None,
                excluded: false,
            }),
            truth: None,
        });
    }
}

/// `value` as a display with this smallest step shows it.
fn quantised(value: f64, resolution: f64) -> f64 {
    if resolution > 0.0 {
        libm::round(value / resolution) * resolution + 0.0
    } else {
        value
    }
}
