//! Inputs and outputs as the text that stands in the record, and back.
//!
//! JSON with exact floats: `serde_json` writes the shortest text that reads back to the same bits,
//! and reads it back exactly with its `float_roundtrip` feature.

use holdtrue_engine::event::{Input, Output, Reading, Subject, Supplied};
use holdtrue_engine::setup::ChannelId;
use holdtrue_engine::time::Timestamp;
use serde::{Deserialize, Serialize};

/// Why writing an event as text can't fail.
const CAN_BE_TEXT: &str = "events hold strings, numbers, lists and structs; JSON can hold these";

/// Rows handed back to the engine, recorded by their positions and not as copies.
#[derive(Debug, PartialEq, Eq, Serialize, Deserialize)]
pub(super) struct SuppliedPositions {
    /// Whose rows.
    pub(super) channel: ChannelId,
    /// As wanted: from (inclusive).
    pub(super) from: Timestamp,
    /// As wanted: to (exclusive).
    pub(super) to: Timestamp,
    /// Positions of the readings.
    pub(super) positions: Vec<i64>,
}

/// The kind column of an input, and when the daemon got it.
pub(super) fn columns(input: &Input) -> (&'static str, Option<Timestamp>) {
    match input {
        Input::Setup(_) => ("setup", None),
        Input::Reading(reading) => ("reading", Some(reading.received)),
        Input::Gate(gate) => ("gate", Some(gate.received)),
        Input::Refused(refused) => ("refused", Some(refused.received)),
        Input::Tick { now } => ("tick", Some(*now)),
        Input::Supplied(_) => ("supplied", None),
        Input::Order(order) => ("order", Some(order.received)),
    }
}

/// What an output is about.
pub(super) fn subject(output: &Output) -> Option<Subject> {
    let channel = match output {
        Output::Alarm(change) => return Some(change.subject),
        Output::Notice(notice) => return Some(notice.subject),
        Output::Answer(_) => return None,
        Output::Correction(it) => it.channel,
        Output::Corrected(it) => it.channel,
        Output::Outlook(it) => it.channel,
        Output::Degree(it) => it.channel,
        Output::Step(it) => it.channel,
        Output::Pair(it) => it.channel,
        Output::Validation(it) => it.channel,
        Output::Withdrawn { channel, .. }
        | Output::OutlookWithdrawn { channel, .. }
        | Output::Wanted { channel, .. } => *channel,
    };
    Some(Subject::Channel(channel))
}

/// The kind column of an output.
pub(super) fn output_kind(output: &Output) -> &'static str {
    match output {
        Output::Correction(_) => "correction",
        Output::Withdrawn { .. } => "withdrawn",
        Output::Corrected(_) => "corrected",
        Output::Outlook(_) => "outlook",
        Output::OutlookWithdrawn { .. } => "outlook-withdrawn",
        Output::Alarm(_) => "alarm",
        Output::Degree(_) => "degree",
        Output::Step(_) => "step",
        Output::Pair(_) => "pair",
        Output::Notice(_) => "notice",
        Output::Answer(_) => "answer",
        Output::Validation(_) => "validation",
        Output::Wanted { .. } => "wanted",
    }
}

/// The body column of an input; `positions` are those of the rows that a `Supplied` input carries.
pub(super) fn input_text(input: &Input, positions: &[i64]) -> String {
    let text = match input {
        Input::Supplied(supplied) => serde_json::to_string(&SuppliedPositions {
            channel: supplied.channel,
            from: supplied.from,
            to: supplied.to,
            positions: positions.to_vec(),
        }),
        other => serde_json::to_string(other),
    };
    text.expect(CAN_BE_TEXT)
}

/// The body column of an output.
///
/// # Panics
/// Never: the vocabulary has only types that JSON can hold.
#[must_use]
pub fn output_text(output: &Output) -> String {
    serde_json::to_string(output).expect(CAN_BE_TEXT)
}

/// Reads an input back that is no value; `reading_at` fetches the rows of a `supplied` input.
pub(super) fn input_from_text<E: From<serde_json::Error>>(
    kind: &str,
    body: &str,
    mut reading_at: impl FnMut(i64) -> Result<Reading, E>,
) -> Result<Input, E> {
    if kind != "supplied" {
        return Ok(serde_json::from_str(body)?);
    }
    let supplied: SuppliedPositions = serde_json::from_str(body)?;
    let readings = supplied
        .positions
        .iter()
        .map(|position| reading_at(*position))
        .collect::<Result<_, E>>()?;
    Ok(Input::Supplied(Supplied {
        channel: supplied.channel,
        from: supplied.from,
        to: supplied.to,
        readings,
    }))
}

#[cfg(test)]
mod tests {
    use super::*;
    use holdtrue_engine::event::Source;
    use holdtrue_engine::setup::ReferenceId;

    #[test]
    fn every_float_reads_back_to_the_same_bits() {
        for value in [
            0.1 + 0.2,
            -0.0,
            f64::MIN_POSITIVE / 8.0,
            1.797e308,
            5e-324,
            7.053_123_456_789_012,
        ] {
            let input = Input::Reading(Reading {
                source: Source::Reference(ReferenceId(7)),
                received: Timestamp(i64::MAX),
                phenomenon: Timestamp(-1),
                value,
                sequence: Some(i64::MIN),
                excluded: false,
            });
            let text = input_text(&input, &[]);
            let back = input_from_text("reading", &text, |_| -> Result<_, serde_json::Error> {
                panic!("a reading refers to no other row")
            });
            let Input::Reading(reading) = back.unwrap() else {
                panic!("kind changed")
            };
            assert_eq!(reading.value.to_bits(), value.to_bits(), "{text}");
            assert_eq!(Input::Reading(reading), input);
        }
    }

    #[test]
    fn supplied_rows_are_recorded_by_position_and_come_back_whole() {
        let reading = Reading {
            source: Source::Indication(ChannelId(2)),
            received: Timestamp(5),
            phenomenon: Timestamp(4),
            value: 1.5,
            sequence: None,
            excluded: false,
        };
        let input = Input::Supplied(Supplied {
            channel: ChannelId(2),
            from: Timestamp(3),
            to: Timestamp(9),
            readings: vec![reading.clone(), reading.clone()],
        });
        let text = input_text(&input, &[11, 12]);
        assert!(!text.contains("1.5"), "copied: {text}");
        let mut asked = Vec::new();
        let back = input_from_text(
            "supplied",
            &text,
            |position| -> Result<_, serde_json::Error> {
                asked.push(position);
                Ok(reading.clone())
            },
        );
        assert_eq!(back.unwrap(), input);
        assert_eq!(asked, [11, 12]);
    }
}
