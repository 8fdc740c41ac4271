//! Complex linear least squares of any length: `min |A c - b|^2 + ridge |S c|^2`.
//!
//! Rows come block by block. Each block is stacked below the triangle of all rows before it and the triangle is
//! taken again by Householder reflections, so that memory does not grow and the condition number is not
//! squared as by normal equations (G. H. Golub, C. F. Van Loan, "Matrix Computations", section on updating a
//! QR factorization). `S` holds the columns' norms: the ridge is a pure number whatever the columns' sizes.

use nalgebra::DMatrix;
use num_complex::Complex64;

/// Rows folded in at once.
const BLOCK: usize = 256;

/// Condition number past which a solution without ridge says nothing: rounding reaches the first digit.
const WORST_CONDITION: f64 = 1e14;

/// Why there is no solution.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum LeastSquaresError {
    /// Fewer rows than unknowns.
    #[error("{rows} rows for {columns} unknowns: at least as many rows are needed")]
    TooFewRows {
        /// Rows given.
        rows: u64,
        /// Unknowns.
        columns: usize,
    },
    /// A column that is zero or not finite throughout.
    #[error("column {index} holds nothing that could be fitted")]
    EmptyColumn {
        /// From 1.
        index: usize,
    },
    /// Columns that depend on each other.
    #[error(
        "the columns depend on each other (condition number {condition:.1e}): use fewer terms, or a ridge"
    )]
    Dependent {
        /// Of the columns at norm one.
        condition: f64,
    },
}

/// A solution with what tells its worth.
#[derive(Debug, Clone, PartialEq)]
pub struct Solution {
    /// The unknowns.
    pub coefficients: Vec<Complex64>,
    /// Largest over smallest singular value of the columns scaled to norm one, the ridge left out.
    pub condition: f64,
    /// `|A c - b|^2`, the ridge left out.
    pub residual_square: f64,
    /// `|b|^2`
    pub target_square: f64,
    /// Rows taken.
    pub rows: u64,
}

/// Rows so far, as their triangle.
#[derive(Debug, Clone)]
pub struct LeastSquares {
    columns: usize,
    /// Square, of columns + 1: the target is the last column.
    triangle: DMatrix<Complex64>,
    pending: Vec<Complex64>,
    rows: u64,
}

impl LeastSquares {
    /// No rows yet, of `columns` unknowns.
    pub fn new(columns: usize) -> Self {
        let side = columns + 1;
        Self {
            columns,
            triangle: DMatrix::zeros(side, side),
            pending: Vec::with_capacity(BLOCK * side),
            rows: 0,
        }
    }

    /// Adds one row and its target. Of a row shorter than the unknowns the rest is zero.
    pub fn push(&mut self, row: impl IntoIterator<Item = Complex64>, target: Complex64) {
        let start = self.pending.len();
        self.pending.extend(row.into_iter().take(self.columns));
        self.pending.resize(start + self.columns, Complex64::ZERO);
        self.pending.push(target);
        self.rows += 1;
        if self.pending.len() == BLOCK * (self.columns + 1) {
            self.fold();
        }
    }

    /// Adds all rows of `other`, which has as many unknowns.
    pub fn merge(&mut self, other: &Self) {
        let side = self.columns + 1;
        if other.columns != self.columns {
            return;
        }
        for index in 0..side {
            let row: Vec<_> = other.triangle.row(index).iter().copied().collect();
            self.push(row[..self.columns].iter().copied(), row[self.columns]);
        }
        for row in other.pending.chunks_exact(side) {
            self.push(row[..self.columns].iter().copied(), row[self.columns]);
        }
        // The triangle's rows stand for those that made it.
        self.rows = self.rows - side as u64 - (other.pending.len() / side) as u64 + other.rows;
    }

    /// The same rows with only the unknowns of `columns`, in their order.
    #[must_use]
    pub fn select(&self, columns: &[usize]) -> Self {
        let mut whole = self.clone();
        whole.fold();
        let mut selected = Self::new(columns.len());
        for row in whole.triangle.row_iter() {
            let target = row[self.columns];
            selected.push(columns.iter().map(|&column| row[column]), target);
        }
        selected.fold();
        selected.rows = self.rows;
        selected
    }

    fn fold(&mut self) {
        let side = self.columns + 1;
        let fresh = self.pending.len() / side;
        if fresh == 0 {
            return;
        }
        let stacked = DMatrix::from_fn(side + fresh, side, |row, column| {
            if row < side {
                self.triangle[(row, column)]
            } else {
                self.pending[(row - side) * side + column]
            }
        });
        self.triangle = stacked.qr().r();
        self.pending.clear();
    }

    /// `|A c - b|^2` and `|b|^2` of all rows for any coefficients.
    pub fn missed(&self, coefficients: &[Complex64]) -> (f64, f64) {
        let mut whole = self.clone();
        whole.fold();
        let n = self.columns;
        let (mut missed, mut target) = (0.0, 0.0);
        for row in whole.triangle.row_iter() {
            let fitted: Complex64 = (0..n.min(coefficients.len()))
                .map(|column| row[column] * coefficients[column])
                .sum();
            missed += (fitted - row[n]).norm_sqr();
            target += row[n].norm_sqr();
        }
        (missed, target)
    }

    /// The best coefficients; `ridge` is 0 for none, and small against 1.
    ///
    /// # Errors
    /// [`LeastSquaresError`].
    pub fn solve(&self, ridge: f64) -> Result<Solution, LeastSquaresError> {
        let mut whole = self.clone();
        whole.fold();
        let (n, triangle) = (self.columns, &whole.triangle);
        if self.rows < n as u64 {
            return Err(LeastSquaresError::TooFewRows {
                rows: self.rows,
                columns: n,
            });
        }
        let square = triangle.view((0, 0), (n, n)).into_owned();
        let norms: Vec<f64> = square.column_iter().map(|column| column.norm()).collect();
        if let Some(index) = norms
            .iter()
            .position(|norm| !(*norm > 0.0 && norm.is_finite()))
        {
            return Err(LeastSquaresError::EmptyColumn { index: index + 1 });
        }
        let scaled = DMatrix::from_fn(n, n, |row, column| square[(row, column)] / norms[column]);
        let singular = scaled.clone().svd(false, false).singular_values;
        let condition = singular.max() / singular.min();
        if ridge <= 0.0 && (condition.is_nan() || condition >= WORST_CONDITION) {
            return Err(LeastSquaresError::Dependent { condition });
        }
        let target = triangle.view((0, n), (n, 1)).into_owned();
        let c = if ridge > 0.0 {
            let root = Complex64::from(ridge.sqrt());
            let stacked = DMatrix::from_fn(2 * n, n + 1, |row, column| match (row, column) {
                (row, column) if row < n && column < n => scaled[(row, column)],
                (row, _) if row < n => target[(row, 0)],
                (row, column) if row - n == column => root,
                _ => Complex64::ZERO,
            });
            let r = stacked.qr().r();
            back_substituted(&r.columns(0, n).into_owned(), &r.columns(n, 1).into_owned())
        } else {
            back_substituted(&scaled, &target)
        };
        let missed = &scaled * DMatrix::from_column_slice(n, 1, &c) - &target;
        let rest = triangle[(n, n)].norm_sqr();
        Ok(Solution {
            coefficients: c.iter().zip(&norms).map(|(c, norm)| c / norm).collect(),
            condition,
            residual_square: missed.norm_squared() + rest,
            target_square: target.norm_squared() + rest,
            rows: self.rows,
        })
    }
}

/// Solves the upper triangle `r` for the first column of `target`.
fn back_substituted(r: &DMatrix<Complex64>, target: &DMatrix<Complex64>) -> Vec<Complex64> {
    let n = r.ncols();
    let mut c = vec![Complex64::ZERO; n];
    for row in (0..n).rev() {
        let known: Complex64 = (row + 1..n)
            .map(|column| r[(row, column)] * c[column])
            .sum();
        c[row] = (target[(row, 0)] - known) / r[(row, row)];
    }
    c
}

#[cfg(test)]
mod tests {
    use super::*;

    fn rows(count: usize, columns: usize) -> Vec<Vec<Complex64>> {
        let value = |n: usize| {
            let phase = (n * n) as f64 * 0.618_033_988_75;
            Complex64::from_polar(1.0 + 0.3 * (n as f64).sin(), phase)
        };
        (0..count)
            .map(|row| {
                (0..columns)
                    .map(|column| value(row * columns + column))
                    .collect()
            })
            .collect()
    }

    #[test]
    fn exact_targets_are_solved_exactly_whatever_the_blocks_and_scales() {
        let truth: Vec<_> = (0..7)
            .map(|n| Complex64::new(f64::from(n), -0.5) / 10f64.powi(n))
            .collect();
        let mut system = LeastSquares::new(7);
        let mut halves = [LeastSquares::new(7), LeastSquares::new(7)];
        for (index, row) in rows(1000, 7).iter().enumerate() {
            let scaled: Vec<_> = row
                .iter()
                .enumerate()
                .map(|(n, v)| v * 10f64.powi(n as i32))
                .collect();
            let target = scaled.iter().zip(&truth).map(|(a, c)| a * c).sum();
            system.push(scaled.clone(), target);
            halves[index % 2].push(scaled, target);
        }
        let solution = system.solve(0.0).unwrap();
        let [mut both, other] = halves;
        both.merge(&other);
        let merged = both.solve(0.0).unwrap();
        for ((got, merged), c) in solution
            .coefficients
            .iter()
            .zip(&merged.coefficients)
            .zip(&truth)
        {
            assert!((got - c).norm() < 1e-11 * c.norm(), "{got} {c}");
            assert!((merged - c).norm() < 1e-11 * c.norm(), "{merged} {c}");
        }
        assert_eq!((solution.rows, merged.rows), (1000, 1000));
        assert!(solution.residual_square < 1e-20 * solution.target_square);
        assert!(solution.condition < 2.0);
    }

    #[test]
    fn a_ridge_shrinks_as_its_formula_says() {
        // One column of norm s: c = <a, b> / (s^2 (1 + ridge)).
        let mut system = LeastSquares::new(1);
        for n in 0..300 {
            system.push([Complex64::from(2.0)], Complex64::from(f64::from(n)));
        }
        let (plain, ridged) = (system.solve(0.0).unwrap(), system.solve(0.25).unwrap());
        assert!((plain.coefficients[0].re - 74.75).abs() < 1e-12);
        assert!((ridged.coefficients[0] * 1.25 - plain.coefficients[0]).norm() < 1e-12);
    }

    #[test]
    fn what_cannot_be_solved_is_said() {
        let mut system = LeastSquares::new(2);
        system.push([Complex64::ONE, Complex64::ONE], Complex64::ONE);
        assert!(matches!(
            system.solve(0.0),
            Err(LeastSquaresError::TooFewRows { .. })
        ));
        for _ in 0..9 {
            system.push([Complex64::ONE, Complex64::ONE], Complex64::ONE);
        }
        assert!(matches!(
            system.solve(0.0),
            Err(LeastSquaresError::Dependent { .. })
        ));
        let ridged = system.solve(1e-6).unwrap();
        assert!((ridged.coefficients[0] - 0.5).norm() < 1e-6);
        let mut empty = LeastSquares::new(1);
        empty.push([Complex64::ZERO], Complex64::ONE);
        assert_eq!(
            empty.solve(0.0),
            Err(LeastSquaresError::EmptyColumn { index: 1 })
        );
    }
}
