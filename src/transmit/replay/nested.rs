//! The matrix exponential of one generator over any length, from nested tables.
//!
//! A length is written with digits in base 32 and a rest; each digit is one stored propagator, and the rest a short
//! Taylor series on the vector:
//!
//! ```text
//! h = sum_k j_k L/32^k + r        exp(G h) z = T(r) prod_k (1 + D_k[j_k]) z,    D_k[j] = exp(G j L/32^k) - 1
//! ```
//!
//! It asks nothing of the eigenvectors: nearly parallel ones, rates of zero and rates of 1e8 are all alike to it.
//! The stored differences come from scaling and squaring ([`Flow`]).

use std::f64::consts::TAU;

use crate::math::flow::Flow;
use crate::math::small::{Column, Square};

/// Digits of a length are in this base.
const BASE: usize = 32;

/// The longest interval, rad: one period, and room for rounding.
pub const LONGEST_RAD: f64 = TAU * (1.0 + 1e-9);

/// The rest times the generator's norm stays below this.
const REST: f64 = 0.02;

/// The first dropped term of the series, relative to the state.
const DROPPED: f64 = 1e-17;

/// Tables of one generator.
#[derive(Debug, Clone)]
pub struct Nested<const M: usize> {
    generator: Square<M>,
    /// For each digit its differences from one, column by column, the zero digit left out.
    digits: Vec<Vec<Square<M>>>,
    terms: usize,
}

impl<const M: usize> Nested<M> {
    pub fn new(generator: &Square<M>) -> Self {
        let norm = generator.norm_1();
        let mut digits = Vec::new();
        let mut unit = LONGEST_RAD;
        while norm * unit > REST {
            unit /= BASE as f64;
            digits.push(
                (1..BASE)
                    .map(|digit| {
                        let flow = Flow::new(generator, digit as f64 * unit, 0);
                        flow.difference().transposed()
                    })
                    .collect(),
            );
        }
        let (mut terms, mut term) = (0, 1.0);
        while term > DROPPED && terms < 20 {
            terms += 1;
            term *= norm * unit / terms as f64;
        }
        Self {
            generator: generator.transposed(),
            digits,
            terms,
        }
    }

    /// `exp(G length) start`.
    #[inline]
    pub fn advance(&self, start: &Column<M>, length_rad: f64) -> Column<M> {
        let mut z = *start;
        let (mut rest, mut unit) = (length_rad, LONGEST_RAD);
        for digits in &self.digits {
            unit /= BASE as f64;
            let digit = ((rest / unit) as usize).min(BASE - 1);
            rest -= digit as f64 * unit;
            if let Some(difference) = digit.checked_sub(1).and_then(|at| digits.get(at)) {
                let change = columns_times(difference, &z);
                for (z, change) in z.iter_mut().zip(&change) {
                    *z += change;
                }
            }
        }
        let mut term = z;
        for order in 1..=self.terms {
            term = columns_times(&self.generator, &term);
            let factor = rest / order as f64;
            for (z, term) in z.iter_mut().zip(&mut term) {
                *term *= factor;
                *z += *term;
            }
        }
        z
    }
}

/// A matrix stored column by column times a vector.
#[inline]
pub fn columns_times<const M: usize>(columns: &Square<M>, z: &Column<M>) -> Column<M> {
    let mut result = [0.0; M];
    for (column, &z) in columns.0.iter().zip(z) {
        for (entry, column) in result.iter_mut().zip(column) {
            *entry += column * z;
        }
    }
    result
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn any_length_and_any_generator_equal_scaling_and_squaring() {
        // A damped oscillator, a defective pair, a rate of zero, a rate of 1e8.
        let oscillator = Square([[0.0, 10.0, 0.0], [-10.1, -2.0, 10.1], [0.0, 0.0, 0.0]]);
        let defective = Square([[-0.3, 1.0, 0.0], [0.0, -0.3, 0.0], [0.0, 0.0, 0.0]]);
        let stiff = Square([[-1e8, 1.0, 0.0], [0.0, -0.01, 1.0], [0.0, 0.0, 0.0]]);
        for generator in [oscillator, defective, stiff] {
            let nested = Nested::new(&generator);
            for step in 0..200 {
                let length = LONGEST_RAD * f64::from(step) / 199.7;
                let start = [0.4, -1.0, 1.0];
                let (a, b) = (
                    nested.advance(&start, length),
                    Flow::new(&generator, length, 0).end(&start),
                );
                for (a, b) in a.iter().zip(&b) {
                    // Both carry rounding of some tens of operations on numbers of order one.
                    assert!((a - b).abs() < 2e-13, "{length}: {a} {b}");
                }
            }
        }
    }

    #[test]
    fn a_defective_pair_has_its_closed_form() {
        // y1' = -0.3 y1 + y2, y2' = -0.3 y2: y1 = (1 + t) exp(-0.3 t) from (1, 1).
        let nested = Nested::new(&Square([[-0.3, 1.0], [0.0, -0.3]]));
        for length in [1e-9, 0.01, 1.7, 6.0] {
            let end = nested.advance(&[1.0, 1.0], length);
            let law = (1.0 + length) * (-0.3 * length).exp();
            assert!((end[0] - law).abs() < 1e-14, "{length}");
        }
    }
}
