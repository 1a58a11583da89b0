//! The inner loops on packed upper-triangular factors, compiled once per width so that every loop
//! has a fixed length.
//!
//! A factor of width W (columns of Φ and the error column) is stored row by row without its zeros:
//! row i starts at [`row_start`] and holds W − i entries. Two invariants hold before and after
//! every function here: diagonals are ≥ 0, and a row whose diagonal is 0 is zero altogether (it has
//! not met a row of data yet).
//!
//! Sources: Givens rotations Golub & Van Loan, *Matrix Computations*, 4th ed., §5.1.8 and §6.5;
//! Householder vectors without cancellation ibid. Algorithm 5.1.1 (from memory).

/// Widest factor: 6 time columns, 3 span columns, 2 influence columns and the error.
pub(crate) const MAX_WIDTH: usize = 12;

/// Sums of squares between these bounds lost nothing to underflow and can't have overflowed;
/// outside, the numbers are scaled first.
const SQUARES_SAFE: core::ops::Range<f64> = 1e-250..1e290;
/// Length of a packed factor of this width.
pub(crate) const fn packed_len(width: usize) -> usize {
    width * (width + 1) / 2
}

/// Where row `i` begins in a packed factor of this width.
pub(crate) const fn row_start(width: usize, i: usize) -> usize {
    // The rows above hold width, width − 1, … entries.
    i * (2 * width + 1 - i) / 2
}

/// The power of two that brings `largest` > 0 to about 1; multiplying by it is exact. (For the very
/// smallest floats, the largest power there is.)
#[cold]
fn scale_for(largest: f64) -> f64 {
    const EXPONENT_BITS: u32 = 52;
    const LARGEST_EXPONENT: u64 = 2046;
    let exponent = largest.to_bits() >> EXPONENT_BITS;
    f64::from_bits((LARGEST_EXPONENT - exponent.min(LARGEST_EXPONENT - 1)) << EXPONENT_BITS)
}

/// √(a² + b²), or 0 if both are.
fn length(a: f64, b: f64) -> f64 {
    let squares = a * a + b * b;
    if SQUARES_SAFE.contains(&squares) {
        return squares.sqrt();
    }
    if squares == 0.0 && a == 0.0 && b == 0.0 {
        return 0.0;
    }
    let scale = scale_for(a.abs().max(b.abs()));
    let (a, b) = (a * scale, b * scale);
    (a * a + b * b).sqrt() / scale
}

/// [`insert`] for a row whose length is only known to its caller.
pub(crate) fn insert_slice<const W: usize>(packed: &mut [f64], x: &mut [f64]) {
    insert(
        packed,
        <&mut [f64; W]>::try_from(x).expect("a row as wide as the factor"),
    );
}

/// Merges a factor of one row, which is that row, after moving its error by −`level`.
pub(crate) fn insert_first_row<const W: usize>(packed: &mut [f64], other: &[f64], level: f64) {
    let mut row = [0.0; W];
    row.copy_from_slice(&other[..W]);
    row[W - 1] -= level * row[0];
    insert(packed, &mut row);
}

/// Rotates the row `x` into the factor; `x` is used up.
///
/// The rotation of rows (r, x) is chosen so that the new diagonal is ≥ 0 and x loses its leading
/// entry.
pub(crate) fn insert<const W: usize>(packed: &mut [f64], x: &mut [f64; W]) {
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    for i in 0..W {
        let row = &mut packed[row_start(W, i)..row_start(W, i) + W - i];
        let leading = x[i];
        if leading == 0.0 {
            continue;
        }
        if row[0] == 0.0 {
            // An empty row takes x as it is: the rotation by a right angle, with the sign that
            // keeps the diagonal positive. Nothing of x is left for the rows below.
            let sign = if leading < 0.0 { -1.0 } else { 1.0 };
            for j in i..W {
                row[j - i] = sign * x[j];
            }
            return;
        }
        let diagonal = length(row[0], leading);
        let (cosine, sine) = (row[0] / diagonal, leading / diagonal);
        row[0] = diagonal;
        for j in i + 1..W {
            let (above, below) = (row[j - i], x[j]);
            row[j - i] = cosine * above + sine * below;
            x[j] = cosine * below - sine * above;
        }
    }
}

/// Merges the factor `other` into `packed`, after moving `other`'s errors by −`level` (its first
/// column must then be the constant 1).
///
/// Column by column, one Householder reflection takes the rows of `other` that reach this column
/// into the diagonal: one square root per column where rotations would need one per entry.
pub(crate) fn merge<const W: usize>(packed: &mut [f64], other: &[f64], level: f64) {
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    assert_eq!(other.len(), packed_len(W), "factors of one width");
    let mut rows = [[0.0; W]; W];
    for i in 0..W {
        let row = &other[row_start(W, i)..row_start(W, i) + W - i];
        rows[i][i..].copy_from_slice(row);
    }
    rows[0][W - 1] -= level * rows[0][0];
    for j in 0..W {
        let above = &mut packed[row_start(W, j)..row_start(W, j) + W - j];
        reflect_column(above, &mut rows, j);
    }
}

/// One step of [`merge`]: the Householder reflection of rows (above, rows 0 … j) that clears column
/// j of `rows`.
fn reflect_column<const W: usize>(above: &mut [f64], rows: &mut [[f64; W]; W], j: usize) {
    let mut vector = [0.0; W];
    let mut scale = 1.0;
    let mut below = 0.0;
    for i in 0..=j {
        vector[i] = rows[i][j];
        below += vector[i] * vector[i];
    }
    let mut diagonal = above[0];
    let mut squares = diagonal * diagonal + below;
    if !SQUARES_SAFE.contains(&squares) {
        let largest = vector.iter().fold(diagonal, |most, v| most.max(v.abs()));
        if largest == 0.0 {
            return;
        }
        scale = scale_for(largest);
        diagonal *= scale;
        below = 0.0;
        for entry in &mut vector[..=j] {
            *entry *= scale;
            below += *entry * *entry;
        }
        squares = diagonal * diagonal + below;
    }
    if below == 0.0 {
        return;
    }
    let length = squares.sqrt();
    // diagonal − length, written so that nothing cancels.
    let head = -below / (diagonal + length);
    let factor = 2.0 / (head * head + below);
    above[0] = length / scale;
    for k in j + 1..W {
        let mut product = head * above[k - j];
        for i in 0..=j {
            product += vector[i] * rows[i][k];
        }
        let product = product * factor;
        above[k - j] -= product * head;
        for i in 0..=j {
            rows[i][k] -= product * vector[i];
        }
    }
}

/// Solves the leading `columns` columns: R·x = z with z the error column. Diagonals must be > 0.
///
/// Back substitution, Golub & Van Loan Algorithm 3.1.2.
pub(crate) fn back_substitute<const W: usize>(packed: &[f64], columns: usize, x: &mut [f64]) {
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    assert!(
        columns < W && columns <= x.len(),
        "the error column is not an unknown"
    );
    for i in (0..columns).rev() {
        let row = &packed[row_start(W, i)..row_start(W, i) + W - i];
        let mut rest = row[W - 1 - i];
        for j in i + 1..columns {
            rest -= row[j - i] * x[j];
        }
        x[i] = rest / row[0];
    }
}

/// Calls a kernel with the width as a constant.
macro_rules! with_width {
    ($width:expr, $kernel:ident, $($argument:expr),*) => {
        match $width {
            2 => crate::fit::kernel::$kernel::<2>($($argument),*),
            3 => crate::fit::kernel::$kernel::<3>($($argument),*),
            4 => crate::fit::kernel::$kernel::<4>($($argument),*),
            5 => crate::fit::kernel::$kernel::<5>($($argument),*),
            6 => crate::fit::kernel::$kernel::<6>($($argument),*),
            7 => crate::fit::kernel::$kernel::<7>($($argument),*),
            8 => crate::fit::kernel::$kernel::<8>($($argument),*),
            9 => crate::fit::kernel::$kernel::<9>($($argument),*),
            10 => crate::fit::kernel::$kernel::<10>($($argument),*),
            11 => crate::fit::kernel::$kernel::<11>($($argument),*),
            12 => crate::fit::kernel::$kernel::<12>($($argument),*),
            other => unreachable!("a factor is 2 to 12 wide, not {other}"),
        }
    };
}
pub(crate) use with_width;

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rows_follow_one_another_without_gaps() {
        for width in 1..=MAX_WIDTH {
            assert_eq!(row_start(width, 0), 0);
            for i in 1..width {
                assert_eq!(
                    row_start(width, i),
                    row_start(width, i - 1) + width - (i - 1)
                );
            }
            assert_eq!(row_start(width, width), packed_len(width));
        }
    }

    #[test]
    fn length_keeps_its_digits_where_squares_would_not() {
        for size in [
            f64::from_bits(1),
            1e-310,
            1e-200,
            1e-130,
            1.0,
            1e140,
            1e200,
            2e307,
        ] {
            let found = length(3.0 * size, -4.0 * size);
            assert!((found / size - 5.0).abs() < 1e-14, "{size}: {found}");
        }
        assert_eq!(length(0.0, 0.0).to_bits(), 0.0_f64.to_bits());
    }
}
