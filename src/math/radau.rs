//! Radau collocation of five stages (order 9, L-stable), its error estimate and its dense output.
//!
//! Nodes are the roots of `P_s(2c - 1) - P_{s-1}(2c - 1)`, the last one being 1; the coefficients integrate the
//! Lagrange polynomials through them. Method and error estimate: E. Hairer, G. Wanner, "Solving Ordinary
//! Differential Equations II", sections IV.5 and IV.8 (recalled from memory; the tests check orders and stability).
//!
//! ```text
//! Y_i = y_0 + h sum_j a_ij f(Y_j),   y_1 = Y_s
//! error = (I - h g J)^-1 [ h g f(y_0) + sum_i e_i (Y_i - y_0) ]
//! ```

use std::sync::LazyLock;

use nalgebra::{DMatrix, DVector};

/// Number of stages.
pub const STAGES: usize = 5;

/// The order of the error estimate: it falls as the step to this power plus one.
pub const ESTIMATE_ORDER: usize = STAGES;

/// The weight of the start in the error estimate: the real eigenvalue of the coefficients of the five-stage
/// method is 1/6.2867; any positive weight makes a valid estimate.
const START_WEIGHT: f64 = 1.0 / 6.286_704_751_729_276;

/// The coefficients.
#[derive(Debug, Clone, PartialEq)]
pub struct Radau {
    /// Nodes in 0..=1.
    pub nodes: [f64; STAGES],
    /// `a[i][j]`; the last row holds the weights of the quadrature.
    pub a: [[f64; STAGES]; STAGES],
    /// `g` of the error estimate.
    pub start_weight: f64,
    /// `e` of the error estimate.
    pub error: [f64; STAGES],
    /// `poly[k][j]`: the coefficient of `theta^(k+1)` for a unit difference at node `j` from the start.
    pub poly: [[f64; STAGES]; STAGES],
}

/// The one instance.
pub static RADAU: LazyLock<Radau> = LazyLock::new(Radau::new);

impl Radau {
    fn new() -> Self {
        let nodes = nodes();
        let power = |k: i32| move |i: usize, j: usize| nodes[i].powi(j as i32 + k);
        // sum_k coefficient[k] c^k through values at the nodes: V coefficient = values.
        let vandermonde = DMatrix::from_fn(STAGES, STAGES, power(0));
        let integrals = DMatrix::from_fn(STAGES, STAGES, |i, j| {
            nodes[i].powi(j as i32 + 1) / (j + 1) as f64
        });
        let inverse = vandermonde
            .clone()
            .try_inverse()
            .unwrap_or_else(|| DMatrix::identity(STAGES, STAGES));
        let a = integrals * &inverse;
        let mut right = DVector::zeros(STAGES);
        right[0] = -START_WEIGHT;
        // sum_j e'_j c_j^(k-1) = -g for k = 1 and 0 above; then e = A^-T e'.
        let weights = inverse.transpose() * right;
        let from_differences = a
            .clone()
            .try_inverse()
            .unwrap_or_else(|| DMatrix::identity(STAGES, STAGES));
        let error = from_differences.transpose() * weights;
        let poly = DMatrix::from_fn(STAGES, STAGES, power(1))
            .try_inverse()
            .unwrap_or_else(|| DMatrix::identity(STAGES, STAGES));
        let table = |m: &DMatrix<f64>| std::array::from_fn(|i| std::array::from_fn(|j| m[(i, j)]));
        Self {
            nodes,
            a: table(&a),
            start_weight: START_WEIGHT,
            error: std::array::from_fn(|i| error[i]),
            poly: table(&poly),
        }
    }

    /// Coefficients of `theta, theta^2, ...` of the polynomial through `start` at 0 and `values` at the nodes.
    pub fn polynomial(&self, start: f64, values: &[f64; STAGES]) -> [f64; STAGES] {
        let mut coefficients = [0.0; STAGES];
        for (coefficient, row) in coefficients.iter_mut().zip(&self.poly) {
            for (weight, value) in row.iter().zip(values) {
                *coefficient += weight * (value - start);
            }
        }
        coefficients
    }
}

/// `start + sum_k coefficients[k] theta^(k+1)`, and its slope.
pub fn evaluate(start: f64, coefficients: &[f64; STAGES], theta: f64) -> (f64, f64) {
    let (mut value, mut slope) = (0.0, 0.0);
    for coefficient in coefficients.iter().rev() {
        slope = slope * theta + value;
        value = value * theta + coefficient;
    }
    // value is sum_k coefficients[k] theta^k, one power short.
    (start + value * theta, slope * theta + value)
}

fn nodes() -> [f64; STAGES] {
    // P_n and its slope at x by the three-term recurrence.
    let legendre = |x: f64| {
        let (mut before, mut here) = (1.0, x);
        for n in 1..STAGES {
            let n = n as f64;
            (before, here) = (here, ((2.0 * n + 1.0) * x * here - n * before) / (n + 1.0));
        }
        here - before
    };
    let mut found = [1.0; STAGES];
    // All roots but the last lie inside -1..1 and are well apart: bracket them on a grid.
    let grid = |i: usize| -1.0 + 1.999 * i as f64 / 400.0;
    let mut next = 0;
    for i in 0..400 {
        let (mut low, mut high) = (grid(i), grid(i + 1));
        if legendre(low) * legendre(high) < 0.0 && next < STAGES - 1 {
            for _ in 0..60 {
                let middle = 0.5 * (low + high);
                if legendre(low) * legendre(middle) <= 0.0 {
                    high = middle;
                } else {
                    low = middle;
                }
            }
            found[next] = 0.5 * (0.5 * (low + high) + 1.0);
            next += 1;
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn weights_integrate_powers_to_twice_the_stages_less_two() {
        let radau = &*RADAU;
        for power in 0..2 * STAGES - 1 {
            let sum: f64 = (0..STAGES)
                .map(|j| radau.a[STAGES - 1][j] * radau.nodes[j].powi(power as i32))
                .sum();
            assert!(
                (sum - 1.0 / (power + 1) as f64).abs() < 2e-14,
                "power {power}: {sum}"
            );
        }
        // Not one more: the test would pass for any rule otherwise.
        let past = 2 * STAGES as i32;
        let sum: f64 = (0..STAGES)
            .map(|j| radau.a[STAGES - 1][j] * radau.nodes[j].powi(past))
            .sum();
        assert!((sum - 1.0 / f64::from(past + 1)).abs() > 1e-7);
    }

    #[test]
    fn first_node_and_weight_are_the_tabulated_ones() {
        // Radau abscissae of five points on -1..1 with the fixed end at -1 (mirrored here): M. Abramowitz,
        // I. A. Stegun, "Handbook of Mathematical Functions", section 25.4.31: 0.885791607770965 (from memory).
        let radau = &*RADAU;
        assert!((radau.nodes[0] - 0.5 * (1.0 - 0.885_791_607_770_965)).abs() < 1e-14);
        // The weight of the fixed end is 2 / n^2 on -1..1.
        assert!((radau.a[STAGES - 1][STAGES - 1] - 1.0 / 25.0).abs() < 1e-14);
    }

    #[test]
    fn dense_output_reproduces_a_quintic() {
        let radau = &*RADAU;
        let f = |x: f64| 2.0 - x + 3.0 * x.powi(3) - 0.7 * x.powi(5);
        let values = radau.nodes.map(f);
        let poly = radau.polynomial(f(0.0), &values);
        let (value, slope) = evaluate(f(0.0), &poly, 0.37);
        assert!((value - f(0.37)).abs() < 1e-13);
        let expected = -1.0 + 9.0 * 0.37f64.powi(2) - 3.5 * 0.37f64.powi(4);
        assert!((slope - expected).abs() < 1e-12, "{slope} {expected}");
    }
}
