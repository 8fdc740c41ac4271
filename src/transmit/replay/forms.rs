//! Integrals of powers in closed form.
//!
//! For `y' = A y + b u`, `u' = s`, `s' = 0` and a power `p = y^T Q y + y^T q u + k u^2` there is a function of the
//! state whose rate is that power, up to powers of the supply alone (Lyapunov's equation):
//!
//! ```text
//! V = y^T P y + y^T p1 u + y^T p2 s
//! A^T P + P A = Q      A^T p1 = q - 2 P b      A^T p2 = -p1
//! integral of p = [V] + (k - b^T p1) int u^2 - (b^T p2) int u s
//! ```

use nalgebra::{DMatrix, DVector};

use crate::math::small::{Column, Square, dot};

/// The integral of one power over any interval in one switch position.
#[derive(Debug, Clone)]
pub struct Form<const M: usize> {
    matrix: Square<M>,
    square: f64,
    slope: f64,
}

/// The integrals of the supply's square and of the supply times its slope.
#[derive(Debug, Clone, Copy, Default)]
pub struct SupplyIntegrals {
    pub square: f64,
    pub slope: f64,
}

impl SupplyIntegrals {
    /// Over `length` from `supply` with `slope`.
    #[inline]
    pub fn new(supply: f64, slope: f64, length: f64) -> Self {
        let rise = slope * length;
        Self {
            square: length * (supply * (supply + rise) + rise * rise / 3.0),
            slope: rise * (supply + 0.5 * rise),
        }
    }
}

/// Solves for forms in one switch position.
#[derive(Debug)]
pub struct Former<'a> {
    a: &'a DMatrix<f64>,
    b: &'a DVector<f64>,
    /// `A^T X + X A` as a matrix over the entries of `X`, decomposed.
    lyapunov: nalgebra::LU<f64, nalgebra::Dyn, nalgebra::Dyn>,
    transposed: nalgebra::LU<f64, nalgebra::Dyn, nalgebra::Dyn>,
}

impl<'a> Former<'a> {
    pub fn new(a: &'a DMatrix<f64>, b: &'a DVector<f64>) -> Self {
        let n = a.nrows();
        // Entry (i, j) of A^T X + X A = sum_k A[k,i] X[k,j] + X[i,k] A[k,j].
        let mut system = DMatrix::zeros(n * n, n * n);
        for i in 0..n {
            for j in 0..n {
                for k in 0..n {
                    system[(i * n + j, k * n + j)] += a[(k, i)];
                    system[(i * n + j, i * n + k)] += a[(k, j)];
                }
            }
        }
        Self {
            a,
            b,
            lyapunov: system.lu(),
            transposed: a.transpose().lu(),
        }
    }

    /// The form of the sum of `weight * (left . (y, u)) * (right . (y, u))`; `None` where something rings without loss.
    pub fn form<const M: usize>(
        &self,
        weighted: &[(f64, DVector<f64>, DVector<f64>)],
    ) -> Option<Form<M>> {
        let n = self.a.nrows();
        let mut power = DMatrix::<f64>::zeros(n + 1, n + 1);
        for (weight, left, right) in weighted {
            let product = *weight * left * right.transpose();
            power += 0.5 * (&product + product.transpose());
        }
        let right = DVector::from_fn(n * n, |at, _| power[(at / n, at % n)]);
        let solved = self.lyapunov.solve(&right)?;
        let p = DMatrix::from_fn(n, n, |i, j| solved[i * n + j]);
        let q = 2.0 * power.view((0, n), (n, 1)).column(0);
        let first = self.transposed.solve(&(q - 2.0 * &p * self.b))?;
        let second = self.transposed.solve(&-&first)?;
        let mut matrix = Square::ZERO;
        for i in 0..n {
            for j in 0..n {
                matrix.0[i][j] = 0.5 * (p[(i, j)] + p[(j, i)]);
            }
            for (at, column) in [(n, &first), (n + 1, &second)] {
                matrix.0[i][at] = 0.5 * column[i];
                matrix.0[at][i] = 0.5 * column[i];
            }
        }
        let size = matrix
            .0
            .as_flattened()
            .iter()
            .fold(0.0f64, |m, x| m.max(x.abs()));
        // Past this, cancellation would cost more than five of sixteen digits.
        (size.is_finite() && size <= 1e10 * power.amax().max(1e-300)).then_some(Form {
            matrix,
            square: power[(n, n)] - self.b.dot(&first),
            slope: -self.b.dot(&second),
        })
    }
}

impl<const M: usize> Form<M> {
    /// The integral from `start` to `end`.
    #[inline]
    pub fn integral(&self, start: &Column<M>, end: &Column<M>, supply: &SupplyIntegrals) -> f64 {
        // x^T F x - y^T F y = (x + y)^T F (x - y) for a symmetric F: one product in place of two.
        let (mut sum, mut difference) = ([0.0; M], [0.0; M]);
        for i in 0..M {
            sum[i] = end[i] + start[i];
            difference[i] = end[i] - start[i];
        }
        dot(&sum, &self.matrix.apply(&difference))
            + self.square * supply.square
            + self.slope * supply.slope
    }
}
