//! What a row's columns are, and the scaled time they are powers of.
//!
//! Scaled time u counts from an anchor in a unit of 2ᵏ nanoseconds. A power of two keeps three
//! things exact: scaling a time difference, changing the unit, and moving the origin by a whole
//! number of nanoseconds (as long as the difference fits 53 bits, 104 days; beyond, it is rounded
//! once).

use crate::fit::centre::Centre;
use crate::fit::factor::{Factor, MAX_COLUMNS};
use crate::time::{Duration, Timestamp};
use serde::{Deserialize, Serialize};

/// Highest degree in time.
pub const MAX_TIME_DEGREE: u8 = 5;
/// Highest degree in time of the span terms.
pub const MAX_SPAN_DEGREE: u8 = 2;
/// Most span columns x·u^j, j = 0 … 2.
pub const MAX_SPAN_COLUMNS: usize = MAX_SPAN_DEGREE as usize + 1;
/// Most influence quantities.
pub const MOST_INFLUENCES: u8 = 2;
/// Most influence columns.
pub const MAX_INFLUENCES: usize = MOST_INFLUENCES as usize;

/// The columns of Φ, in this order: 1, u, …, u^D; x, x·u, …, x·u^M; influences. Time comes first so
/// that every lower degree is a prefix.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Columns {
    /// Highest degree in time, 0 … 5.
    highest_power: u8,
    /// Columns x·u^j: 0 (no span terms) … 3 (span degree 2).
    span_powers: u8,
    /// Influence columns, 0 … 2.
    influences: u8,
}

impl Columns {
    /// Time columns only, degree 0 … 5.
    ///
    /// # Panics
    /// With a higher degree.
    #[must_use]
    pub fn time(degree: u8) -> Self {
        Self::new(degree, 0, 0)
    }

    /// All kinds of columns: degree in time 0 … 5, span columns 0 … 3 (no more than there are
    /// powers of time, so that their centre can be moved), influences 0 … 2.
    ///
    /// # Panics
    /// Beyond these limits.
    #[must_use]
    pub fn new(time_degree: u8, span_columns: u8, influences: u8) -> Self {
        assert!(time_degree <= MAX_TIME_DEGREE, "time degree 0 to 5");
        assert!(
            usize::from(span_columns) <= MAX_SPAN_COLUMNS,
            "0 to 3 span columns"
        );
        assert!(
            span_columns <= time_degree + 1,
            "a power of time for every span column"
        );
        assert!(
            usize::from(influences) <= MAX_INFLUENCES,
            "0 to 2 influences"
        );
        Self {
            highest_power: time_degree,
            span_powers: span_columns,
            influences,
        }
    }

    /// Whether they are some that [`Columns::new`] makes.
    pub(crate) fn are_possible(self) -> bool {
        self.highest_power <= MAX_TIME_DEGREE
            && self.span_powers <= MAX_SPAN_DEGREE + 1
            && self.span_powers <= self.highest_power + 1
            && self.influences <= MOST_INFLUENCES
    }

    /// Highest degree in time.
    #[must_use]
    pub fn time_degree(self) -> usize {
        usize::from(self.highest_power)
    }

    /// Whether there are neither span nor influence columns.
    #[inline]
    #[must_use]
    pub fn is_time_only(self) -> bool {
        self.span_powers == 0 && self.influences == 0
    }

    /// How many span columns there are.
    #[must_use]
    pub fn span_columns(self) -> usize {
        usize::from(self.span_powers)
    }

    /// How many influence columns there are.
    #[must_use]
    pub fn influence_columns(self) -> usize {
        usize::from(self.influences)
    }

    /// Where column x·u^power stands.
    #[must_use]
    pub fn span_place(self, power: usize) -> usize {
        self.time_degree() + 1 + power
    }

    /// Where the column of an influence quantity stands.
    #[must_use]
    pub fn influence_place(self, influence: usize) -> usize {
        self.span_place(self.span_columns()) + influence
    }

    /// How many columns Φ has.
    #[inline]
    #[must_use]
    pub fn count(self) -> usize {
        self.time_degree() + 1 + usize::from(self.span_powers) + usize::from(self.influences)
    }

    /// Writes φ at scaled time `u` with regressor `x` and influence quantities into the first
    /// [`Columns::count`] places of `row`.
    #[inline]
    pub fn fill(self, u: f64, x: f64, influences: [f64; MAX_INFLUENCES], row: &mut [f64]) {
        let time_columns = self.time_degree() + 1;
        let span_columns = usize::from(self.span_powers);
        let (time, rest) = row.split_at_mut(time_columns);
        let (span, rest) = rest.split_at_mut(span_columns);
        let mut power = 1.0;
        for entry in time {
            *entry = power;
            power *= u;
        }
        let mut product = x;
        for entry in span {
            *entry = product;
            product *= u;
        }
        for (entry, value) in rest
            .iter_mut()
            .zip(influences)
            .take(usize::from(self.influences))
        {
            *entry = value;
        }
    }

    /// φ of the time columns up to `degree` at scaled time `u`; zero beyond.
    #[must_use]
    pub fn powers(degree: usize, u: f64) -> [f64; MAX_COLUMNS] {
        let mut phi = [0.0; MAX_COLUMNS];
        let mut power = 1.0;
        for entry in &mut phi[..=degree] {
            *entry = power;
            power *= u;
        }
        phi
    }

    /// Moves a factor of these columns from one frame to another.
    pub(crate) fn move_frame(self, factor: &mut Factor, from: Frame, to: Frame) {
        let (shift, scale) = from.step_to(to);
        if shift == 0.0 && scale.to_bits() == 1.0_f64.to_bits() {
            return;
        }
        let time_columns = self.time_degree() + 1;
        factor.move_origin(0, time_columns, shift, scale);
        if self.span_powers > 0 {
            factor.move_origin(time_columns, usize::from(self.span_powers), shift, scale);
        }
    }

    /// Moves a factor of these columns to days from an instant that is `u` in its frame.
    pub(crate) fn count_days_from(self, factor: &mut Factor, frame: Frame, u: f64) {
        let days = frame.unit_days();
        let time_columns = self.time_degree() + 1;
        factor.move_origin(0, time_columns, u, days);
        if self.span_powers > 0 {
            factor.move_origin(time_columns, usize::from(self.span_powers), u, days);
        }
    }

    /// Moves where a factor's level x and influence quantities count from by `shift`. Needs a power
    /// of time for every span column.
    pub(crate) fn move_centre(self, factor: &mut Factor, shift: Centre) {
        for power in 0..self.span_columns() {
            factor.move_centre(self.span_place(power), power, shift.x);
        }
        for (influence, by) in (0..self.influence_columns()).zip(shift.influences) {
            factor.move_centre(self.influence_place(influence), 0, by);
        }
    }
}

/// Origin and unit of scaled time.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Frame {
    /// Where u is 0.
    anchor: Timestamp,
    /// u counts units of 2^this nanoseconds; 0 … 63.
    unit_exponent: u8,
}

/// Bits below the exponent of a float.
const MANTISSA_BITS: u32 = 52;
/// Exponent of 1.0 as stored.
const EXPONENT_BIAS: u64 = 1023;

impl Frame {
    /// Whether it is one that [`Frame::new`] makes.
    pub(crate) fn is_possible(self) -> bool {
        u32::from(self.unit_exponent) < u64::BITS
    }

    /// The frame at `anchor` whose unit is the smallest power of two of nanoseconds not below
    /// `span`.
    #[must_use]
    pub fn new(anchor: Timestamp, span: Duration) -> Self {
        let nanoseconds = span.0.max(1).unsigned_abs();
        let exponent = nanoseconds.next_power_of_two().trailing_zeros();
        // Lossless: at most 63.
        let unit_exponent = exponent.to_le_bytes()[0];
        Self {
            anchor,
            unit_exponent,
        }
    }

    /// Where scaled time is 0.
    #[must_use]
    pub fn anchor(self) -> Timestamp {
        self.anchor
    }

    /// The unit of scaled time in days: t/d from the anchor = u · this.
    #[must_use]
    pub fn unit_days(self) -> f64 {
        const NANOSECONDS_PER_DAY: f64 = 86_400e9;
        power_of_two(i16::from(self.unit_exponent)) / NANOSECONDS_PER_DAY
    }

    /// Scaled time of an instant.
    #[must_use]
    #[inline]
    pub fn scaled(self, time: Timestamp) -> f64 {
        time.since(self.anchor).0 as f64 * power_of_two(-i16::from(self.unit_exponent))
    }

    /// (shift, scale) such that u in `other` = (u in `self` − shift)·scale.
    fn step_to(self, other: Self) -> (f64, f64) {
        let scale = i16::from(self.unit_exponent) - i16::from(other.unit_exponent);
        (self.scaled(other.anchor), power_of_two(scale))
    }
}

/// 2^exponent, exactly; −63 … 63.
fn power_of_two(exponent: i16) -> f64 {
    let stored = EXPONENT_BIAS.wrapping_add_signed(i64::from(exponent));
    f64::from_bits(stored << MANTISSA_BITS)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_are_powers_of_two_not_below_the_span() {
        let frame = |span| Frame::new(Timestamp(0), Duration(span));
        for (span, exponent) in [(0, 0), (1, 0), (2, 1), (3, 2), (1024, 10), (i64::MAX, 63)] {
            assert_eq!(frame(span).unit_exponent, exponent, "span {span}");
        }
        let hour = Frame::new(
            Timestamp(1_700_000_000_000_000_000),
            Duration::from_seconds(3600),
        );
        let later = hour.anchor().plus(Duration::from_seconds(1800));
        assert!((0.25..=0.5).contains(&hour.scaled(later)));
        let days = hour.scaled(later) * hour.unit_days();
        assert!(
            (days * 48.0 - 1.0).abs() < 1e-15,
            "half an hour is 1/48 d, not {days}"
        );
    }

    #[test]
    fn a_step_between_frames_is_the_difference_of_scaled_times() {
        let from = Frame::new(Timestamp(1_000_003), Duration(5_000));
        let to = Frame::new(Timestamp(999_001), Duration(70_000));
        let (shift, scale) = from.step_to(to);
        for time in [0, 999_001, 1_000_003, 1_234_567].map(Timestamp) {
            let moved = (from.scaled(time) - shift) * scale;
            assert_eq!(
                moved.to_bits(),
                to.scaled(time).to_bits(),
                "exact by powers of two"
            );
        }
    }

    #[test]
    fn columns_stand_in_their_order() {
        let mut row = [0.0; 8];
        Columns::new(2, 3, 2).fill(0.5, 10.0, [7.0, 8.0], &mut row);
        let bits = |numbers: &[f64]| numbers.iter().map(|x| x.to_bits()).collect::<Vec<_>>();
        assert_eq!(
            bits(&row),
            bits(&[1.0, 0.5, 0.25, 10.0, 5.0, 2.5, 7.0, 8.0])
        );
        assert_eq!(
            bits(&Columns::powers(2, 0.5)[..4]),
            bits(&[1.0, 0.5, 0.25, 0.0])
        );
    }
}
