//! `Factor`: any number of rows of a least-squares problem, summarised by one small triangle.
//!
//! A row is [φ | e]: the p columns of the model and the error. Rows scaled by √w, stacked and
//! brought to upper triangular form by rotations give the (p+1)×(p+1) factor R of the augmented
//! matrix; `RᵀR` is all that least squares ever needs, and nothing is ever subtracted from it, so
//! it can't lose definiteness. The first column of Φ must be the constant 1 where levels are moved
//! or mean rows are read.
//!
//! Source: recursive least squares in square-root form, Golub & Van Loan, *Matrix Computations*,
//! 4th ed., §5.1.8 and §6.5; Björck, *Numerical Methods for Least Squares Problems*, §3.2 (from
//! memory).

use crate::fit::kernel::{MAX_WIDTH, packed_len, row_start, with_width};
use nalgebra::{DMatrix, DVector, SVector};
use serde::{Deserialize, Serialize};

/// Most columns of Φ: time degree 5, span degree 2, two influence quantities.
pub const MAX_COLUMNS: usize = MAX_WIDTH - 1;
/// One number per column, zero beyond the factor's own.
pub type PerColumn = SVector<f64, MAX_COLUMNS>;

/// The upper-triangular factor of the augmented matrix [Φ | e] of a set of rows, with the number of
/// rows.
///
/// Diagonals are ≥ 0. Every entry is finite as long as the rows' are and their number is below 2⁶⁴.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "Stored", into = "Stored")]
pub struct Factor {
    /// Columns of Φ and the error column.
    width: u8,
    /// Rows inserted or merged in so far.
    rows: u64,
    /// The triangle, row by row without its zeros; see the kernel module.
    packed: DVector<f64>,
}

/// How a factor is stored: nalgebra's own serde support needs its `std` feature, which brings a
/// matrix product that differs between processors.
#[derive(Serialize, Deserialize)]
struct Stored {
    width: u8,
    rows: u64,
    packed: Vec<f64>,
}

impl From<Factor> for Stored {
    fn from(factor: Factor) -> Self {
        let Factor {
            width,
            rows,
            packed,
        } = factor;
        Self {
            width,
            rows,
            packed: packed.as_slice().to_vec(),
        }
    }
}

impl TryFrom<Stored> for Factor {
    type Error = String;

    fn try_from(stored: Stored) -> Result<Self, String> {
        let Stored {
            width,
            rows,
            packed,
        } = stored;
        let wide = usize::from(width);
        if !(2..=MAX_WIDTH).contains(&wide) || packed.len() != packed_len(wide) {
            return Err(format!(
                "a factor {width} wide with {} entries",
                packed.len()
            ));
        }
        if !packed.iter().all(|entry| entry.is_finite()) {
            return Err("a factor with an entry that is not finite".to_owned());
        }
        Ok(Self {
            width,
            rows,
            packed: DVector::from_vec(packed),
        })
    }
}

impl Factor {
    /// The factor of no rows, for `columns` (1 … [`MAX_COLUMNS`]) columns of Φ.
    ///
    /// # Panics
    /// With any other number of columns.
    #[must_use]
    pub fn new(columns: usize) -> Self {
        assert!(
            (1..=MAX_COLUMNS).contains(&columns),
            "1 to {MAX_COLUMNS} columns"
        );
        let width = columns + 1;
        let packed = DVector::zeros(packed_len(width));
        let wide = u8::try_from(width).expect("at most MAX_WIDTH");
        Self {
            width: wide,
            rows: 0,
            packed,
        }
    }

    /// Columns of Φ.
    #[must_use]
    pub fn columns(&self) -> usize {
        usize::from(self.width) - 1
    }

    /// Rows that it summarises.
    #[inline]
    #[must_use]
    pub fn rows(&self) -> u64 {
        self.rows
    }

    /// Entry of row `i`, column `j` of R; column [`Factor::columns`] is the error's.
    ///
    /// # Panics
    /// Outside the matrix.
    #[must_use]
    pub fn entry(&self, i: usize, j: usize) -> f64 {
        let width = usize::from(self.width);
        assert!(
            i < width && j < width,
            "entry ({i}, {j}) of a factor {width} wide"
        );
        if j < i {
            0.0
        } else {
            self.packed[row_start(width, i) + j - i]
        }
    }

    /// Forgets all rows, keeping the memory.
    pub fn clear(&mut self) {
        self.rows = 0;
        self.packed.fill(0.0);
    }

    /// Becomes a copy of `other` without allocating.
    ///
    /// # Panics
    /// If the widths differ.
    pub fn copy_from(&mut self, other: &Self) {
        assert_eq!(self.width, other.width, "factors of one width");
        self.rows = other.rows;
        self.packed.copy_from(&other.packed);
    }

    /// Takes one row [φ | e], already multiplied by √w. The row's memory is used up. Entries must
    /// be finite.
    ///
    /// # Panics
    /// If the row's length isn't `columns() + 1`.
    pub fn insert(&mut self, row: &[f64]) {
        debug_assert!(row.iter().all(|x| x.is_finite()), "rows are finite");
        with_width!(self.width, insert_slice, self.packed.as_mut_slice(), row);
        self.rows += 1;
    }

    /// Takes one row like [`Factor::insert`], and so does `other`, but with `other_error` as its
    /// last entry. The same bits as two insertions, in less time.
    ///
    /// # Panics
    /// If the widths differ, or the row's length isn't `columns() + 1`.
    #[inline]
    pub(crate) fn insert_both(&mut self, other: &mut Self, row: &[f64], other_error: f64) {
        debug_assert!(row.iter().all(|x| x.is_finite()), "rows are finite");
        let (mine, theirs) = (self.packed.as_mut_slice(), other.packed.as_mut_slice());
        with_width!(self.width, insert_both, mine, theirs, row, other_error);
        self.rows += 1;
        other.rows += 1;
    }

    /// Takes all rows of `other`.
    ///
    /// # Panics
    /// If the widths differ.
    pub fn merge(&mut self, other: &Self) {
        self.merge_level(other, 0.0);
    }

    /// Takes all rows of `other`, their errors counted from a level higher by `level`: e − level.
    /// `other` is not changed. Needs the first column to be the constant 1 (times √w) unless
    /// `level` is 0.
    ///
    /// # Panics
    /// If the widths differ.
    pub fn merge_level(&mut self, other: &Self, level: f64) {
        if other.rows == 0 {
            return;
        }
        let (mine, theirs) = (self.packed.as_mut_slice(), other.packed.as_slice());
        if other.is_one_row() {
            with_width!(self.width, insert_first_row, mine, theirs, level);
        } else {
            with_width!(self.width, merge, mine, theirs, level);
        }
        self.rows += other.rows;
    }

    /// Whether it is one row, standing in R's first and nothing below.
    fn is_one_row(&self) -> bool {
        self.rows == 1 && self.packed[0] > 0.0
    }

    /// Counts errors from a level higher by `level`: e becomes e − level. Exact for every residual
    /// sum of squares of a model with a constant, since only R₀ₑ changes: R₀ₑ ← R₀ₑ − level·R₀₀.
    pub fn move_level(&mut self, level: f64) {
        let last = self.columns();
        self.packed[last] -= level * self.packed[0];
    }

    /// Replaces the `count` columns from `first` on, which hold x·1, x·u, x·u², … (x any common
    /// multiplier, 1 for the time columns), by the same powers of u′ = (u − shift)·scale, scale >
    /// 0.
    ///
    /// This is R ← R·S with S upper triangular, `S_jk = C(k,j)(−shift)^(k−j)·scale^k`, so R stays
    /// triangular. S is applied as the product of its bidiagonal factors: one pass per power, each
    /// exchanging one factor u of the columns from that power on for a factor u − shift (repeated
    /// synthetic division).
    ///
    /// # Panics
    /// If the columns are not all columns of Φ.
    pub fn move_origin(&mut self, first: usize, count: usize, shift: f64, scale: f64) {
        assert!(first + count < usize::from(self.width), "columns of Φ");
        let rows = if self.is_one_row() {
            1
        } else {
            usize::from(self.width)
        };
        let packed = self.packed.as_mut_slice();
        with_width!(
            self.width,
            move_origin,
            packed,
            rows,
            (first, count),
            (shift, scale)
        );
    }

    /// Replaces column `column`, which holds a product x·p, by (x − shift)·p, where column `of`
    /// holds p: R ← R·S, S the identity with −shift at (`of`, `column`).
    ///
    /// # Panics
    /// Unless `of` < `column` < `columns()`.
    pub(crate) fn move_centre(&mut self, column: usize, of: usize, shift: f64) {
        assert!(of < column && column < self.columns(), "columns of Φ");
        let width = usize::from(self.width);
        for i in 0..=of {
            let row = row_start(width, i);
            self.packed[row + column - i] -= shift * self.packed[row + of - i];
        }
    }

    /// Multiplies every row by `root_weight` = √w > 0.
    pub fn multiply(&mut self, root_weight: f64) {
        debug_assert!(
            root_weight > 0.0 && root_weight.is_finite(),
            "weights are positive"
        );
        self.packed *= root_weight;
    }

    /// Sum of the rows' weights, from the constant column: R₀₀².
    #[must_use]
    pub fn weight_sum(&self) -> f64 {
        self.packed[0] * self.packed[0]
    }

    /// The weighted mean of all rows, [1, φ̄₁, …, ē]: the first row of R over its first element;
    /// `None` without rows. The error's mean stands at index `columns()`.
    #[must_use]
    pub fn mean_row(&self) -> Option<SVector<f64, MAX_WIDTH>> {
        let root = self.packed[0];
        (root > 0.0).then(|| {
            let mut mean = SVector::zeros();
            for j in 0..usize::from(self.width) {
                mean[j] = self.packed[j] / root;
            }
            mean
        })
    }

    /// Residual sums of squares of the models made of the first 1, 2, … columns: element k belongs
    /// to k + 1 columns, which is degree k where the time columns come first. Never grows from one
    /// element to the next. Elements beyond `columns()` repeat the last one. Meaningful where the
    /// columns are independent, see [`Factor::independent`].
    ///
    /// `RSS_k = Σ_{i>k} R_ie²`, as the last column below row k is what no longer can be explained.
    #[inline]
    #[must_use]
    pub fn nested_rss(&self) -> PerColumn {
        let mut rss = [0.0; MAX_COLUMNS];
        with_width!(self.width, nested_rss, self.packed.as_slice(), &mut rss);
        PerColumn::from(rss)
    }

    /// How many leading columns are independent of one another in these rows: less than `columns()`
    /// with fewer rows than columns, or with all rows at fewer times than columns.
    #[must_use]
    pub fn independent(&self) -> usize {
        (0..self.columns())
            .take_while(|&j| self.is_independent(j))
            .count()
    }

    /// Whether column j keeps a part of its own beside the columns before it.
    fn is_independent(&self, j: usize) -> bool {
        with_width!(self.width, independent, self.packed.as_slice(), j)
    }

    /// Least-squares coefficients of the model made of the first `columns` columns, in this
    /// factor's own units of time and level; `None` if these columns are not independent.
    ///
    /// # Panics
    /// If the factor has fewer columns.
    #[inline]
    #[must_use]
    pub fn solve(&self, columns: usize) -> Option<PerColumn> {
        assert!(columns <= self.columns(), "columns of Φ");
        let mut x = [0.0; MAX_COLUMNS];
        let packed = self.packed.as_slice();
        with_width!(self.width, solve, packed, columns, &mut x).then(|| PerColumn::from(x))
    }

    /// φᵀ(RᵀR)⁻¹φ for the model of the first `phi.len()` columns: the variance of the fit at φ in
    /// units of the residual variance. One triangular solve, Rᵀv = φ, then |v|². `None` if the
    /// columns are not independent.
    ///
    /// # Panics
    /// If the factor has fewer columns than `phi`.
    #[must_use]
    pub fn leverage(&self, phi: &[f64]) -> Option<f64> {
        let v = self.whitened(phi)?;
        Some(v.iter().fold(0.0, |sum, entry| sum + entry * entry))
    }

    /// R⁻ᵀφ for the model of the first `phi.len()` columns, zero beyond: the row of Q = ΦR⁻¹, an
    /// orthonormal basis of the model, that belongs to φ. `None` if the columns are not
    /// independent.
    ///
    /// # Panics
    /// If the factor has fewer columns than `phi`.
    #[must_use]
    pub fn whitened(&self, phi: &[f64]) -> Option<PerColumn> {
        assert!(phi.len() <= self.columns(), "columns of Φ");
        let mut v = PerColumn::zeros();
        for j in 0..phi.len() {
            if !self.is_independent(j) {
                return None;
            }
            let mut rest = phi[j];
            for i in 0..j {
                rest -= self.entry(i, j) * v[i];
            }
            v[j] = rest / self.entry(j, j);
        }
        Some(v)
    }

    /// R⁻¹ of the first `columns` columns, the factor of their covariance: (ΦᵀΦ)⁻¹ = R⁻¹R⁻ᵀ in
    /// units of the residual variance. `None` if the columns are not independent.
    ///
    /// # Panics
    /// If the factor has fewer columns.
    #[must_use]
    pub fn covariance_factor(&self, columns: usize) -> Option<DMatrix<f64>> {
        assert!(columns <= self.columns(), "columns of Φ");
        if !(0..columns).all(|j| self.is_independent(j)) {
            return None;
        }
        let triangle = DMatrix::from_fn(columns, columns, |i, j| self.entry(i, j));
        triangle.solve_upper_triangular(&DMatrix::identity(columns, columns))
    }

    /// The factor of the model made of `chosen` columns in that order: the chosen columns of R,
    /// brought back to triangular form. Same rows, so its residual sums compare with this factor's.
    ///
    /// # Panics
    /// If a chosen column does not exist, or none is chosen.
    #[must_use]
    pub fn choose(&self, chosen: &[usize]) -> Self {
        assert!(chosen.iter().all(|&j| j < self.columns()), "columns of Φ");
        let mut narrow = Self::new(chosen.len());
        let mut row = [0.0; MAX_WIDTH];
        for i in 0..usize::from(self.width) {
            for (place, &j) in chosen.iter().enumerate() {
                row[place] = self.entry(i, j);
            }
            row[chosen.len()] = self.entry(i, self.columns());
            narrow.insert(&row[..=chosen.len()]);
        }
        narrow.rows = self.rows;
        narrow
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    /// Rows [1, u, u²,  | e] with e = u³ and weights.
    fn rows() -> Vec<[f64; 4]> {
        (0..9)
            .map(|i| f64::from(i) / 4.0 - 1.0)
            .map(|u| [1.0, u, u * u, u * u * u])
            .collect()
    }

    fn factor_of(rows: &[[f64; 4]]) -> Factor {
        let mut factor = Factor::new(3);
        for row in rows {
            factor.insert(row);
        }
        factor
    }

    fn assert_close(a: &Factor, b: &Factor, tolerance: f64) {
        assert_eq!(a.rows(), b.rows());
        for i in 0..=a.columns() {
            for j in i..=a.columns() {
                assert_relative_eq!(
                    a.entry(i, j),
                    b.entry(i, j),
                    epsilon = tolerance,
                    max_relative = tolerance
                );
            }
        }
    }

    #[test]
    fn normal_equations_are_kept() {
        let factor = factor_of(&rows());
        for a in 0..4 {
            for b in 0..4 {
                let expected: f64 = rows().iter().map(|row| row[a] * row[b]).sum();
                let found: f64 = (0..4)
                    .map(|i| factor.entry(i, a) * factor.entry(i, b))
                    .sum();
                assert_relative_eq!(found, expected, epsilon = 1e-13);
            }
        }
    }

    #[test]
    fn merging_parts_is_inserting_all_rows() {
        let all = rows();
        for cut in 0..=all.len() {
            let mut first = factor_of(&all[..cut]);
            first.merge(&factor_of(&all[cut..]));
            assert_close(&first, &factor_of(&all), 1e-14);
        }
    }

    #[test]
    fn a_moved_origin_is_the_origin_the_rows_could_have_had() {
        let (shift, scale) = (0.75, 0.5);
        let moved: Vec<_> = rows()
            .iter()
            .map(|row| {
                let v = (row[1] - shift) * scale;
                [1.0, v, v * v, row[3]]
            })
            .collect();
        let mut factor = factor_of(&rows());
        factor.move_origin(0, 3, shift, scale);
        assert_close(&factor, &factor_of(&moved), 1e-14);
    }

    #[test]
    fn a_moved_level_leaves_every_rss_with_a_constant_as_it_was() {
        let mut factor = factor_of(&rows());
        let before = factor.nested_rss();
        factor.move_level(1e6);
        assert_eq!(factor.nested_rss(), before);
        assert_relative_eq!(
            factor.mean_row().expect("rows")[3],
            -1e6,
            max_relative = 1e-15
        );
    }

    #[test]
    fn dependent_columns_are_named_not_solved() {
        assert_eq!(Factor::new(3).independent(), 0);
        assert!(Factor::new(3).solve(1).is_none());
        // Fewer rows than columns.
        let two = factor_of(&rows()[..2]);
        assert_eq!(two.independent(), 2);
        assert!(two.solve(3).is_none());
        assert!(two.solve(2).is_some());
        // All rows at one time that is not the origin.
        let same = factor_of(&[rows()[0]; 5]);
        assert_eq!(same.independent(), 1);
        assert!(same.leverage(&[1.0, 0.3]).is_none());
        assert!(same.covariance_factor(2).is_none());
        assert_relative_eq!(
            same.leverage(&[1.0]).expect("a mean"),
            0.2,
            max_relative = 1e-15
        );
    }

    #[test]
    fn leverage_and_covariance_tell_the_same_variance() {
        let factor = factor_of(&rows());
        let phi = [1.0, 0.4, 0.16];
        let inverse = factor.covariance_factor(3).expect("independent");
        let v = inverse.transpose() * nalgebra::DVector::from_column_slice(&phi);
        let leverage = factor.leverage(&phi).expect("independent");
        assert_relative_eq!(leverage, v.norm_squared(), max_relative = 1e-13);
    }

    #[test]
    fn chosen_columns_are_the_factor_of_those_columns() {
        let even = factor_of(&rows()).choose(&[0, 2]);
        let mut direct = Factor::new(2);
        for row in rows() {
            direct.insert(&[row[0], row[2], row[3]]);
        }
        assert_close(&even, &direct, 1e-14);
    }

    #[test]
    fn huge_and_tiny_rows_neither_overflow_nor_vanish() {
        for size in [1e-160, 1e-300, 1e160, 1e300] {
            let scaled: Vec<_> = rows().iter().map(|row| row.map(|x| x * size)).collect();
            let (plain, mut merged) = (factor_of(&rows()), factor_of(&scaled[..5]));
            merged.merge(&factor_of(&scaled[5..]));
            let inserted = factor_of(&scaled);
            for (i, j) in [(0, 0), (0, 3), (1, 2), (2, 2), (3, 3)] {
                let expected = plain.entry(i, j) * size;
                assert_relative_eq!(merged.entry(i, j), expected, epsilon = 1e-14 * size);
                assert_relative_eq!(inserted.entry(i, j), expected, epsilon = 1e-14 * size);
            }
        }
    }
}
