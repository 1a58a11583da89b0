//! A new configuration takes effect: who listens to whom, who keeps its state, who starts anew.

use super::agenda::Agenda;
use super::orders::OrderBook;
use super::pulse::Pulse;
use super::quarantine::Quarantines;
use super::reference::Reference;
use super::{Fleet, trust};
use crate::channel::Channel;
use crate::event::{Source, Subject};
use crate::kept::Kept;
use crate::report::Report;
use crate::setup::{
    ChannelId, ChannelSetup, InfluenceId, InfluenceSetup, ReferenceId, ReferenceKind,
    ReferenceSetup, Setup, WindowLength,
};
use crate::time::{Duration, Timestamp};
use crate::track::Track;
use serde::{Deserialize, Serialize};
use std::collections::{BTreeMap, BTreeSet};

/// Removed channels whose last issue number is remembered. Beyond that the first by name are
/// forgotten, and would count from one again.
const MOST_RETIRED: usize = 10_000;

/// A reference value may become known this much later than its instant (a laboratory's day) and
/// still find the indications in memory, as far as the memory's size allows.
const REFERENCE_DELAY: Duration = Duration::from_seconds(86_400);

const DAY: Duration = Duration::from_seconds(86_400);
const YEAR: Duration = Duration::from_seconds(366 * 86_400);

/// Who listens to whom, derived from the configuration.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Routes {
    /// By channel: the channels whose group it belongs to.
    group_users: Vec<Vec<usize>>,
    /// By reference: the channels judged against it.
    reference_users: Vec<Vec<usize>>,
    /// By source of an influence quantity: the channels that it acts on.
    influence_users: Vec<Vec<usize>>,
    /// By channel: how long its indications are kept.
    indication_memory: Vec<Duration>,
    /// By reference: how long its values are kept.
    reference_memory: Vec<Duration>,
    /// By source of an influence quantity: how long its values are kept.
    influence_memory: Vec<Duration>,
    /// By reference: whether its channels judge it before they take its values, and how long their
    /// votes may then lie apart.
    watched: Vec<Option<Duration>>,
    /// The shortest silence that any alarm asks about.
    pub(super) quiet_after: Option<Duration>,
    /// The longest time that anything here looks back on, at least a day: a recording's time leaps
    /// if it is further ahead of now than this.
    pub(super) reach: Duration,
    /// Whether more than one thing is expected to report.
    pub(super) several_sources: bool,
}

impl Routes {
    pub(super) fn of(setup: &Setup) -> Self {
        let mut routes = Self {
            group_users: vec![Vec::new(); setup.channels.len()],
            reference_users: vec![Vec::new(); setup.references.len()],
            influence_users: vec![Vec::new(); setup.influences.len()],
            indication_memory: vec![Duration::ZERO; setup.channels.len()],
            reference_memory: vec![Duration::ZERO; setup.references.len()],
            influence_memory: vec![Duration::ZERO; setup.influences.len()],
            watched: Vec::new(),
            quiet_after: None,
            reach: reach(setup),
            several_sources: false,
        };
        for (index, channel) in setup.channels.iter().enumerate() {
            let id = channel.reference.0 as usize;
            let reference = &setup.references[id];
            routes.reference_users[id].push(index);
            let memory = memory(channel, reference);
            let own = &mut routes.indication_memory[index];
            *own = memory.max(*own);
            let shared = &mut routes.reference_memory[id];
            *shared = memory.max(*shared);
            match &reference.kind {
                ReferenceKind::Group { members } => {
                    for member in members.iter().filter(|member| member.0 as usize != index) {
                        let member = member.0 as usize;
                        routes.group_users[member].push(index);
                        let kept = &mut routes.indication_memory[member];
                        *kept = memory.max(*kept);
                    }
                }
                ReferenceKind::Checks { points } => {
                    for point in points {
                        routes.reference_users[point.0 as usize].push(index);
                    }
                }
                ReferenceKind::Measured | ReferenceKind::Constant { .. } => {}
            }
            for influence in &channel.influences {
                let source = influence.source.0 as usize;
                routes.influence_users[source].push(index);
                let kept = &mut routes.influence_memory[source];
                *kept = influence_memory(memory, channel).max(*kept);
            }
        }
        routes.watched = (0..setup.references.len())
            .map(|index| {
                let users = &routes.reference_users[index];
                trust::is_watched(setup, index, users).then(|| trust::patience(setup, users))
            })
            .collect();
        let gaps = setup.channels.iter().filter_map(|c| c.alarms.gap_after);
        let ages = setup.references.iter().filter_map(|r| r.stale_after);
        routes.quiet_after = gaps.chain(ages).min();
        let measured = setup
            .references
            .iter()
            .filter(|reference| reference.kind == ReferenceKind::Measured);
        routes.several_sources =
            setup.channels.len() + measured.count() + setup.influences.len() > 1;
        routes
    }

    /// Whether the reference of this position is judged by its channels.
    pub(super) fn is_watched(&self, reference: usize) -> bool {
        self.watched[reference].is_some()
    }

    /// How long the votes about it may lie apart.
    pub(super) fn patience(&self, reference: usize) -> Duration {
        self.watched[reference].unwrap_or(Duration::ZERO)
    }

    pub(super) fn group_users(&self, id: ChannelId) -> &[usize] {
        &self.group_users[id.0 as usize]
    }

    pub(super) fn reference_users(&self, id: ReferenceId) -> &[usize] {
        &self.reference_users[id.0 as usize]
    }

    pub(super) fn influence_users(&self, id: InfluenceId) -> &[usize] {
        &self.influence_users[id.0 as usize]
    }

    pub(super) fn trim_indications(&self, id: ChannelId, track: &mut Track) {
        trim(track, self.indication_memory[id.0 as usize]);
    }

    pub(super) fn trim_references(&self, id: ReferenceId, track: &mut Track) {
        trim(track, self.reference_memory[id.0 as usize]);
    }

    pub(super) fn trim_influences(&self, id: InfluenceId, track: &mut Track) {
        trim(track, self.influence_memory[id.0 as usize]);
    }
}

fn trim(track: &mut Track, memory: Duration) {
    if let Some(newest) = track.newest() {
        track.forget_before(newest.minus(memory));
    }
}

/// See [`Routes::reach`]. A window in pairs may hold yearly ones.
fn reach(setup: &Setup) -> Duration {
    let channels = setup.channels.iter().flat_map(|channel| {
        let window = match channel.fit.window {
            WindowLength::Time(length) => length,
            WindowLength::Pairs(_) => YEAR,
        };
        let gap = channel.alarms.gap_after.unwrap_or(Duration::ZERO);
        [window, channel.lateness, channel.max_gap, gap]
    });
    let references = setup.references.iter().flat_map(|reference| {
        let age = reference.stale_after.unwrap_or(Duration::ZERO);
        [age, reference.stands_for]
    });
    channels.chain(references).fold(DAY, Duration::max)
}

/// How long readings are kept: for duplicates and stragglers at least `lateness`; to serve
/// reference values, also the interval that one stands for, the widest gap to interpolate across,
/// and the reference's own delay.
fn memory(channel: &ChannelSetup, reference: &ReferenceSetup) -> Duration {
    let parts = [
        channel.lateness.0,
        channel.lag.0.saturating_abs(),
        channel.max_gap.0.saturating_mul(2),
        reference.stands_for.0.saturating_mul(2),
        REFERENCE_DELAY.0,
    ];
    match reference.kind {
        ReferenceKind::Constant { .. } | ReferenceKind::Checks { .. } => channel.lateness,
        ReferenceKind::Measured | ReferenceKind::Group { .. } => {
            Duration(parts.into_iter().fold(0, i64::saturating_add))
        }
    }
}

/// How long values of an influence quantity are kept: pairs come about as late as `memory` says,
/// and then look at the values beside their instant.
fn influence_memory(memory: Duration, channel: &ChannelSetup) -> Duration {
    let parts = [channel.lag.0.saturating_abs(), channel.lateness.0];
    let beside = channel.max_gap.0.saturating_mul(2);
    Duration(
        parts
            .into_iter()
            .chain([beside])
            .fold(memory.0, i64::saturating_add),
    )
}

impl Fleet {
    /// Takes a configuration. Channels for which pairs and rows mean the same as before keep their
    /// state, by name, and go on under whatever else was edited (limits, uncertainties, delays,
    /// certificates …); the others start anew. Everything said here bears the positions of the
    /// configuration that is replaced.
    pub(crate) fn adopt(&mut self, setup: &Setup, report: &mut Report<'_>) {
        self.settle_references(report);
        let mut old = std::mem::take(self);
        let same_clock = old.setup.clock == setup.clock;
        let mut taken = vec![false; old.channels.len()];
        let mut channels = Vec::with_capacity(setup.channels.len());
        let mut indications = Vec::with_capacity(setup.channels.len());
        for channel in &setup.channels {
            let before = old
                .setup
                .channels
                .iter()
                .position(|c| c.name == channel.name);
            let kept = before.filter(|&index| {
                same_clock && same_channel(&old.setup, &old.setup.channels[index], setup, channel)
            });
            if let Some(index) = before {
                old.tell_monitoring(index, channel, report);
            }
            if let Some(index) = kept {
                taken[index] = true;
                old.edit_channel(index, setup, channel, report);
                channels.push(Kept::new(Channel::clone(&old.channels[index])));
                indications.push(Kept::new(Track::clone(&old.indications[index])));
            } else {
                channels.push(Kept::new(old.begin_anew(before, channel)));
                indications.push(Kept::default());
            }
        }
        let (references, taken_references) = old.carry_references(setup, same_clock, report);
        let influences = setup.influences.iter().map(|influence| {
            let mut before = old.setup.influences.iter();
            let kept = before.position(|before| same_clock && before == influence);
            kept.map_or_else(Kept::default, |index| {
                Kept::new(Track::clone(&old.influences[index]))
            })
        });
        *self = Self {
            influences: influences.collect(),
            references,
            routes: Routes::of(setup),
            setup: Kept::new(setup.clone()),
            now: old.now.filter(|_| same_clock),
            pulse: if same_clock {
                old.pulse.clone()
            } else {
                Pulse::default()
            },
            indications,
            channels,
            retired: old.retire(setup),
            agenda: Agenda::default(),
            orders: Kept::new(OrderBook::clone(&old.orders)),
            quarantines: Kept::new(Quarantines::clone(&old.quarantines)),
            heard: BTreeSet::new(),
        };
        report.leaps.settle();
        self.schedule_all();
        old.dismiss_channels(&taken, report);
        old.dismiss_references(&taken_references, report);
        let now = self.now.unwrap_or(Timestamp(0));
        self.pulse.edit(&self.routes, now, report);
        self.move_quarantines(&old.setup);
        let new_place = |subject| self.moved(&old.setup, subject);
        report.counters.renumber(new_place);
        report.notices.renumber(new_place);
    }

    /// The references of a new configuration, with the state of those that mean the same as before;
    /// and which of the old ones those are.
    fn carry_references(
        &mut self,
        setup: &Setup,
        same_clock: bool,
        report: &mut Report<'_>,
    ) -> (Vec<Kept<Reference>>, Vec<bool>) {
        let mut references = Vec::with_capacity(setup.references.len());
        let mut taken_references = vec![false; self.references.len()];
        for reference in &setup.references {
            let kept = self.setup.references.iter().position(|before| {
                same_clock && same_reference(&self.setup, before, setup, reference)
            });
            references.push(kept.map_or_else(Kept::default, |index| {
                taken_references[index] = true;
                self.edit_reference(index, setup, reference, report);
                Kept::new(Reference::clone(&self.references[index]))
            }));
        }
        (references, taken_references)
    }

    /// A channel that begins, with what stays of the one of its name, which stands at `before`.
    fn begin_anew(&self, before: Option<usize>, after: &ChannelSetup) -> Channel {
        if let Some(index) = before {
            let same_unit = self.setup.channels[index].unit == after.unit;
            return self.channels[index].anew(after, same_unit);
        }
        let issued = self.retired.get(&after.name).copied().unwrap_or(0);
        Channel::new(after, issued)
    }

    /// The numbers to go on from of channels that are not in the new configuration.
    fn retire(&self, new: &Setup) -> BTreeMap<String, u64> {
        let mut retired = self.retired.clone();
        for (setup, channel) in self.setup.channels.iter().zip(&self.channels) {
            if channel.issued() > 0 {
                retired.insert(setup.name.clone(), channel.issued());
            }
        }
        for channel in &new.channels {
            retired.remove(&channel.name);
        }
        while retired.len() > MOST_RETIRED {
            retired.pop_first();
        }
        retired
    }

    /// Says that a channel's corrections may be published from now on, or no longer: whoever takes
    /// a safety or legal measurement out of protection must be able to find out when.
    fn tell_monitoring(&self, index: usize, after: &ChannelSetup, report: &mut Report<'_>) {
        if self.setup.channels[index].monitor_only == after.monitor_only {
            return;
        }
        let id = ChannelId::at(index);
        let now = self.now.unwrap_or(Timestamp(0));
        let (code, text) = if after.monitor_only {
            ("monitor-only-on", "no correction is published any more")
        } else {
            (
                "monitor-only-off",
                "monitor_only was taken away: corrections are published from now on; whoever did \
                 not mean that must put it back",
            )
        };
        report.notice(now, Subject::Channel(id), code, || {
            format!("{}: {text}", after.name)
        });
    }

    /// Prepares a channel that stays for its edited setup.
    fn edit_channel(
        &mut self,
        index: usize,
        new: &Setup,
        after: &ChannelSetup,
        report: &mut Report<'_>,
    ) {
        let before = &self.setup.channels[index];
        let reference_before = &self.setup.references[before.reference.0 as usize];
        let reference_after = &new.references[after.reference.0 as usize];
        let placed = placed(before, after);
        let reference_placed = ReferenceSetup {
            kind: reference_after.kind.clone(),
            ..reference_before.clone()
        };
        if placed == *after && reference_placed == *reference_after {
            return;
        }
        let id = ChannelId::at(index);
        let now = self.now.unwrap_or(Timestamp(0));
        self.channels[index].edit(id, after, now, report);
    }

    /// Withdraws the corrections and clears the alarms of channels that do not stay.
    fn dismiss_channels(&self, stay: &[bool], report: &mut Report<'_>) {
        let now = self.now.unwrap_or(Timestamp(0));
        let channels = (0..).zip(&self.channels).zip(&self.setup.channels);
        for ((id, channel), setup) in channels.filter(|((id, _), _)| !stay[*id as usize]) {
            let why = "the channel was removed or its configuration changed";
            channel.dismiss(ChannelId(id), setup, now, why, report);
        }
    }

    /// Where a subject of the old configuration stands now.
    pub(super) fn moved(&self, old: &Setup, subject: Subject) -> Option<Subject> {
        match subject {
            Subject::Node => Some(Subject::Node),
            Subject::Channel(id) => {
                let name = &old.channels.get(id.0 as usize)?.name;
                let place = self.setup.channels.iter().position(|c| c.name == *name)?;
                Some(Subject::Channel(ChannelId(u32::try_from(place).ok()?)))
            }
            Subject::Reference(id) => {
                let name = &old.references.get(id.0 as usize)?.name;
                let place = self.setup.references.iter().position(|r| r.name == *name)?;
                Some(Subject::Reference(ReferenceId(u32::try_from(place).ok()?)))
            }
            Subject::Influence(id) => {
                let before = old.influences.get(id.0 as usize)?;
                let place = self.setup.influences.iter().position(|it| it == before)?;
                Some(Subject::Influence(InfluenceId(u32::try_from(place).ok()?)))
            }
        }
    }

    /// Whether the rows of a source can serve a channel.
    pub(super) fn concerns(&self, source: Source, channel: ChannelId) -> bool {
        let Some(setup) = self.setup.channels.get(channel.0 as usize) else {
            return false;
        };
        match source {
            Source::Indication(id) => {
                id == channel
                    || matches!(
                        &self.setup.references[setup.reference.0 as usize].kind,
                        ReferenceKind::Group { members } if members.contains(&id)
                    )
            }
            Source::Reference(id) => id == setup.reference,
            Source::Influence(id) => setup.influences.iter().any(|it| it.source == id),
        }
    }
}

/// Whether the rows of a channel mean the same in both configurations, wherever it and its
/// reference stand in the lists: what was fitted goes on being true. Limits, uncertainties,
/// screening, delays and the like only say what is made of it from now on.
fn same_channel(old: &Setup, before: &ChannelSetup, new: &Setup, after: &ChannelSetup) -> bool {
    before.name == after.name
        && before.unit == after.unit
        && before.lag == after.lag
        && before.fit.has_same_rows(&after.fit)
        && influence_sources(old, before).eq(influence_sources(new, after))
        && same_reference(
            old,
            &old.references[before.reference.0 as usize],
            new,
            &new.references[after.reference.0 as usize],
        )
}

/// Whether the values of a reference mean the same in both configurations, its group members
/// compared by name.
fn same_reference(
    old: &Setup,
    before: &ReferenceSetup,
    new: &Setup,
    after: &ReferenceSetup,
) -> bool {
    let same_kind = match (&before.kind, &after.kind) {
        (ReferenceKind::Group { members: a }, ReferenceKind::Group { members: b }) => {
            names(old, a).eq(names(new, b))
        }
        (ReferenceKind::Checks { points: a }, ReferenceKind::Checks { points: b }) => {
            a.len() == b.len()
                && a.iter().zip(b).all(|(a, b)| {
                    let (a, b) = (a.0 as usize, b.0 as usize);
                    same_reference(old, &old.references[a], new, &new.references[b])
                })
        }
        (before, after) => before == after,
    };
    same_kind
        && before.name == after.name
        && before.stands_for == after.stands_for
        && before.stamped == after.stamped
}

/// Where a channel's influence quantities come from, in order.
fn influence_sources<'a>(
    setup: &'a Setup,
    channel: &'a ChannelSetup,
) -> impl Iterator<Item = &'a InfluenceSetup> {
    let sources = channel.influences.iter();
    sources.map(|influence| &setup.influences[influence.source.0 as usize])
}

/// The channel as it was, its reference and its influence quantities at their new places.
fn placed(before: &ChannelSetup, after: &ChannelSetup) -> ChannelSetup {
    ChannelSetup {
        reference: after.reference,
        influences: after.influences.clone(),
        ..before.clone()
    }
}

fn names<'a>(setup: &'a Setup, members: &'a [ChannelId]) -> impl Iterator<Item = &'a str> {
    members
        .iter()
        .map(|member| setup.channels[member.0 as usize].name.as_str())
}
