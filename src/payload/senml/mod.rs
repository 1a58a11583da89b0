//! SenML packs in JSON (RFC 8428), resolved: base fields, relative times, version, records by name.
//!
//! Names are compared, not judged: a record with an odd name is nobody's business but its owner's.
//! A pack is refused as a whole for what makes it unsafe to read on: broken JSON, an unknown label
//! that must be understood, an unknown version, unreadable base fields. Else faults stay with the
//! record, as far as it is wanted.

mod record;

use crate::payload::fault::{Fault, excerpt};
use crate::payload::intake::{Reader, Told};
use crate::payload::json::{self, broken};
use crate::payload::literal;
use crate::payload::tables::{Scalar, SenmlPlace, Status, Target};
use holdtrue_engine::event::RefusedReason;
use holdtrue_engine::time::Timestamp;
use holdtrue_text::decimal::scaled_integer;
use record::{Record, label, nanoseconds};
use std::borrow::Cow;

/// The version of RFC 8428, and the default.
const VERSION: i128 = 10;
/// Version 10 with the one registered feature, secondary units (RFC 9100, from memory); units are
/// text to us.
const VERSION_WITH_SECONDARY_UNITS: i128 = 26;

/// Everything that one topic's packs carry.
#[derive(Clone, Debug, Default)]
pub(crate) struct Pack {
    uses: Vec<(Target, SenmlPlace)>,
}

/// What one wanted record of a pack tells.
pub(crate) struct Heard {
    /// The record's place in the pack.
    pub(crate) record: usize,
    /// Position of the use among those wanted.
    pub(crate) wanted: usize,
    /// The record's time; the received time, if it can't be read.
    at: Option<Timestamp>,
    /// The value, or why there is none.
    pub(crate) told: Result<Told, Fault>,
}

/// Base fields in force.
#[derive(Clone, Debug, Default)]
pub(crate) struct Base<'text> {
    name: Cow<'text, str>,
    /// Nanoseconds.
    time: i128,
    unit: Option<Cow<'text, str>>,
    value: Option<f64>,
    sum: Option<f64>,
}

/// A record with the base fields worked in, as far as that went.
struct Resolved<'text> {
    base_name: Cow<'text, str>,
    name: Cow<'text, str>,
    time: Result<Timestamp, Fault>,
    unit: Option<Cow<'text, str>>,
    base_value: Option<f64>,
    base_sum: Option<f64>,
    record: Record<'text>,
}

impl Pack {
    pub(crate) fn want(&mut self, target: &Target, place: &SenmlPlace) {
        self.uses.push((target.clone(), place.clone()));
    }

    /// Reads all wanted records of one pack, in order of their times.
    pub(super) fn read(&self, reader: &mut Reader<'_>, text: &str) {
        let received = reader.received;
        let mut told = match self.hear(text, &mut Base::default(), Some(received)) {
            Ok(heard) => heard,
            Err(fault) => return reader.refuse_message(fault),
        };
        let missing = (0..self.uses.len())
            .filter(|wanted| told.iter().all(|heard| heard.wanted != *wanted))
            .map(|wanted| {
                let name = &self.uses[wanted].1.name;
                let detail = format!("the pack has no record {name} with a value");
                Heard {
                    record: 0,
                    wanted,
                    at: Some(received),
                    told: Err(Fault::new(RefusedReason::Missing, detail)),
                }
            });
        let missing: Vec<Heard> = missing.collect();
        told.extend(missing);
        // Resolved records are chronological (RFC 8428 section 4.6); the sort is stable, so that of
        // one instant gates come first, then references, then indications.
        told.sort_by_key(|heard| (heard.at.unwrap_or(received), heard.wanted));
        for heard in told {
            reader.tell(&self.uses[heard.wanted].0, heard.told);
        }
    }

    /// What all wanted records of a pack tell, in its order; of a piece of a pack, where `base`
    /// holds the base fields that the pieces before it have left. Without a received time relative
    /// times are refused.
    pub(crate) fn hear(
        &self,
        text: &str,
        base: &mut Base<'static>,
        received: Option<Timestamp>,
    ) -> Result<Vec<Heard>, Fault> {
        let records =
            serde_json::from_str::<Vec<Record<'_>>>(text).map_err(|error| unsound(text, &error))?;
        let (resolved, left) = resolve(&records, base.clone(), received)?;
        let mut heard = Vec::new();
        for (record, place) in resolved.iter().enumerate() {
            for (wanted, (target, wish)) in self.uses.iter().enumerate() {
                if !place.is(&wish.name) {
                    continue;
                }
                if let Some(told) = place.read(target, wish, &resolved) {
                    heard.push(Heard {
                        record,
                        wanted,
                        at: place.time.as_ref().ok().copied(),
                        told,
                    });
                }
            }
        }
        *base = left.into_owned();
        Ok(heard)
    }
}

/// Works the base fields into every record that follows them (RFC 8428 section 4.6); with the base
/// fields that are in force at the end.
fn resolve<'text>(
    records: &[Record<'text>],
    mut base: Base<'text>,
    received: Option<Timestamp>,
) -> Result<(Vec<Resolved<'text>>, Base<'text>), Fault> {
    let mut resolved = Vec::with_capacity(records.len());
    for record in records {
        base.take(record)?;
        resolved.push(Resolved {
            base_name: base.name.clone(),
            name: record.text(label::N)?.unwrap_or_default(),
            time: record.time(base.time, received),
            unit: record.text(label::U)?.or_else(|| base.unit.clone()),
            base_value: base.value,
            base_sum: base.sum,
            record: *record,
        });
    }
    Ok((resolved, base))
}

impl Base<'_> {
    /// The same, independent of the text it came from.
    fn into_owned(self) -> Base<'static> {
        Base {
            name: Cow::Owned(self.name.into_owned()),
            time: self.time,
            unit: self.unit.map(|unit| Cow::Owned(unit.into_owned())),
            value: self.value,
            sum: self.sum,
        }
    }
}

impl<'text> Base<'text> {
    fn take(&mut self, record: &Record<'text>) -> Result<(), Fault> {
        if record.strange {
            let detail = "a label that ends in _ must be understood and is not; \
                          the whole pack is refused (RFC 8428 section 4.4)";
            return Err(Fault::new(RefusedReason::Unreadable, detail));
        }
        if let Some(version) = record.fields[label::BVER] {
            let known = |version: i128| {
                (1..=VERSION).contains(&version) || version == VERSION_WITH_SECONDARY_UNITS
            };
            if !scaled_integer(version, 0).is_some_and(known) {
                let detail = format!("SenML version {} is not understood", excerpt(version));
                return Err(Fault::new(RefusedReason::Unreadable, detail));
            }
        }
        if let Some(name) = record.text(label::BN)? {
            self.name = name;
        }
        if let Some(unit) = record.text(label::BU)? {
            self.unit = Some(unit);
        }
        if let Some(time) = record.fields[label::BT] {
            self.time = nanoseconds(time, "bt")?;
        }
        self.value = record.number(label::BV)?.or(self.value);
        self.sum = record.number(label::BS)?.or(self.sum);
        Ok(())
    }
}

impl Resolved<'_> {
    /// Whether this is the record of that name: base name and name, one behind the other.
    fn is(&self, name: &str) -> bool {
        name.strip_prefix(&*self.base_name) == Some(&*self.name)
    }

    /// What the record tells; `None` if it only sets base fields.
    fn read(
        &self,
        target: &Target,
        place: &SenmlPlace,
        pack: &[Resolved<'_>],
    ) -> Option<Result<Told, Fault>> {
        const CONTENT: [usize; 5] = [label::V, label::VS, label::VB, label::VD, label::S];
        const OWN: [usize; 3] = [label::N, label::U, label::T];
        let has = |label: &usize| self.record.fields[*label].is_some();
        let content = CONTENT.iter().any(has);
        if !content && !OWN.iter().any(has) {
            return None;
        }
        Some(self.told(target, place, pack))
    }

    fn told(
        &self,
        target: &Target,
        place: &SenmlPlace,
        pack: &[Resolved<'_>],
    ) -> Result<Told, Fault> {
        let phenomenon = self.time.clone()?;
        if let Target::Gate {
            reference, open, ..
        } = target
        {
            let open = self.holds_one_of(open)?;
            return Ok(Told::Gate {
                reference: *reference,
                phenomenon,
                open,
            });
        }
        if let (Some(wanted), unit) = (&place.unit, &self.unit)
            && unit.as_deref() != Some(wanted.as_str())
        {
            let found = unit.as_deref().unwrap_or("none");
            let detail = format!("{}: unit {found}, configured {wanted}", place.name);
            return Err(Fault::new(RefusedReason::WrongType, detail));
        }
        let value = if place.sum {
            self.sum()?
        } else {
            self.value()?
        };
        let value = value.ok_or_else(|| {
            let wanted = if place.sum { "sum" } else { "number" };
            let detail = format!("the record {} holds no {wanted}", place.name);
            Fault::new(RefusedReason::WrongType, detail)
        })?;
        let excluded = match &place.status {
            Some(status) => !self.status_is_good(status, pack)?,
            None => false,
        };
        Ok(Told::Reading {
            phenomenon,
            value,
            sequence: None,
            excluded,
        })
    }

    fn value(&self) -> Result<Option<f64>, Fault> {
        finite_sum(self.base_value, self.record.number(label::V)?, false)
    }

    fn sum(&self) -> Result<Option<f64>, Fault> {
        finite_sum(self.base_sum, self.record.number(label::S)?, true)
    }

    /// Whether the record's text, truth value or number is one of these.
    fn holds_one_of(&self, wanted: &[Scalar]) -> Result<bool, Fault> {
        let fields = &self.record.fields;
        if let Some(raw) = fields[label::VS].or(fields[label::VB]) {
            return Ok(json::holds_one_of(raw, wanted));
        }
        let value = self.value()?.ok_or_else(|| {
            let detail = format!("the record {}{} holds no value", self.base_name, self.name);
            Fault::new(RefusedReason::WrongType, detail)
        })?;
        Ok(wanted.contains(&Scalar::Number(value)))
    }

    /// Whether the status record in force at this record's time is good: the latest one up to it,
    /// else the first one of the pack; without any, the reading is excluded.
    fn status_is_good(
        &self,
        status: &Status<String>,
        pack: &[Resolved<'_>],
    ) -> Result<bool, Fault> {
        let here = self.time.clone()?;
        let told = || {
            pack.iter()
                .filter(|record| record.is(&status.place))
                .filter_map(|record| Some((record.time.clone().ok()?, record)))
        };
        let latest = told()
            .filter(|(at, _)| *at <= here)
            .max_by_key(|(at, _)| *at);
        match latest.or_else(|| told().next()) {
            Some((_, record)) => record.holds_one_of(&status.good),
            None => Ok(false),
        }
    }
}

/// Base plus own value, where a missing one counts as zero; `None` if the own one is missing and
/// `base_alone` does not suffice, or both are missing.
fn finite_sum(base: Option<f64>, own: Option<f64>, base_alone: bool) -> Result<Option<f64>, Fault> {
    if own.is_none() && !(base_alone && base.is_some()) {
        return Ok(None);
    }
    let sum = base.unwrap_or(0.0) + own.unwrap_or(0.0);
    if sum.is_finite() {
        Ok(Some(sum))
    } else {
        Err(literal::not_finite(&sum.to_string()))
    }
}

/// Broken JSON, or JSON that is no pack.
fn unsound(text: &str, error: &serde_json::Error) -> Fault {
    match error.classify() {
        serde_json::error::Category::Data => {
            let detail = format!("{} is no SenML pack: {error}", excerpt(text));
            Fault::new(RefusedReason::WrongType, detail)
        }
        _ => broken(text, error),
    }
}
