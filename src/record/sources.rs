//! Sources under numbers that stay the same whatever is configured: the positions in a
//! configuration mean other channels after an edit, these do not.

use holdtrue_engine::event::Source;
use holdtrue_engine::setup::{ChannelId, InfluenceId, ReferenceId, Setup};
use std::collections::BTreeMap;

/// Who a source is, in whatever configuration. A channel that is told in another unit is another
/// source: its numbers mean something else.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct SourceName {
    /// `indication`, `reference` or `influence`.
    pub kind: String,
    /// Name of the channel, the reference or the influence quantity's place.
    pub name: String,
    /// Unit of a channel's indications; else empty.
    pub unit: String,
}

/// The numbers that were given, and the configuration in force.
#[derive(Clone, Debug, Default)]
pub(super) struct SourceBook {
    numbers: BTreeMap<SourceName, i64>,
    /// In order of their numbers, from 1.
    names: Vec<SourceName>,
    /// By position in the configuration in force.
    indications: Vec<i64>,
    references: Vec<i64>,
    influences: Vec<i64>,
}

impl SourceBook {
    /// Restores a source that the record knows. Numbers are told in order.
    pub(super) fn restore(&mut self, number: i64, name: SourceName) -> bool {
        if number != self.next() {
            return false;
        }
        self.numbers.insert(name.clone(), number);
        self.names.push(name);
        true
    }

    /// Number of the next new source.
    pub(super) fn next(&self) -> i64 {
        i64::try_from(self.names.len()).unwrap_or(i64::MAX - 1) + 1
    }

    /// Names with numbers from `first` on.
    pub(super) fn since(&self, first: i64) -> impl Iterator<Item = (i64, &SourceName)> {
        (1..)
            .zip(&self.names)
            .skip_while(move |(number, _)| *number < first)
    }

    /// A configuration is in force from here on; its sources get numbers.
    pub(super) fn adopt(&mut self, setup: &Setup) {
        self.indications = (0..setup.channels.len())
            .map(|index| self.number(name_of(Source::Indication(ChannelId::at(index)), setup)))
            .collect();
        self.references = (0..setup.references.len())
            .map(|index| self.number(name_of(Source::Reference(ReferenceId::at(index)), setup)))
            .collect();
        self.influences = (0..)
            .take(setup.influences.len())
            .map(|index| self.number(name_of(Source::Influence(InfluenceId(index)), setup)))
            .collect();
    }

    /// The number of a source of the configuration in force.
    pub(super) fn of(&mut self, source: Source) -> i64 {
        let known = match source {
            Source::Indication(id) => self.indications.get(id.0 as usize),
            Source::Reference(id) => self.references.get(id.0 as usize),
            Source::Influence(id) => self.influences.get(id.0 as usize),
        };
        match known {
            Some(number) => *number,
            // A position that the configuration does not have; the engine refuses it.
            None => self.number(nameless(source)),
        }
    }

    fn number(&mut self, name: SourceName) -> i64 {
        if let Some(number) = self.numbers.get(&name) {
            return *number;
        }
        let number = self.next();
        self.numbers.insert(name.clone(), number);
        self.names.push(name);
        number
    }
}

/// From numbers to the positions of one configuration.
#[derive(Clone, Debug, Default)]
pub(super) struct Positions {
    by_number: Vec<Option<Source>>,
}

impl Positions {
    /// Of `setup`, with the names in order of their numbers.
    pub(super) fn new<'a>(names: impl Iterator<Item = &'a SourceName>, setup: &Setup) -> Self {
        let mut positions: BTreeMap<SourceName, Source> = BTreeMap::new();
        let channels = (0..setup.channels.len()).map(|at| Source::Indication(ChannelId::at(at)));
        let references =
            (0..setup.references.len()).map(|at| Source::Reference(ReferenceId::at(at)));
        let influences = (0..)
            .take(setup.influences.len())
            .map(|at| Source::Influence(InfluenceId(at)));
        for source in channels.chain(references).chain(influences) {
            positions.entry(name_of(source, setup)).or_insert(source);
        }
        Self {
            by_number: names
                .map(|name| positions.get(name).copied().or_else(|| named_nothing(name)))
                .collect(),
        }
    }

    /// The position of the source with this number; `None` if the configuration has no such.
    pub(super) fn of(&self, number: i64) -> Option<Source> {
        let index = usize::try_from(number.checked_sub(1)?).ok()?;
        self.by_number.get(index).copied().flatten()
    }
}

fn name_of(source: Source, setup: &Setup) -> SourceName {
    let (kind, name, unit) = match source {
        Source::Indication(id) => {
            let channel = setup.channels.get(id.0 as usize);
            let named = channel.map(|it| (it.name.clone(), it.unit.clone()));
            let Some((name, unit)) = named else {
                return nameless(source);
            };
            ("indication", name, unit)
        }
        Source::Reference(id) => match setup.references.get(id.0 as usize) {
            Some(reference) => ("reference", reference.name.clone(), String::new()),
            None => return nameless(source),
        },
        Source::Influence(id) => match setup.influences.get(id.0 as usize) {
            Some(influence) => ("influence", influence.name.clone(), String::new()),
            None => return nameless(source),
        },
    };
    SourceName {
        kind: kind.to_owned(),
        name,
        unit,
    }
}

/// A name for a position that no configuration has. No configured name begins with `#`.
fn nameless(source: Source) -> SourceName {
    let (kind, position) = match source {
        Source::Indication(id) => ("indication", id.0),
        Source::Reference(id) => ("reference", id.0),
        Source::Influence(id) => ("influence", id.0),
    };
    SourceName {
        kind: kind.to_owned(),
        name: format!("#{position}"),
        unit: String::new(),
    }
}

fn named_nothing(name: &SourceName) -> Option<Source> {
    let position: u32 = name.name.strip_prefix('#')?.parse().ok()?;
    match name.kind.as_str() {
        "indication" => Some(Source::Indication(ChannelId(position))),
        "reference" => Some(Source::Reference(ReferenceId(position))),
        "influence" => Some(Source::Influence(InfluenceId(position))),
        _ => None,
    }
}
