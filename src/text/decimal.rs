//! Decimal numbers as scaled integers, by their digits and without a float in between.

/// The value of a decimal literal times ten to the power of `shift`, rounded half away from zero to
/// an integer; exact, because it works on the digits.
///
/// `None`: not a decimal number, or more than an `i128` can surely hold (36 digits).
#[must_use]
pub fn scaled_integer(text: &str, shift: i32) -> Option<i128> {
    let (negative, unsigned) = match text.as_bytes().first()? {
        b'-' => (true, &text[1..]),
        b'+' => (false, &text[1..]),
        _ => (false, text),
    };
    let (mantissa, exponent) = match unsigned.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, exponent.parse::<i32>().ok()?),
        None => (unsigned, 0),
    };
    let (whole, fraction) = mantissa.split_once('.').unwrap_or((mantissa, ""));
    if whole.is_empty() && fraction.is_empty() {
        return None;
    }
    let digits = || whole.bytes().chain(fraction.bytes());
    if !digits().all(|digit| digit.is_ascii_digit()) {
        return None;
    }
    // Value = digits · 10^(exponent − fraction length); so many digits stay before the point:
    let kept = i64::try_from(whole.len()).ok()? + i64::from(exponent) + i64::from(shift);
    let magnitude = kept_digits(digits(), kept)?;
    Some(if negative { -magnitude } else { magnitude })
}

/// The first `kept` digits as an integer (zeros added where there are fewer), rounded by the next.
fn kept_digits(digits: impl Iterator<Item = u8>, kept: i64) -> Option<i128> {
    const DIGITS_MAX: u32 = 36;
    let mut value: i128 = 0;
    let mut seen: i64 = 0;
    for digit in digits {
        if seen == kept {
            value += i128::from(digit >= b'5');
            break;
        }
        if seen > kept {
            break;
        }
        value = value * 10 + i128::from(digit - b'0');
        if value >= 10_i128.pow(DIGITS_MAX) {
            return None;
        }
        seen += 1;
    }
    while seen < kept && value != 0 {
        value *= 10;
        if value >= 10_i128.pow(DIGITS_MAX) {
            return None;
        }
        seen += 1;
    }
    Some(value)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn scaled_integers_are_exact() {
        let cases: [(&str, i32, Option<i128>); 20] = [
            ("1735689600.123456789", 9, Some(1_735_689_600_123_456_789)),
            ("1.276020076001e+09", 9, Some(1_276_020_076_001_000_000)),
            ("1276020076001", 6, Some(1_276_020_076_001_000_000)),
            ("-30", 9, Some(-30_000_000_000)),
            ("0", 9, Some(0)),
            ("-0", 9, Some(0)),
            ("0e2147483647", 9, Some(0)),
            ("0.0000000004", 9, Some(0)),
            ("0.0000000005", 9, Some(1)),
            ("-0.0000000005", 9, Some(-1)),
            ("0.00000000051", 9, Some(1)),
            ("1e-400", 9, Some(0)),
            ("9.9999999996", 9, Some(10_000_000_000)),
            ("12.5e-1", 0, Some(1)),
            ("1e30", 9, None),
            ("1e2147483647", 9, None),
            ("1e9999999999", 9, None),
            ("abc", 9, None),
            ("1.2.3", 9, None),
            (".", 9, None),
        ];
        for (text, shift, expected) in cases {
            assert_eq!(scaled_integer(text, shift), expected, "{text} · 10^{shift}");
        }
        let long = format!("0.{}", "1".repeat(5000));
        assert_eq!(
            scaled_integer(&long, 9),
            Some(111_111_111),
            "long literals are only read on"
        );
    }
}
