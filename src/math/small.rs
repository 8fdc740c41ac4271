//! Small square matrices of a size fixed at compile time, on the stack.

/// A square matrix, row by row.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Square<const N: usize>(pub [[f64; N]; N]);

/// A column of `N` numbers.
pub type Column<const N: usize> = [f64; N];

impl<const N: usize> Square<N> {
    /// All zeros.
    pub const ZERO: Self = Self([[0.0; N]; N]);

    /// Ones on the diagonal.
    pub fn identity() -> Self {
        let mut result = Self::ZERO;
        for (i, row) in result.0.iter_mut().enumerate() {
            row[i] = 1.0;
        }
        result
    }

    /// Every entry times `factor`.
    #[must_use]
    pub fn scaled(mut self, factor: f64) -> Self {
        for entry in self.0.as_flattened_mut() {
            *entry *= factor;
        }
        self
    }

    /// Adds `factor * other` in place.
    pub fn add_scaled(&mut self, factor: f64, other: &Self) {
        for (entry, other) in self
            .0
            .as_flattened_mut()
            .iter_mut()
            .zip(other.0.as_flattened())
        {
            *entry += factor * other;
        }
    }

    /// `self * other`.
    #[must_use]
    pub fn times(&self, other: &Self) -> Self {
        let mut result = Self::ZERO;
        for i in 0..N {
            for k in 0..N {
                let left = self.0[i][k];
                for j in 0..N {
                    result.0[i][j] += left * other.0[k][j];
                }
            }
        }
        result
    }

    /// `self * transpose(other)`.
    #[must_use]
    pub fn times_transposed(&self, other: &Self) -> Self {
        self.times(&other.transposed())
    }

    /// Rows and columns exchanged.
    #[must_use]
    pub fn transposed(&self) -> Self {
        let mut result = Self::ZERO;
        for i in 0..N {
            for j in 0..N {
                result.0[i][j] = self.0[j][i];
            }
        }
        result
    }

    /// `self * column`.
    pub fn apply(&self, column: &Column<N>) -> Column<N> {
        let mut result = [0.0; N];
        for (entry, row) in result.iter_mut().zip(&self.0) {
            *entry = dot(row, column);
        }
        result
    }

    /// Largest sum of magnitudes in a column: the 1-norm.
    pub fn norm_1(&self) -> f64 {
        let mut sums = [0.0; N];
        for row in &self.0 {
            for (sum, entry) in sums.iter_mut().zip(row) {
                *sum += entry.abs();
            }
        }
        sums.into_iter().fold(0.0, f64::max)
    }

    /// Solves `A x = b`, where `A` is the leading `size` rows and columns, by elimination with partial
    /// pivoting. Entries of the result past `size` are zero. `None` where a pivot vanishes.
    pub fn solve_leading(&self, size: usize, right: &Column<N>) -> Option<Column<N>> {
        let mut matrix = self.0;
        let mut column = *right;
        for pivot in 0..size {
            let best = (pivot..size)
                .max_by(|&a, &b| matrix[a][pivot].abs().total_cmp(&matrix[b][pivot].abs()))?;
            matrix.swap(pivot, best);
            column.swap(pivot, best);
            let head = matrix[pivot][pivot];
            if head == 0.0 || !head.is_finite() {
                return None;
            }
            for row in pivot + 1..size {
                let factor = matrix[row][pivot] / head;
                if factor == 0.0 {
                    continue;
                }
                let (above, below) = matrix.split_at_mut(row);
                for (entry, pivot_entry) in below[0][pivot..size]
                    .iter_mut()
                    .zip(&above[pivot][pivot..size])
                {
                    *entry -= factor * pivot_entry;
                }
                column[row] -= factor * column[pivot];
            }
        }
        let mut result = [0.0; N];
        for row in (0..size).rev() {
            let known: f64 = (row + 1..size).map(|k| matrix[row][k] * result[k]).sum();
            result[row] = (column[row] - known) / matrix[row][row];
        }
        result[..size]
            .iter()
            .all(|x| x.is_finite())
            .then_some(result)
    }
}

/// The sum of products.
pub fn dot<const N: usize>(a: &Column<N>, b: &Column<N>) -> f64 {
    let mut sum = 0.0;
    for i in 0..N {
        sum += a[i] * b[i];
    }
    sum
}
