//! Values in a JSON document, by pointer.

use super::fault::{Fault, excerpt};
use super::intake::{Reader, Told};
use super::pick::{Picked, Picker, Slot};
use super::tables::{JsonPlace, Scalar, Target, TimeUnit};
use super::{instant, literal};
use holdtrue_engine::event::RefusedReason;
use holdtrue_engine::time::Timestamp;
use std::borrow::Cow;

/// Everything that one topic's JSON documents carry.
#[derive(Clone, Debug, Default)]
pub(super) struct Document {
    picker: Picker,
    uses: Vec<Wanted>,
}

/// One value with what belongs to it.
#[derive(Clone, Debug)]
struct Wanted {
    target: Target,
    value: Spot,
    time: Option<Spot>,
    time_unit: TimeUnit,
    sequence: Option<Spot>,
    status: Option<(Slot, Vec<Scalar>)>,
}

/// A slot with the pointer that leads there, for refusals.
#[derive(Clone, Debug)]
struct Spot {
    slot: Slot,
    pointer: String,
}

impl Document {
    pub(super) fn want(&mut self, target: &Target, place: &JsonPlace) {
        let mut spot = |pointer: &_| Spot {
            slot: self.picker.want(pointer),
            pointer: pointer.to_string(),
        };
        let wanted = Wanted {
            target: target.clone(),
            value: spot(&place.value),
            time: place.time.as_ref().map(&mut spot),
            time_unit: place.time_unit,
            sequence: place.sequence.as_ref().map(&mut spot),
            status: place
                .status
                .as_ref()
                .map(|s| (spot(&s.place).slot, s.good.clone())),
        };
        self.uses.push(wanted);
    }

    /// Reads all wanted values of one document.
    pub(super) fn read(&self, reader: &mut Reader<'_>, text: &str) {
        let picked = match self.picker.pick(text) {
            Ok(picked) => picked,
            Err(error) => return reader.refuse_message(broken(text, &error)),
        };
        for wanted in &self.uses {
            let told = wanted.read(&picked, reader.received);
            reader.tell(&wanted.target, told);
        }
    }
}

impl Wanted {
    fn read(&self, picked: &Picked<'_>, received: Timestamp) -> Result<Told, Fault> {
        let value = self.value.find(picked)?;
        let phenomenon = match &self.time {
            Some(spot) => time(spot.find(picked)?, self.time_unit, &spot.pointer)?,
            None => received,
        };
        if let Target::Gate {
            reference, open, ..
        } = &self.target
        {
            let open = holds_one_of(value, open);
            return Ok(Told::Gate {
                reference: *reference,
                phenomenon,
                open,
            });
        }
        Ok(Told::Reading {
            phenomenon,
            value: number(value, &self.value.pointer)?,
            sequence: self
                .sequence
                .as_ref()
                .map(|spot| integer(picked, spot))
                .transpose()?,
            excluded: self.status.as_ref().is_some_and(|(slot, good)| {
                !picked
                    .get(*slot)
                    .is_some_and(|status| holds_one_of(status, good))
            }),
        })
    }
}

impl Spot {
    fn find<'text>(&self, picked: &Picked<'text>) -> Result<&'text str, Fault> {
        picked.get(self.slot).ok_or_else(|| {
            let detail = format!("nothing at {}", shown(&self.pointer));
            Fault::new(RefusedReason::Missing, detail)
        })
    }
}

/// A JSON number as a float.
pub(super) fn number(raw: &str, place: &str) -> Result<f64, Fault> {
    if !is_number(raw) {
        return Err(wrong_type(raw, "a number", place));
    }
    literal::number(raw)
}

/// A JSON text or number as a phenomenon time.
fn time(raw: &str, unit: TimeUnit, place: &str) -> Result<Timestamp, Fault> {
    if is_number(raw) {
        return instant::from_number(raw, unit);
    }
    match text_of(raw) {
        Some(text) => instant::from_text(&text),
        None => Err(Fault::new(
            RefusedReason::BadTime,
            format!(
                "{} at {} is neither a text nor a number",
                excerpt(raw),
                shown(place)
            ),
        )),
    }
}

fn integer(picked: &Picked<'_>, spot: &Spot) -> Result<i64, Fault> {
    let raw = spot.find(picked)?;
    raw.parse()
        .map_err(|_| wrong_type(raw, "a whole number", &spot.pointer))
}

/// Whether a JSON value is one of these; a value of another type is none of them.
pub(crate) fn holds_one_of(raw: &str, wanted: &[Scalar]) -> bool {
    wanted.iter().any(|wanted| match wanted {
        Scalar::Text(word) => text_of(raw).is_some_and(|text| text == *word),
        Scalar::Number(number) => is_number(raw) && literal::number(raw) == Ok(*number),
        Scalar::Truth(truth) => raw == if *truth { "true" } else { "false" },
    })
}

/// The content of a JSON text, borrowed where it holds no escapes.
pub(crate) fn text_of(raw: &str) -> Option<Cow<'_, str>> {
    let inner = raw.strip_prefix('"')?.strip_suffix('"')?;
    if inner.contains('\\') {
        serde_json::from_str::<String>(raw).ok().map(Cow::Owned)
    } else {
        Some(Cow::Borrowed(inner))
    }
}

/// Whether a sound JSON value is a number: only numbers begin like this.
pub(crate) fn is_number(raw: &str) -> bool {
    raw.starts_with(|first: char| first == '-' || first.is_ascii_digit())
}

pub(super) fn wrong_type(raw: &str, wanted: &str, place: &str) -> Fault {
    let detail = format!("{} at {} is not {wanted}", excerpt(raw), shown(place));
    Fault::new(RefusedReason::WrongType, detail)
}

/// The refusal of a text that is not JSON. Many senders write NaN or Infinity, which JSON has not:
/// that is told apart, because the sensor and not the configuration is at fault.
pub(super) fn broken(text: &str, error: &serde_json::Error) -> Fault {
    match word_at(text, error.line(), error.column()) {
        Some(word) if is_no_number(word) => literal::not_finite(word),
        _ => {
            let detail = format!("{} is not sound JSON: {error}", excerpt(text));
            Fault::new(RefusedReason::Unreadable, detail)
        }
    }
}

/// The run of letters and signs around a position that the parser complained about.
fn word_at(text: &str, line: usize, column: usize) -> Option<&str> {
    let line = text.split('\n').nth(line.checked_sub(1)?)?;
    let at = column.saturating_sub(1).min(line.len());
    let part = |byte: &u8| byte.is_ascii_alphabetic() || matches!(byte, b'-' | b'+');
    let bytes = line.as_bytes();
    let from = at
        - bytes[..at]
            .iter()
            .rev()
            .take_while(|byte| part(byte))
            .count();
    let to = at + bytes[at..].iter().take_while(|byte| part(byte)).count();
    line.get(from..to)
}

fn is_no_number(word: &str) -> bool {
    let word = word.trim_start_matches(['-', '+']);
    ["nan", "inf", "infinity"]
        .iter()
        .any(|name| word.eq_ignore_ascii_case(name))
}

/// A pointer as it is shown: the empty one leads to the whole document.
fn shown(pointer: &str) -> &str {
    if pointer.is_empty() {
        "the top of the document"
    } else {
        pointer
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_numbers_are_told_apart_from_broken_json() {
        let reason = |text: &str| {
            let error = serde_json::from_str::<serde::de::IgnoredAny>(text).unwrap_err();
            broken(text, &error).reason
        };
        for text in ["{\"v\": NaN}", "{\n \"v\":\n-Infinity}", "[1, inf]", "nan"] {
            assert_eq!(reason(text), RefusedReason::NotFinite, "{text}");
        }
        for text in [
            "{\"v\": Nana}",
            "{",
            "{\"NaN\" 1}",
            "nonsense",
            "{\"µ\": x}",
        ] {
            assert_eq!(reason(text), RefusedReason::Unreadable, "{text}");
        }
    }

    #[test]
    fn scalars_compare_by_type_and_value() {
        let good = [
            Scalar::Text("ok".into()),
            Scalar::Number(0.0),
            Scalar::Truth(true),
        ];
        for raw in ["\"ok\"", "\"\\u006fk\"", "0", "0.0", "-0", "true"] {
            assert!(holds_one_of(raw, &good), "{raw}");
        }
        for raw in [
            "\"OK\"", "\"0\"", "1", "false", "null", "\"true\"", "[0]", "{}",
        ] {
            assert!(!holds_one_of(raw, &good), "{raw}");
        }
    }
}
