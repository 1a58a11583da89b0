//! One record of a SenML pack as the pieces of text it is, and typed access to them.

use crate::payload::fault::{Fault, excerpt};
use crate::payload::json::{is_number, number, text_of, wrong_type};
use holdtrue_engine::event::RefusedReason;
use holdtrue_engine::time::Timestamp;
use holdtrue_text::decimal::scaled_integer;
use serde::de::{Deserialize, Deserializer, IgnoredAny, MapAccess, Visitor};
use serde_json::value::RawValue;
use std::borrow::Cow;
use std::fmt;

/// From here on a time is absolute, below it counts from now (RFC 8428 section 4.5.3): 2²⁸ s, in
/// nanoseconds.
const ABSOLUTE_FROM: i128 = (1 << 28) * 1_000_000_000;
/// Decimal places of a second that are kept.
const NANOSECOND_DIGITS: i32 = 9;

/// The fields of one record as pieces of text, in the order of [`LABELS`].
#[derive(Clone, Copy, Default)]
pub(super) struct Record<'text> {
    pub(super) fields: [Option<&'text str>; LABELS.len()],
    /// An unknown label that must be understood to use the pack.
    pub(super) strange: bool,
}

/// The labels of RFC 8428 section 4 (table 1), without update time, which changes no value.
const LABELS: [&str; 14] = [
    "bn", "bt", "bu", "bv", "bs", "bver", "n", "u", "v", "vs", "vb", "vd", "s", "t",
];

/// Positions in [`LABELS`].
pub(super) mod label {
    pub(in crate::payload::senml) const BN: usize = 0;
    pub(in crate::payload::senml) const BT: usize = 1;
    pub(in crate::payload::senml) const BU: usize = 2;
    pub(in crate::payload::senml) const BV: usize = 3;
    pub(in crate::payload::senml) const BS: usize = 4;
    pub(in crate::payload::senml) const BVER: usize = 5;
    pub(in crate::payload::senml) const N: usize = 6;
    pub(in crate::payload::senml) const U: usize = 7;
    pub(in crate::payload::senml) const V: usize = 8;
    pub(in crate::payload::senml) const VS: usize = 9;
    pub(in crate::payload::senml) const VB: usize = 10;
    pub(in crate::payload::senml) const VD: usize = 11;
    pub(in crate::payload::senml) const S: usize = 12;
    pub(in crate::payload::senml) const T: usize = 13;
}

impl<'text> Record<'text> {
    pub(super) fn text(&self, label: usize) -> Result<Option<Cow<'text, str>>, Fault> {
        let Some(raw) = self.fields[label] else {
            return Ok(None);
        };
        text_of(raw)
            .map(Some)
            .ok_or_else(|| wrong_type(raw, "a text", LABELS[label]))
    }

    pub(super) fn number(&self, label: usize) -> Result<Option<f64>, Fault> {
        self.fields[label]
            .map(|raw| number(raw, LABELS[label]))
            .transpose()
    }

    /// Base time plus time; absolute, or counted from now (RFC 8428 sections 4.5.3 and 4.6), which
    /// is `received`, where that is known.
    pub(super) fn time(&self, base: i128, received: Option<Timestamp>) -> Result<Timestamp, Fault> {
        let own = self.fields[label::T].map_or(Ok(0), |raw| nanoseconds(raw, "t"))?;
        let sum = base + own;
        let absolute = match received {
            _ if sum >= ABSOLUTE_FROM => sum,
            Some(received) => i128::from(received.0) + sum,
            None => {
                let detail = "a time below 2^28 s counts from now (RFC 8428 section 4.5.3), and \
                              a recording does not tell when that was; write times since 1970";
                return Err(Fault::new(RefusedReason::BadTime, detail));
            }
        };
        i64::try_from(absolute).map(Timestamp).map_err(|_| {
            let detail = format!("{absolute} ns is outside the years 1678 to 2261");
            Fault::new(RefusedReason::BadTime, detail)
        })
    }
}

pub(super) fn nanoseconds(raw: &str, place: &str) -> Result<i128, Fault> {
    if !is_number(raw) {
        return Err(wrong_type(raw, "a number", place));
    }
    scaled_integer(raw, NANOSECOND_DIGITS).ok_or_else(|| {
        Fault::new(
            RefusedReason::BadTime,
            format!("{} at {place} is no time", excerpt(raw)),
        )
    })
}

impl<'text> Deserialize<'text> for Record<'text> {
    fn deserialize<D: Deserializer<'text>>(value: D) -> Result<Self, D::Error> {
        value.deserialize_map(Fields)
    }
}

/// Reads a record's fields as pieces of text.
struct Fields;

impl<'text> Visitor<'text> for Fields {
    type Value = Record<'text>;

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("a SenML record (an object)")
    }

    fn visit_map<A: MapAccess<'text>>(self, mut map: A) -> Result<Record<'text>, A::Error> {
        let mut record = Record::default();
        while let Some(label) = map.next_key::<Label>()? {
            match label {
                Label::Known(index) => {
                    record.fields[index] = Some(map.next_value::<&RawValue>()?.get());
                }
                Label::Other { essential } => {
                    record.strange |= essential;
                    map.next_value::<IgnoredAny>()?;
                }
            }
        }
        Ok(record)
    }
}

/// A label of a record.
enum Label {
    /// Position in [`LABELS`].
    Known(usize),
    /// An extension; `essential` when it ends in `_`.
    Other { essential: bool },
}

impl<'text> Deserialize<'text> for Label {
    fn deserialize<D: Deserializer<'text>>(key: D) -> Result<Self, D::Error> {
        struct Name;
        impl Visitor<'_> for Name {
            type Value = Label;

            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("a label")
            }

            fn visit_str<E>(self, name: &str) -> Result<Label, E> {
                Ok(match LABELS.iter().position(|label| *label == name) {
                    Some(index) => Label::Known(index),
                    None => Label::Other {
                        essential: name.ends_with('_'),
                    },
                })
            }
        }
        key.deserialize_str(Name)
    }
}
