//! How numbers are written in texts for people.

/// Four significant digits; very large and very small ones with an exponent.
pub(crate) fn readable(value: f64) -> String {
    let size = value.abs();
    if size == 0.0 {
        return "0".to_owned();
    }
    if !(1e-4..1e6).contains(&size) {
        return format!("{value:.3e}");
    }
    let mut decimals = 3;
    let mut edge = 1.0;
    while size < edge && decimals < 8 {
        decimals += 1;
        edge *= 0.1;
    }
    let mut edge = 10.0;
    while size >= edge && decimals > 0 {
        decimals -= 1;
        edge *= 10.0;
    }
    format!("{value:.decimals$}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_read_with_four_digits() {
        let cases = [
            (0.0, "0"),
            (0.123_456, "0.1235"),
            (1.234_56, "1.235"),
            (-12.345_6, "-12.35"),
            (123_456.7, "123457"),
            (0.000_123_456, "0.0001235"),
            (1.5e-9, "1.500e-9"),
            (2.5e7, "2.500e7"),
            (1e300, "1.000e300"),
            (f64::NAN, "NaN"),
        ];
        for (value, text) in cases {
            assert_eq!(readable(value), text);
        }
    }
}
