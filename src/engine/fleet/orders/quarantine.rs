//! Quarantines and their release, as orders.

use super::{Fleet, NAMES_SHOWN, Target, names, problem};
use crate::event::{
    About, Interval, Order, OrderAnswer, Output, Problem, Quarantine, Quarantined, Release, Source,
};
use crate::fleet::quarantine::Standing;
use crate::report::Report;
use crate::setup::{Clock, InfluenceId};
use crate::time::Timestamp;

impl Fleet {
    /// Begins a quarantine, or refuses it.
    pub(super) fn quarantine(
        &mut self,
        order: &Order,
        wish: &Quarantine,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        let source = match self.check_quarantine(order, wish, now) {
            Ok(source) => source,
            Err(problems) => return self.refuse_order(order, problems, report),
        };
        let before = self.quarantines.all();
        let standing = Standing {
            id: order.id.clone(),
            source,
            interval: wish.interval,
        };
        let reach = self.routes.reach;
        if !self
            .quarantines
            .add(standing, now.minus(reach).minus(reach))
        {
            let way_out = "as many quarantines stand as can be remembered; release some of them";
            return self.refuse_order(order, vec![problem("", "", way_out)], report);
        }
        self.advance_to(now);
        let refitted = self.refit_for(&order.id, (source, wish.interval), &before, report);
        let what = Quarantined {
            quarantine: order.id.clone(),
            about: wish.about.clone(),
            interval: wish.interval,
            released: false,
            channels: self.names_of(&self.resting_on(source)),
            refitted: self.names_of(&refitted),
        };
        self.answer_quarantine(order, what, now, report);
    }

    /// Takes a quarantine back, or refuses that.
    pub(super) fn release(
        &mut self,
        order: &Order,
        wish: &Release,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        let before = self.quarantines.all();
        if let Some(problem) = missing_id(order) {
            return self.refuse_order(order, vec![problem], report);
        }
        let Some(ended) = self.quarantines.take(&wish.quarantine) else {
            let known = names(self.quarantines.ids());
            let way_out = format!("no quarantine of this id stands; there are {known}");
            let unknown = problem("quarantine", &wish.quarantine, &way_out);
            return self.refuse_order(order, vec![unknown], report);
        };
        self.advance_to(now);
        let refitted = self.refit_for(&order.id, (ended.source, ended.interval), &before, report);
        let what = Quarantined {
            quarantine: ended.id,
            about: self.about(ended.source),
            interval: ended.interval,
            released: true,
            channels: self.names_of(&self.resting_on(ended.source)),
            refitted: self.names_of(&refitted),
        };
        self.answer_quarantine(order, what, now, report);
    }

    fn answer_quarantine(
        &mut self,
        order: &Order,
        what: Quarantined,
        now: Timestamp,
        report: &mut Report<'_>,
    ) {
        let answer = OrderAnswer {
            at: now,
            id: order.id.clone(),
            reply_to: order.reply_to.clone(),
            accepted: true,
            text: in_words(&what),
            problems: Vec::new(),
            service: None,
            quarantine: Some(what),
        };
        self.orders.note(&order.wish, &answer);
        report.say(Output::Answer(Box::new(answer)));
        self.pass_time(report);
    }

    /// Whose values are quarantined, or everything that speaks against it.
    fn check_quarantine(
        &self,
        order: &Order,
        wish: &Quarantine,
        now: Timestamp,
    ) -> Result<Source, Vec<Problem>> {
        if self.setup.clock == Clock::Readings && self.now.is_none() {
            let way_out = "no reading has come yet, so that a recording's time is not known; tell \
                           it again once readings flow";
            return Err(vec![problem("from", "", way_out)]);
        }
        let mut problems = Vec::from_iter(missing_id(order));
        let source = self.find_source(&wish.about);
        let Interval { from, to } = wish.interval;
        problems.extend(self.check_time(from, now).map(|found| Problem {
            field: "from".to_owned(),
            ..found
        }));
        if let Some(to) = to.filter(|to| *to <= from) {
            let way_out = "not after `from`; leave it out if the end is not known yet";
            problems.push(problem("to", &to.to_string(), way_out));
        }
        match source {
            Ok(source) if problems.is_empty() => Ok(source),
            Ok(_) => Err(problems),
            Err(unknown) => {
                problems.push(unknown);
                Err(problems)
            }
        }
    }

    fn find_source(&self, about: &About) -> Result<Source, Problem> {
        let About::Influence(name) = about else {
            return self.find(about).map(|target| match target {
                Target::Channel(id) => Source::Indication(id),
                Target::Reference(id) => Source::Reference(id),
            });
        };
        let bears = |id: u32| {
            let id = InfluenceId(id);
            let uses = self.setup.channels.iter().flat_map(|it| &it.influences);
            self.setup.influences[id.0 as usize].name == *name
                || uses.clone().any(|it| it.source == id && it.name == *name)
        };
        let mut found = (0..)
            .take(self.setup.influences.len())
            .filter(|&id| bears(id));
        match (found.next(), found.next()) {
            (Some(id), None) => Ok(Source::Influence(InfluenceId(id))),
            (Some(_), Some(_)) => {
                let known = names(self.setup.influences.iter().map(|it| &it.name));
                let way_out = format!("several bear this name; name one by its place: {known}");
                Err(problem("influence", name, &way_out))
            }
            (None, _) => {
                let known = names(self.setup.influences.iter().map(|it| &it.name));
                let way_out = format!("no influence quantity bears this name; there are {known}");
                Err(problem("influence", name, &way_out))
            }
        }
    }

    fn about(&self, source: Source) -> About {
        match source {
            Source::Indication(id) => {
                About::Channel(self.setup.channels[id.0 as usize].name.clone())
            }
            Source::Reference(id) => {
                About::Reference(self.setup.references[id.0 as usize].name.clone())
            }
            Source::Influence(id) => {
                About::Influence(self.setup.influences[id.0 as usize].name.clone())
            }
        }
    }

    fn names_of(&self, channels: &[usize]) -> Vec<String> {
        let name = |&index: &usize| self.setup.channels[index].name.clone();
        channels.iter().map(name).collect()
    }
}

fn missing_id(order: &Order) -> Option<Problem> {
    let way_out = "missing; any text that no other order bears";
    order.id.is_empty().then(|| problem("id", "", way_out))
}

fn in_words(what: &Quarantined) -> String {
    let Interval { from, to } = what.interval;
    let until = to.map_or_else(|| "until released".to_owned(), |to| format!("until {to}"));
    let done = if what.released {
        "counts again"
    } else {
        "is quarantined"
    };
    let refitted = match what.refitted.len() {
        0 => "no present fit holds anything of it".to_owned(),
        1..=NAMES_SHOWN => format!(
            "fitted anew from the record, holding until then: {}",
            what.refitted.join(", ")
        ),
        many => format!("{many} channels are fitted anew from the record and hold until then"),
    };
    format!(
        "{} {done} from {from} {until}; {refitted}.",
        what.about.name()
    )
}
