//! Middle values.

/// Middle value, the mean of the two middle ones of an even number; 0 of nothing. Sorts.
pub(crate) fn median(values: &mut [f64]) -> f64 {
    values.sort_unstable_by(f64::total_cmp);
    let half = values.len() / 2;
    match (values.get(half.wrapping_sub(1)), values.get(half)) {
        (Some(below), Some(above)) if values.len().is_multiple_of(2) => 0.5 * (below + above),
        (_, Some(middle)) => *middle,
        _ => 0.0,
    }
}

/// The same with the upper of the two middle ones, without sorting all: for scales of many values,
/// where half a place does not matter.
pub(crate) fn upper_median(values: &mut [f64]) -> f64 {
    if values.is_empty() {
        return 0.0;
    }
    let half = values.len() / 2;
    *values.select_nth_unstable_by(half, f64::total_cmp).1
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "the expected values are exact in binary")]
mod tests {
    use super::*;

    #[test]
    fn the_middle_of_few_values() {
        assert_eq!(median(&mut []), 0.0);
        assert_eq!(median(&mut [3.0]), 3.0);
        assert_eq!(median(&mut [4.0, 1.0]), 2.5);
        assert_eq!(median(&mut [9.0, 1.0, 2.0]), 2.0);
        assert_eq!(median(&mut [4.0, 1.0, 2.0, 3.0]), 2.5);
        assert_eq!(upper_median(&mut []), 0.0);
        assert_eq!(upper_median(&mut [4.0, 1.0, 2.0, 3.0]), 3.0);
        assert_eq!(upper_median(&mut [9.0, 1.0, 2.0]), 2.0);
    }
}
