//! A world at work: its readings in the order in which they arrive, each indication with its truth.

use super::ground::{channel_id, days, reference_id};
use super::world::{Delivery, Quantity, World};
use crate::behaviour::disturbance::Disturber;
use crate::noise::Autoregressive;
use crate::process::Process;
use crate::range::{Draw, Duty};
use crate::sensor::START;
use holdtrue_engine::event::{About, Act, Input, Order, Reading, ServiceEvent, Source, Wish};
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
        let values: Vec<f64> = processes
            .iter_mut()
            .zip(&world.quantities)
            .map(|(process, quantity)| process.next(day) + moved(quantity, day))
            .collect();
        for line in &mut lines {
            line.send(world, step, day, &values, &mut events);
        }
        for post in &mut posts {
            post.send(world, step, day, &values, &mut events);
        }
    }
    events.extend(orders(world));
    // Stable: what arrives together stays in the order of sending.
    events.sort_by_key(|event| event.arrival);
    events
}

/// The orders that report cleanings.
fn orders(world: &World) -> Vec<Event> {
    let mut orders = Vec::new();
    for (sensor, plan) in world.sensors.iter().enumerate() {
        let channel = &world.setup.channels[sensor].name;
        for (number, cleaning) in plan.cleaned.iter().enumerate() {
            let arrival = START.plus(days(cleaning.told));
            let event = ServiceEvent {
                by: "technician".to_owned(),
                about: About::Channel(channel.clone()),
                at: Some(START.plus(days(cleaning.at))),
                act: Act::Cleaned,
                as_found: Vec::new(),
                as_left: Vec::new(),
                serial: None,
                certificate: None,
                note: String::new(),
            };
            orders.push(Event {
                arrival,
                input: Input::Order(Box::new(Order {
                    received: arrival,
                    id: format!("{channel}/cleaning-{number}"),
                    reply_to: None,
                    wish: Wish::Service(event),
                })),
                truth: None,
            });
        }
    }
    orders
}

/// The true value of the quantity at `index`.
fn process(world: &World, quantity: &Quantity, index: usize) -> Process {
    let draw = world.chooser.stream(index, Duty::Process);
    let shape = (quantity.level, quantity.swing, quantity.wander);
    Process::of(shape, world.cadence_seconds, draw)
}

/// By how much the quantity has moved at `day`.
fn moved(quantity: &Quantity, day: f64) -> f64 {
    match quantity.moves {
        Some((from, by)) if day >= from => by,
        _ => 0.0,
    }
}

/// One sensor's readings.
struct Line {
    sensor: usize,
    noise: Vec<Autoregressive>,
    noise_draw: Draw,
    delivery_draw: Draw,
    disturber: Disturber,
    influence: Option<Process>,
    influence_draw: Draw,
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
            influence_draw: world.chooser.stream(900 + sensor % 100, Duty::Noise),
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
        self.tell_influence(world, day, influence, events);
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

    /// Sends the influence quantity, where it is measured.
    fn tell_influence(&mut self, world: &World, day: f64, value: f64, events: &mut Vec<Event>) {
        let plan = world.sensors[self.sensor].influence;
        let configured = world.setup.channels[self.sensor].influences.first();
        if let Some(noise) = plan.and_then(|it| it.measured)
            && let Some(configured) = configured
        {
            let value = value + noise * self.influence_draw.normal();
            let at = START.plus(days(day));
            events.push(Event {
                arrival: at,
                input: reading(Source::Influence(configured.source), at, at, value),
                truth: None,
            });
        }
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
                input: reading(
                    Source::Indication(channel_id(self.sensor)),
                    arrival,
                    stamped,
                    truth.indication,
                ),
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
    /// The value that it repeats.
    held: Option<f64>,
}

impl Post {
    fn new(world: &World, reference: usize) -> Self {
        Self {
            reference,
            draw: world.chooser.stream(reference, Duty::Reference),
            held: None,
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
        let mut value = values[quantity] + error + noise;
        if plan.stuck_from.is_some_and(|from| day >= from) {
            value = *self.held.get_or_insert(value);
        }
        let at = START.plus(days(day));
        let arrival = at.plus(days(way));
        events.push(Event {
            arrival,
            input: reading(
                Source::Reference(reference_id(self.reference)),
                arrival,
                at,
                value,
            ),
            truth: None,
        });
    }
}

/// A reading as the engine takes it.
fn reading(source: Source, received: Timestamp, phenomenon: Timestamp, value: f64) -> Input {
    Input::Reading(Reading {
        source,
        received,
        phenomenon,
        value,
        sequence: None,
        excluded: false,
    })
}

/// `value` as a display with this smallest step shows it.
fn quantised(value: f64, resolution: f64) -> f64 {
    if resolution > 0.0 {
        libm::round(value / resolution) * resolution + 0.0
    } else {
        value
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::behaviour::curve::Curve;
    use crate::score::chooser::Chooser;
    use crate::score::ground::{WHITE, one};
    use crate::score::world::OtherUnit;

    /// A small world: a day of ten-minute readings.
    fn world() -> World {
        let mut world = one(Chooser::new("test", 3), WHITE);
        world.days = 1.0;
        world
    }

    fn indications(events: &[Event]) -> Vec<(&Reading, Option<Truth>)> {
        events
            .iter()
            .filter_map(|event| match &event.input {
                Input::Reading(reading) => match reading.source {
                    Source::Indication(_) => Some((reading, event.truth)),
                    _ => None,
                },
                _ => None,
            })
            .collect()
    }

    fn close(left: f64, right: f64) -> bool {
        (left - right).abs() < 1e-9
    }

    #[test]
    fn an_indication_is_the_true_value_with_its_errors_and_noise() {
        let mut world = world();
        world.sensors[0].zero = vec![Curve::Step { at: 0.5, size: 7.0 }];
        world.sensors[0].span = vec![Curve::Step { at: 0.5, size: 0.1 }];
        let quiet = events(&self::world());
        let moved = events(&world);
        assert_eq!(quiet.len(), 2 * 144);
        assert_eq!(moved.len(), quiet.len());
        for ((before, truth), (after, moved)) in
            indications(&quiet).into_iter().zip(indications(&moved))
        {
            let (truth, moved) = (truth.unwrap(), moved.unwrap());
            assert_eq!(truth.systematic.to_bits(), 0.0_f64.to_bits());
            let error = if truth.day < 0.5 {
                0.0
            } else {
                7.0 + 0.1 * truth.true_value
            };
            assert!(close(moved.systematic, error));
            assert!(close(after.value - before.value, error));
        }
    }

    #[test]
    fn a_lag_shows_old_true_values_from_its_own_length_on() {
        let mut world = world();
        let plain = events(&world);
        world.sensors[0].lag = 3;
        let lagged = events(&world);
        let values = |events: &[Event]| -> Vec<u64> {
            events
                .iter()
                .filter_map(|event| event.truth)
                .map(|truth| truth.true_value.to_bits())
                .collect()
        };
        let (plain, lagged) = (values(&plain), values(&lagged));
        assert_eq!(lagged, plain[..plain.len() - 3]);
    }

    #[test]
    fn bad_delivery_loses_repeats_and_reorders_without_touching_values() {
        let mut world = world();
        world.days = 10.0;
        let sent = events(&world);
        world.sensors[0].delivery = Delivery {
            lost: 0.1,
            twice: 0.2,
            delay: 3.0,
            clock_off: None,
        };
        let arrived = events(&world);
        let (sent, arrived) = (indications(&sent), indications(&arrived));
        let firsts = arrived.iter().filter(|(_, truth)| truth.is_some()).count();
        // 1440 sent: four standard deviations about 10 % lost, 20 % of the rest twice.
        assert!((1250..1342).contains(&firsts), "{firsts}");
        let seconds = arrived.len() - firsts;
        assert!((200..320).contains(&seconds), "{seconds}");
        let overtaken = arrived
            .windows(2)
            .filter(|pair| pair[1].0.phenomenon < pair[0].0.phenomenon)
            .count();
        assert!(overtaken > 100, "{overtaken}");
        for (reading, _) in &arrived {
            let delay = reading.received.since(reading.phenomenon).seconds();
            assert!((0.0..1800.0).contains(&delay), "{delay}");
            let same = sent
                .iter()
                .find(|(it, _)| it.phenomenon == reading.phenomenon);
            assert_eq!(
                same.map(|(it, _)| it.value.to_bits()),
                Some(reading.value.to_bits())
            );
        }
    }

    #[test]
    fn clocks_units_and_displays_go_wrong_as_stated() {
        let mut world = world();
        world.sensors[0].delivery.clock_off = Some((0.25, 0.5, -3600));
        world.sensors[0].other_unit = Some(OtherUnit {
            from: 0.75,
            factor: 1.8,
            offset: 32.0,
        });
        let plain = events(&self::world());
        let wrong = events(&world);
        for ((before, _), (after, truth)) in
            indications(&plain).into_iter().zip(indications(&wrong))
        {
            let truth = truth.unwrap();
            let off = if truth.day >= 0.25 && truth.day < 0.5 {
                -3600.0
            } else {
                0.0
            };
            assert!(close(
                after.phenomenon.since(before.phenomenon).seconds(),
                off
            ));
            assert_eq!(truth.judged, truth.day < 0.75);
            let shown = if truth.judged {
                before.value
            } else {
                1.8 * before.value + 32.0
            };
            assert!(close(after.value, shown));
        }
        for (value, shown) in [(0.74, 0.5), (0.76, 1.0), (-0.2, 0.0)] {
            assert!(close(quantised(value, 0.5), shown), "{value}");
        }
    }

    #[test]
    fn a_reference_is_sparse_late_and_silent_as_stated() {
        let mut world = world();
        world.references[0].every = 6;
        world.references[0].late = (0.1, 0.2);
        world.references[0].silent_from = Some(0.5);
        world.references[0].error = vec![Curve::Step { at: 0.0, size: 3.0 }];
        let arrived = events(&world);
        let mut count = 0;
        for event in &arrived {
            let Input::Reading(reading) = &event.input else {
                panic!("{event:?}");
            };
            if let Source::Reference(_) = reading.source {
                count += 1;
                let delay = reading.received.since(reading.phenomenon).days();
                assert!((0.1..0.2).contains(&delay), "{delay}");
                assert!(reading.phenomenon.since(START).days() < 0.5);
            }
        }
        assert_eq!(count, 12);
    }

    #[test]
    fn a_stuck_reference_repeats_its_first_value_from_then_on() {
        let mut world = world();
        world.references[0].stuck_from = Some(0.5);
        let values = |world: &World| -> Vec<f64> {
            events(world)
                .iter()
                .filter_map(|event| match &event.input {
                    Input::Reading(reading) => match reading.source {
                        Source::Reference(_) => Some(reading.value),
                        _ => None,
                    },
                    _ => None,
                })
                .collect()
        };
        let (stuck, sound) = (values(&world), values(&self::world()));
        assert_eq!(stuck[..73], sound[..73]);
        assert!(stuck[73..].iter().all(|value| close(*value, sound[72])));
    }
}
