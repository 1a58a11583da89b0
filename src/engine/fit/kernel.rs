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
/// A column whose part not explained by the columns before it is smaller than 1e-12 of it (the
/// inverse of this) counts as dependent on them. Rounding leaves about 1e-15 of a dependent column;
/// 1e-12 is far above that, and a direction known to 1e-12 of its length would bear no digits that
/// anyone could use.
const PER_DEPENDENT: f64 = 1e12;

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
fn scale_for(largest: f64) -> f64 {
    const EXPONENT_BITS: u32 = 52;
    const LARGEST_EXPONENT: u64 = 2046;
    let exponent = largest.to_bits() >> EXPONENT_BITS;
    f64::from_bits((LARGEST_EXPONENT - exponent.min(LARGEST_EXPONENT - 1)) << EXPONENT_BITS)
}

/// √(a² + b²), or 0 if both are.
#[inline]
fn length(a: f64, b: f64) -> f64 {
    let squares = a * a + b * b;
    if SQUARES_SAFE.contains(&squares) {
        squares.sqrt()
    } else {
        length_scaled(a, b)
    }
}

/// [`length`] of numbers whose squares would overflow or vanish.
#[cold]
#[inline(never)]
fn length_scaled(a: f64, b: f64) -> f64 {
    let largest = a.abs().max(b.abs());
    if largest == 0.0 {
        return 0.0;
    }
    let scale = scale_for(largest);
    let (a, b) = (a * scale, b * scale);
    (a * a + b * b).sqrt() / scale
}

/// Writes a loop over all rows of a factor out, with the row's number as a constant: the compiler
/// then keeps what the steps hand to one another in registers. (A loop whose body is this long it
/// leaves a loop.)
macro_rules! for_rows {
    ($i:ident < $width:ident $body:block) => {
        for_rows!(@ $i, $width, $body, 0 1 2 3 4 5 6 7 8 9 10 11)
    };
    (@ $i:ident, $width:ident, $body:block, $($number:literal)*) => {
        $({
            let $i: usize = $number;
            if $i < $width $body
        })*
    };
}

/// [`insert`] for a row whose length is only known to its caller.
pub(crate) fn insert_slice<const W: usize>(packed: &mut [f64], row: &[f64]) {
    let row = <&[f64; W]>::try_from(row).expect("a row as wide as the factor");
    insert(packed, row);
}

/// Merges a factor of one row, which is that row, after moving its error by −`level`.
pub(crate) fn insert_first_row<const W: usize>(packed: &mut [f64], other: &[f64], level: f64) {
    let mut row = *<&[f64; W]>::try_from(&other[..W]).expect("W entries");
    row[W - 1] -= level * row[0];
    insert(packed, &row);
}

/// Rotates the row `x` into the factor.
///
/// The rotation of rows (r, x) is chosen so that the new diagonal is ≥ 0 and x loses its leading
/// entry. (The copy of the row lives in registers: each rotation needs the one before.)
#[inline]
#[allow(
    clippy::needless_return,
    reason = "the last step of the written-out loop"
)]
fn insert<const W: usize>(packed: &mut [f64], row: &[f64; W]) {
    let mut x = *row;
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    for_rows!(i < W {
        if !enter(&mut packed[row_start(W, i)..row_start(W, i) + W - i], &mut x, i) {
            return;
        }
    });
}

/// One step of [`insert`]; false if nothing of x is left for the rows below.
#[inline(always)]
#[allow(
    clippy::inline_always,
    reason = "compiled for each i, so that its loops have fixed lengths"
)]
fn enter<const W: usize>(row: &mut [f64], x: &mut [f64; W], i: usize) -> bool {
    if row[0] != 0.0 {
        rotate(row, x, i);
        return true;
    }
    if x[i] == 0.0 {
        return true;
    }
    // An empty row takes x as it is: the rotation by a right angle, with the sign that keeps the
    // diagonal positive.
    let sign = if x[i] < 0.0 { -1.0 } else { 1.0 };
    for j in i..W {
        row[j - i] = sign * x[j];
    }
    false
}

/// Rotates one row into two factors, into the second with another error in its last place.
///
/// Same results as two calls of [`insert`], bit for bit. Each rotation has to wait for the one
/// before it; side by side, the two chains wait together.
#[allow(unused_assignments, reason = "the last step of the written-out loop")]
pub(crate) fn insert_both<const W: usize>(
    first: &mut [f64],
    second: &mut [f64],
    row: &[f64],
    second_error: f64,
) {
    assert_eq!(first.len(), packed_len(W), "a factor of this width");
    assert_eq!(second.len(), packed_len(W), "factors of one width");
    let mut x = *<&[f64; W]>::try_from(row).expect("a row as wide as the factor");
    let mut y = x;
    y[W - 1] = second_error;
    let mut full = true;
    for i in 0..W {
        full &= first[row_start(W, i)] != 0.0;
    }
    if !full {
        insert(first, &x);
        insert(second, &y);
        return;
    }
    let mut left = true;
    for_rows!(i < W {
        rotate(&mut first[row_start(W, i)..row_start(W, i) + W - i], &mut x, i);
        left = left
            && enter(&mut second[row_start(W, i)..row_start(W, i) + W - i], &mut y, i);
    });
}

/// The rotation of row i of a factor, whose diagonal is not 0, with x that clears x[i].
#[inline(always)]
#[allow(
    clippy::inline_always,
    reason = "compiled for each i, so that its loops have fixed lengths"
)]
fn rotate<const W: usize>(row: &mut [f64], x: &mut [f64; W], i: usize) {
    let diagonal = length(row[0], x[i]);
    let (cosine, sine) = (row[0] / diagonal, x[i] / diagonal);
    row[0] = diagonal;
    for j in i + 1..W {
        let (above, below) = (row[j - i], x[j]);
        row[j - i] = cosine * above + sine * below;
        x[j] = cosine * below - sine * above;
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
    if (FEW..W).all(|i| other[row_start(W, i)] == 0.0) {
        merge_leading::<W, FEW>(packed, other, level);
    } else {
        merge_leading::<W, W>(packed, other, level);
    }
}

/// Factors of segments with so few rows are worth shorter loops.
const FEW: usize = 4;

/// [`merge`] of the first R rows of `other`.
fn merge_leading<const W: usize, const R: usize>(packed: &mut [f64], other: &[f64], level: f64) {
    let mut rows = [[0.0; W]; R];
    for i in 0..R.min(W) {
        rows[i][i..].copy_from_slice(&other[row_start(W, i)..row_start(W, i) + W - i]);
    }
    rows[0][W - 1] -= level * rows[0][0];
    for_rows!(j < W {
        let above = &mut packed[row_start(W, j)..row_start(W, j) + W - j];
        reflect_column(above, &mut rows, j);
    });
}

/// One step of [`merge`]: the Householder reflection of rows (above, rows 0 … j) that clears column
/// j of `rows`, with `above` negated after it.
///
/// With x = (d, v) the column and l its length, the reflection along (d + l, v) takes x to (−l, 0):
/// nothing cancels since d ≥ 0. Any other column (a, r) becomes (−ā, r − v(a + ā)/(l + d)) with
/// ā = (d·a + v·r)/l; the negation makes it ā and the diagonal l.
#[inline(always)]
#[allow(
    clippy::inline_always,
    reason = "compiled for each j, so that its loops have fixed lengths"
)]
fn reflect_column<const W: usize, const R: usize>(
    above: &mut [f64],
    rows: &mut [[f64; W]; R],
    j: usize,
) {
    let mut vector = [0.0; R];
    let reach = R.min(j + 1);
    // Two sums, so that neighbours don't wait for one another.
    let mut squares = [above[0] * above[0], 0.0];
    for i in 0..reach {
        vector[i] = rows[i][j];
        squares[(i + 1) % 2] += vector[i] * vector[i];
    }
    let mut diagonal = above[0];
    let mut length = squares[0] + squares[1];
    let mut scale = 1.0;
    if SQUARES_SAFE.contains(&length) {
        length = length.sqrt();
    } else {
        let Some(scaled) = scale_column(diagonal, vector) else {
            return;
        };
        (vector, diagonal, length, scale) = scaled;
    }
    let (per_length, per_sum) = (1.0 / length, 1.0 / (length + diagonal));
    above[0] = length / scale;
    // All columns to the right at once, so that neighbours share vector registers.
    let mut products = [0.0; W];
    for k in j + 1..W {
        products[k] = diagonal * above[k - j];
    }
    for i in 0..reach {
        for k in j + 1..W {
            products[k] += vector[i] * rows[i][k];
        }
    }
    for k in j + 1..W {
        let reflected = products[k] * per_length;
        products[k] = (above[k - j] + reflected) * per_sum;
        above[k - j] = reflected;
    }
    for i in 0..reach {
        for k in j + 1..W {
            rows[i][k] -= products[k] * vector[i];
        }
    }
}

/// Scales a column whose squares would overflow or vanish; (vector, diagonal, length, scale), or
/// `None` if the column is zero.
#[cold]
#[inline(never)]
fn scale_column<const W: usize>(
    diagonal: f64,
    mut vector: [f64; W],
) -> Option<([f64; W], f64, f64, f64)> {
    let largest = vector.iter().fold(diagonal, |most, v| most.max(v.abs()));
    if largest == 0.0 {
        return None;
    }
    let scale = scale_for(largest);
    let diagonal = diagonal * scale;
    let mut squares = diagonal * diagonal;
    for entry in &mut vector {
        *entry *= scale;
        squares += *entry * *entry;
    }
    Some((vector, diagonal, squares.sqrt(), scale))
}

/// Replaces the `count` columns from `from` on, multiples of powers of u, by those of (u −
/// shift)·scale in the first `rows` rows; see `Factor::move_origin`.
pub(crate) fn move_origin<const W: usize>(
    packed: &mut [f64],
    rows: usize,
    (from, count): (usize, usize),
    (shift, scale): (f64, f64),
) {
    // All columns are powers of time in most factors: constants let the loops unroll.
    if (rows, from, count) == (W, 0, W - 1) {
        move_columns::<W>(packed, W, (0, W - 1), (shift, scale));
    } else {
        move_columns::<W>(packed, rows, (from, count), (shift, scale));
    }
}

#[inline(always)]
#[allow(
    clippy::inline_always,
    reason = "compiled twice, once with constants for columns"
)]
fn move_columns<const W: usize>(
    packed: &mut [f64],
    rows: usize,
    (from, count): (usize, usize),
    (shift, scale): (f64, f64),
) {
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    assert!(from + count < W && rows <= W, "columns of Φ");
    for i in 0..rows.min(from + count) {
        let mut powers = [0.0; W];
        for power in 0..count {
            if from + power >= i {
                powers[power] = packed[row_start(W, i) + from + power - i];
            }
        }
        for pass in 1..count {
            for power in (pass..count).rev() {
                powers[power] -= shift * powers[power - 1];
            }
        }
        let mut factor = 1.0;
        for power in 0..count {
            if from + power >= i {
                packed[row_start(W, i) + from + power - i] = powers[power] * factor;
            }
            factor *= scale;
        }
    }
}

/// Sums of squares of the last column below each row: element k is what k + 1 columns leave.
pub(crate) fn nested_rss<const W: usize>(packed: &[f64], rss: &mut [f64; MAX_WIDTH - 1]) {
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    let mut sum = 0.0;
    for i in (1..W).rev() {
        let left = packed[row_start(W, i) + W - 1 - i];
        sum += left * left;
        rss[i - 1] = sum;
    }
}

/// Solves the leading `columns` columns, R·x = z with z the error column; false if they are not
/// independent, see [`independent`].
///
/// Back substitution, Golub & Van Loan Algorithm 3.1.4.
pub(crate) fn solve<const W: usize>(
    packed: &[f64],
    columns: usize,
    x: &mut [f64; MAX_WIDTH - 1],
) -> bool {
    // The whole model is what is asked for at every row: a constant lets its loops unroll.
    if columns == W - 1 {
        solve_leading::<W>(packed, W - 1, x)
    } else {
        solve_leading::<W>(packed, columns, x)
    }
}

#[inline(always)]
#[allow(
    clippy::inline_always,
    reason = "compiled twice, once with `columns` a constant"
)]
fn solve_leading<const W: usize>(
    packed: &[f64],
    columns: usize,
    x: &mut [f64; MAX_WIDTH - 1],
) -> bool {
    assert_eq!(packed.len(), packed_len(W), "a factor of this width");
    assert!(columns < W, "the error column is not an unknown");
    let mut all = true;
    for j in 0..columns {
        all &= independent::<W>(packed, j);
    }
    if !all {
        return false;
    }
    // Column by column: each unknown is taken out of all rows above at once, so that only one
    // product, one difference and one division per unknown wait for one another.
    for i in 0..columns {
        x[i] = packed[row_start(W, i) + W - 1 - i];
    }
    for j in (0..columns).rev() {
        x[j] /= packed[row_start(W, j)];
        for i in 0..j {
            x[i] -= packed[row_start(W, i) + j - i] * x[j];
        }
    }
    true
}

/// Whether column j keeps a part of its own beside the columns before it: a diagonal above
/// 1e-12 of the column's largest entry.
#[inline]
pub(crate) fn independent<const W: usize>(packed: &[f64], j: usize) -> bool {
    let own = packed[row_start(W, j)];
    let limit = own * PER_DEPENDENT;
    let mut all = own > 0.0;
    for i in 0..j {
        all &= packed[row_start(W, i) + j - i].abs() < limit;
    }
    all
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
