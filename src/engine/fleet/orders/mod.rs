//! Orders: what people tell the node. Each is answered: done, or refused with everything that
//! speaks against it and the way out. A refused order changes nothing, but that like any input it
//! may show that the clock was wrong (see `leap`).

mod book;
mod quarantine;
mod wording;

use super::Fleet;
use super::door::{CLOCKS_DIFFER, LARGEST};
use crate::channel::{Effect, Service};
use crate::event::{
    About, CheckPoint, Order, OrderAnswer, Output, Problem, ServiceEvent, Serviced, Wish,
};
use crate::report::Report;
use crate::setup::{ChannelId, Clock, ReferenceId};
use crate::time::Timestamp;
use book::Known;
pub(super) use book::OrderBook;

/// So many configured names are shown to whoever got one wrong.
const NAMES_SHOWN: usize = 8;

impl Fleet {
    /// Does what an order says, or refuses it, and answers.
    pub(crate) fn take_order(&mut self, order: &Order, report: &mut Report<'_>) {
        if let Wish::Unusable(problems) = &order.wish {
            return self.refuse_order(order, problems.clone(), report);
        }
        match self.orders.look_up(order) {
            Known::Done(answer) => return report.say(Output::Answer(answer)),
            Known::Taken(problem) => return self.refuse_order(order, vec![problem], report),
            Known::New => {}
        }
        if self.clock() == Clock::Live {
            self.watch_clock(order.received, report);
        }
        let now = self.order_time(order);
        match &order.wish {
            Wish::Service(event) => self.take_service(order, event, now, report),
            Wish::Quarantine(quarantine) => self.quarantine(order, quarantine, now, report),
            Wish::Release(release) => self.release(order, release, now, report),
            Wish::Unusable(_) => {}
        }
    }

    fn take_service(
        &mut self,
        order: &Order,
        event: &ServiceEvent,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        // Where only the order's own arrival tells the time, it was done at the newest known time:
        // a recording is played at another.
        let performed = event.at.unwrap_or(now);
        let service = Service {
            order: &order.id,
            event,
            performed,
        };
        let target = match self.check_order(service, now) {
            Ok(target) => target,
            Err(problems) => return self.refuse_order(order, problems, report),
        };
        self.advance_to(now);
        let serviced = match target {
            Target::Channel(id) => self.serve_channel(id, service, report),
            Target::Reference(id) => self.serve_reference(id, service, report),
        };
        let answer = OrderAnswer {
            at: now,
            id: order.id.clone(),
            reply_to: order.reply_to.clone(),
            accepted: true,
            text: wording::done(&serviced, self.unit_of(target)),
            problems: Vec::new(),
            service: Some(serviced),
            quarantine: None,
        };
        self.orders.note(&order.wish, &answer);
        report.say(Output::Answer(Box::new(answer)));
        self.pass_time(report);
    }

    /// What now is once the order has been taken. It does not move a recording's time.
    fn order_time(&self, order: &Order) -> Timestamp {
        match self.setup.clock {
            Clock::Live => self.notice_time(order.received),
            Clock::Readings => self.now.unwrap_or(order.received),
        }
    }

    fn refuse_order(&self, order: &Order, problems: Vec<Problem>, report: &mut Report<'_>) {
        report.say(Output::Answer(Box::new(OrderAnswer {
            at: self.order_time(order),
            id: order.id.clone(),
            reply_to: order.reply_to.clone(),
            accepted: false,
            text: wording::refused(&problems),
            problems,
            service: None,
            quarantine: None,
        })));
    }

    /// Whom a service event concerns, or everything that speaks against it.
    fn check_order(&self, service: Service<'_>, now: Timestamp) -> Result<Target, Vec<Problem>> {
        let event = service.event;
        if self.setup.clock == Clock::Readings && self.now.is_none() {
            // Its own arrival is no instant of the recording, and nothing can be checked by it.
            let way_out = "no reading has come yet, so that a recording's time is not known; tell \
                           it again once readings flow";
            return Err(vec![problem("at", "", way_out)]);
        }
        let mut problems = Vec::new();
        if service.order.is_empty() {
            problems.push(problem(
                "id",
                "",
                "missing; any text that no other order bears",
            ));
        }
        let target = match self.find(&event.about) {
            Ok(target) => Some(target),
            Err(problem) => {
                problems.push(problem);
                None
            }
        };
        problems.extend(self.check_time(service.performed, now));
        for (name, points) in [("as_found", &event.as_found), ("as_left", &event.as_left)] {
            problems.extend(check_points(name, points));
        }
        if let Some(Target::Reference(_)) = target {
            problems.extend(what_a_reference_has_not(event));
        }
        if let Some(Target::Channel(id)) = target {
            let index = id.0 as usize;
            let setup = &self.setup.channels[index];
            problems.extend(self.channels[index].check_service(service, setup, now));
        }
        match target {
            Some(target) if problems.is_empty() => Ok(target),
            _ => Err(problems),
        }
    }

    fn find(&self, about: &About) -> Result<Target, Problem> {
        let (channels, references) = (&self.setup.channels, &self.setup.references);
        let (field, other, known, found) = match about {
            About::Channel(name) => (
                "channel",
                references.iter().any(|known| known.name == *name),
                names(channels.iter().map(|known| &known.name)),
                position(channels.iter().map(|known| &known.name), name)
                    .map(|place| Target::Channel(ChannelId(place))),
            ),
            About::Reference(name) => (
                "reference",
                channels.iter().any(|known| known.name == *name),
                names(references.iter().map(|known| &known.name)),
                position(references.iter().map(|known| &known.name), name)
                    .map(|place| Target::Reference(ReferenceId(place))),
            ),
            About::Influence(name) => {
                let way_out = "an influence quantity is not served; name a channel or a reference";
                return Err(problem("influence", name, way_out));
            }
        };
        found.ok_or_else(|| {
            let way_out = if other {
                let kind = if field == "channel" {
                    "reference"
                } else {
                    "channel"
                };
                format!("that is the name of a {kind}; write `{kind}`")
            } else {
                format!("no {field} of this node bears this name; there are {known}")
            };
            problem(field, about.name(), &way_out)
        })
    }

    /// A time ahead of now is a wrong clock or a wrong date. (A recording's now is its newest
    /// reading, and what people tell may come before the next.)
    fn check_time(&self, performed: Timestamp, now: Timestamp) -> Option<Problem> {
        let ahead = match self.setup.clock {
            Clock::Live => CLOCKS_DIFFER,
            Clock::Readings => self.routes.reach,
        };
        let way_out = if performed.0 < 0 {
            "before 1970; check the date"
        } else if performed.since(now) > ahead {
            "in the future; tell a service when it has been done, and check date and time zone"
        } else {
            return None;
        };
        Some(problem("at", &performed.to_string(), way_out))
    }

    fn serve_channel(
        &mut self,
        id: ChannelId,
        service: Service<'_>,
        report: &mut Report<'_>,
    ) -> Serviced {
        let mut effect = Effect::default();
        self.visit(id.0 as usize, |channel, scene| {
            effect = channel.serve(service, scene, report);
        });
        let name = service.event.about.name().to_owned();
        Serviced {
            stretches: effect
                .stretch
                .map(|stretch| (name, stretch))
                .into_iter()
                .collect(),
            comparison: effect.comparison,
            fouling: effect.fouling,
            saw_tooth: effect.saw_tooth,
            ..bare(service)
        }
    }

    /// A reference that was served is another one: the stretches of its channels end, and what
    /// spoke against it is forgotten.
    fn serve_reference(
        &mut self,
        id: ReferenceId,
        service: Service<'_>,
        report: &mut Report<'_>,
    ) -> Serviced {
        self.trust_reference(id, report);
        let mut stretches = Vec::new();
        for user in self.routes.reference_users(id).to_vec() {
            let mut stretch = None;
            self.visit(user, |channel, scene| {
                stretch = channel.serve_reference(service, scene, report);
            });
            let name = self.setup.channels[user].name.clone();
            stretches.extend(stretch.map(|stretch| (name, stretch)));
        }
        Serviced {
            stretches,
            ..bare(service)
        }
    }

    fn unit_of(&self, target: Target) -> &str {
        match target {
            Target::Channel(id) => &self.setup.channels[id.0 as usize].unit,
            Target::Reference(_) => "",
        }
    }
}

/// Whom a service event concerns.
#[derive(Clone, Copy)]
enum Target {
    Channel(ChannelId),
    Reference(ReferenceId),
}

/// What is known of a service before it has had any effect.
fn bare(service: Service<'_>) -> Serviced {
    Serviced {
        about: service.event.about.clone(),
        act: service.event.act,
        performed: service.performed,
        stretches: Vec::new(),
        comparison: None,
        fouling: None,
        saw_tooth: None,
    }
}

fn problem(field: &str, value: &str, way_out: &str) -> Problem {
    Problem {
        field: field.to_owned(),
        value: value.to_owned(),
        way_out: way_out.to_owned(),
    }
}

fn position<'a>(mut names: impl Iterator<Item = &'a String>, wanted: &str) -> Option<u32> {
    let place = names.position(|name| name == wanted)?;
    u32::try_from(place).ok()
}

/// Configured names for people, the first few of many.
fn names<'a>(names: impl ExactSizeIterator<Item = &'a String>) -> String {
    let more = names.len().saturating_sub(NAMES_SHOWN);
    let mut list: Vec<&str> = names.take(NAMES_SHOWN).map(String::as_str).collect();
    let rest = format!("{more} more");
    match (list.is_empty(), more) {
        (true, _) => list.push("none"),
        (false, 0) => {}
        (false, _) => list.push(&rest),
    }
    list.join(", ")
}

/// Readings and serial numbers are a sensor's: told of a reference they would be lost.
fn what_a_reference_has_not(event: &ServiceEvent) -> Vec<Problem> {
    let told = [
        ("as_found", !event.as_found.is_empty()),
        ("as_left", !event.as_left.is_empty()),
        ("serial", event.serial.is_some()),
    ];
    let told = told.into_iter().filter(|(_, is_told)| *is_told);
    told.map(|(field, _)| problem(field, "", "said of a sensor only; name the channel"))
        .collect()
}

/// Readings must be numbers that can be computed with.
fn check_points(name: &str, points: &[CheckPoint]) -> Vec<Problem> {
    let fits = |number: f64| number.is_finite() && number.abs() <= LARGEST;
    let mut problems = Vec::new();
    for (index, point) in points.iter().enumerate() {
        let expanded = point.expanded_uncertainty.unwrap_or(0.0);
        for (part, number, good) in [
            ("indication", point.indication, fits(point.indication)),
            ("reference", point.reference, fits(point.reference)),
            ("uncertainty", expanded, fits(expanded) && expanded >= 0.0),
        ] {
            if !good {
                let field = format!("{name}[{index}].{part}");
                problems.push(problem(&field, &number.to_string(), "no usable number"));
            }
        }
    }
    problems
}
