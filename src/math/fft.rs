//! Discrete Fourier transforms of one length, planned once and owned by whoever repeats them.

use std::fmt;
use std::sync::Arc;

use num_complex::Complex64;
use rustfft::{Fft, FftPlanner};

/// Both directions of one length, unscaled, in place, with their scratch.
///
/// `forward` is `X[k] = sum x[n] exp(-j 2 pi k n / length)`; `inverse` has the opposite sign and no
/// factor, so that one after the other multiplies by the length.
#[derive(Clone)]
pub struct Transform {
    length: usize,
    forward: Arc<dyn Fft<f64>>,
    inverse: Arc<dyn Fft<f64>>,
    scratch: Vec<Complex64>,
}

impl fmt::Debug for Transform {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.debug_struct("Transform")
            .field("length", &self.length)
            .finish_non_exhaustive()
    }
}

impl Transform {
    /// Plans both directions of `length` points; a length of 0 is taken as 1.
    pub fn new(length: usize) -> Self {
        let length = length.max(1);
        let mut planner = FftPlanner::new();
        let forward = planner.plan_fft_forward(length);
        let inverse = planner.plan_fft_inverse(length);
        let scratch = forward
            .get_inplace_scratch_len()
            .max(inverse.get_inplace_scratch_len());
        Self {
            length,
            forward,
            inverse,
            scratch: vec![Complex64::ZERO; scratch],
        }
    }

    /// Points of one transform.
    pub fn length(&self) -> usize {
        self.length
    }

    /// Transforms `data` in place; its length must be a multiple of [`length`](Self::length), each part is one transform.
    pub fn forward(&mut self, data: &mut [Complex64]) {
        self.forward.process_with_scratch(data, &mut self.scratch);
    }

    /// The opposite direction of [`forward`](Self::forward), unscaled.
    pub fn inverse(&mut self, data: &mut [Complex64]) {
        self.inverse.process_with_scratch(data, &mut self.scratch);
    }
}

/// The smallest length of at least `at_least` points whose only prime factors are 2, 3 and 5: such
/// lengths transform fast.
pub fn fast_length(at_least: usize) -> usize {
    let at_least = at_least.max(1);
    let mut best = at_least.checked_next_power_of_two().unwrap_or(at_least);
    let mut fives = 1_usize;
    while fives < best {
        let mut odd = fives;
        while odd < best {
            let mut length = odd;
            while length < at_least {
                length *= 2;
            }
            best = best.min(length);
            odd = odd.saturating_mul(3);
        }
        fives = fives.saturating_mul(5);
    }
    best
}

/// The signed index of bin `bin` of a transform of `length` points: 0 up to the middle, then negative.
pub fn signed_bin(bin: usize, length: usize) -> i64 {
    if bin < length.div_ceil(2) {
        bin as i64
    } else {
        bin as i64 - length as i64
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    #[test]
    fn the_fast_transform_is_the_defining_sum() {
        for length in [1_usize, 2, 7, 12, 30, 31] {
            let input: Vec<_> = (0..length)
                .map(|n| Complex64::new((n * n % 7) as f64 - 2.0, (n * 5 % 11) as f64))
                .collect();
            let mut fast = input.clone();
            let mut transform = Transform::new(length);
            transform.forward(&mut fast);
            for (k, value) in fast.iter().enumerate() {
                let sum: Complex64 = (0..length)
                    .map(|n| {
                        input[n] * Complex64::cis(-TAU * (k * n % length) as f64 / length as f64)
                    })
                    .sum();
                assert!((sum - value).norm() < 1e-11 * length as f64, "{length} {k}");
            }
            transform.inverse(&mut fast);
            for (back, given) in fast.iter().zip(&input) {
                assert!((back / length as f64 - given).norm() < 1e-13 * 20.0);
            }
        }
    }

    #[test]
    fn fast_lengths_have_small_factors_and_none_is_skipped() {
        let small = |mut n: usize| {
            for factor in [2, 3, 5] {
                while n.is_multiple_of(factor) {
                    n /= factor;
                }
            }
            n == 1
        };
        for wanted in 1..3000 {
            let brute = (wanted..).find(|&n| small(n)).unwrap_or(0);
            assert_eq!(fast_length(wanted), brute, "{wanted}");
        }
    }

    #[test]
    fn signed_bins_run_from_minus_half() {
        let bins = |n| (0..n).map(|k| signed_bin(k, n)).collect::<Vec<_>>();
        assert_eq!(bins(4), [0, 1, -2, -1]);
        assert_eq!(bins(5), [0, 1, 2, -2, -1]);
    }
}
