//! Small systems of equations: one of the stages' size, and one with many right sides.

use crate::math::radau::STAGES;

/// A factored matrix of the stages.
#[derive(Debug, Clone, Default)]
pub struct Factors {
    lu: [[f64; STAGES]; STAGES],
    pivots: [usize; STAGES],
}

impl Factors {
    pub fn new(mut lu: [[f64; STAGES]; STAGES]) -> Option<Self> {
        let mut pivots = [0; STAGES];
        for k in 0..STAGES {
            let mut best = k;
            for i in k + 1..STAGES {
                if lu[i][k].abs() > lu[best][k].abs() {
                    best = i;
                }
            }
            pivots[k] = best;
            lu.swap(k, best);
            let head = lu[k][k];
            if head == 0.0 || !head.is_finite() {
                return None;
            }
            let above = lu[k];
            for row in lu.iter_mut().skip(k + 1) {
                let factor = row[k] / head;
                row[k] = factor;
                for j in k + 1..STAGES {
                    row[j] -= factor * above[j];
                }
            }
        }
        Some(Self { lu, pivots })
    }

    pub fn solve(&self, right: &mut [f64; STAGES]) {
        for k in 0..STAGES {
            right.swap(k, self.pivots[k]);
        }
        for i in 1..STAGES {
            for j in 0..i {
                right[i] -= self.lu[i][j] * right[j];
            }
        }
        for i in (0..STAGES).rev() {
            for j in i + 1..STAGES {
                right[i] -= self.lu[i][j] * right[j];
            }
            right[i] /= self.lu[i][i];
        }
    }
}

/// A system of equations with its right sides beside it, row by row.
#[derive(Debug)]
pub struct Eliminated {
    size: usize,
    width: usize,
    entries: Vec<f64>,
}

impl Eliminated {
    pub fn new(size: usize, sides: usize, entry: impl Fn(usize, usize) -> f64) -> Self {
        let width = size + sides;
        let mut entries = Vec::with_capacity(size * width);
        for row in 0..size {
            for column in 0..width {
                entries.push(entry(row, column));
            }
        }
        Self {
            size,
            width,
            entries,
        }
    }

    /// Elimination with partial pivoting, the solutions left in place of the right sides.
    pub fn solve(&mut self) -> Option<()> {
        let (size, width) = (self.size, self.width);
        for pivot in 0..size {
            let mut best = pivot;
            for row in pivot + 1..size {
                if self.entries[row * width + pivot].abs()
                    > self.entries[best * width + pivot].abs()
                {
                    best = row;
                }
            }
            if best != pivot {
                for column in pivot..width {
                    self.entries
                        .swap(pivot * width + column, best * width + column);
                }
            }
            let (above, below) = self.entries.split_at_mut((pivot + 1) * width);
            let head_row = &mut above[pivot * width..];
            let head = head_row[pivot];
            if head == 0.0 || !head.is_finite() {
                return None;
            }
            for entry in &mut head_row[pivot + 1..] {
                *entry /= head;
            }
            for row in below.chunks_exact_mut(width) {
                let factor = row[pivot];
                if factor != 0.0 {
                    for (entry, over) in row[pivot + 1..].iter_mut().zip(&head_row[pivot + 1..]) {
                        *entry -= factor * over;
                    }
                }
            }
        }
        for pivot in (1..size).rev() {
            let (above, below) = self.entries.split_at_mut(pivot * width);
            let solved = &below[size..width];
            for row in above.chunks_exact_mut(width) {
                let factor = row[pivot];
                for (entry, under) in row[size..].iter_mut().zip(solved) {
                    *entry -= factor * under;
                }
            }
        }
        Some(())
    }

    /// The solutions of one row.
    pub fn row(&self, row: usize) -> &[f64] {
        &self.entries[row * self.width + self.size..(row + 1) * self.width]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn elimination_solves_a_system_that_needs_pivoting() {
        // 2 y = 4, x + y = 5 beside a second side: solutions (3, 2) and (-1, 1).
        let rows = [[0.0, 2.0, 4.0, 2.0], [1.0, 1.0, 5.0, 0.0]];
        let mut system = Eliminated::new(2, 2, |row, column| rows[row][column]);
        system.solve().unwrap();
        assert_eq!(system.row(0), [3.0, -1.0]);
        assert_eq!(system.row(1), [2.0, 1.0]);
    }
}
