//! Numbers from their text, without a detour that loses digits.

use super::fault::{Fault, excerpt};
use holdtrue_engine::event::RefusedReason;

/// A number from its text: finite, correctly rounded, −0 as 0.
///
/// The text may be a JSON number, and also what JSON does not allow but instruments send: a leading
/// `+`, `.5` and `5.`.
pub(crate) fn number(text: &str) -> Result<f64, Fault> {
    let value: f64 = text.parse().map_err(|_| {
        let hint = if text.contains(',') {
            "; the decimal sign is a point"
        } else {
            ""
        };
        Fault::new(
            RefusedReason::Unreadable,
            format!("{} is not a number{hint}", excerpt(text)),
        )
    })?;
    if !value.is_finite() {
        return Err(not_finite(text));
    }
    // Adding zero turns −0 into 0, which stores and compares alike everywhere.
    Ok(value + 0.0)
}

/// The refusal of a number that cannot be held.
pub(super) fn not_finite(text: &str) -> Fault {
    let detail = format!("{} is no finite number that can be held", excerpt(text));
    Fault::new(RefusedReason::NotFinite, detail)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_are_finite_and_without_negative_zero() {
        assert_eq!(number("7.25"), Ok(7.25));
        assert_eq!(number("+1e-3"), Ok(0.001));
        assert_eq!(number("-0.0").map(f64::to_bits), Ok(0.0_f64.to_bits()));
        for text in ["NaN", "nan", "inf", "-Infinity", "1e400", "-1e400"] {
            assert_eq!(
                number(text).unwrap_err().reason,
                RefusedReason::NotFinite,
                "{text}"
            );
        }
        for text in ["", "12,5", "7.2 pH", "0x10", "1_000", "--1"] {
            assert_eq!(
                number(text).unwrap_err().reason,
                RefusedReason::Unreadable,
                "{text}"
            );
        }
        assert!(number("12,5").unwrap_err().detail.contains("point"));
    }
}
