//! Values and times from their text, with what to say when they are none.

use super::mapping::{Mapping, TimeColumn};
use crate::payload::plain::says;
use crate::payload::{Scalar, literal};
use holdtrue_engine::event::RefusedReason;
use holdtrue_engine::time::Timestamp;

/// The number that a text tells, or what is wrong with it and the way out.
pub(super) fn number(text: &str, mapping: &Mapping) -> Result<f64, String> {
    let read = if mapping.decimal_comma {
        literal::number(&text.replacen(',', ".", 1))
    } else {
        literal::number(text)
    };
    read.map_err(|fault| {
        if fault.reason == RefusedReason::NotFinite {
            return "is no finite number; if it stands for no value, name it with --missing"
                .to_owned();
        }
        let hint = if !mapping.decimal_comma && text.contains(',') {
            "; if its decimal sign is a comma, say --decimal-comma"
        } else {
            "; if it stands for no value, name it with --missing"
        };
        format!("is not a number{hint}")
    })
}

/// The instant that a text tells, or what is wrong with it and the way out.
pub(super) fn time(text: &str, column: &TimeColumn) -> Result<Timestamp, String> {
    let read = column.form.read(text, column.ahead);
    read.map_err(|why| why.to_string())
}

/// Whether a text is one of these.
pub(super) fn is_one_of(text: &str, wanted: &[Scalar]) -> bool {
    wanted.iter().any(|wanted| says(wanted, text))
}
