//! The largest value of a sampled correlation, between its samples.

use std::f64::consts::{PI, TAU};

use num_complex::Complex64;

use crate::math::Transform;
use crate::math::fft::signed_bin;

/// Lags to each side of the largest one that its neighbourhood is interpolated from.
pub(super) const GUARD: usize = 128;
/// Power of the cosine over those lags. Its transform falls by 54 dB for each doubling of the
/// frequency and is below -120 dB beyond 0.02 cycles a sample.
const POWER: i32 = 8;

/// The largest value of `|R(lag)|`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct LagPeak {
    /// Where it is, samples.
    pub(super) lag: f64,
    /// `R` there.
    pub(super) value: Complex64,
    /// True where it is the end of the range searched.
    pub(super) at_end: bool,
}

/// `R` near a whole lag: `R(u) cos^8(pi u / (2 GUARD))` is a trigonometric sum, whose derivatives are exact.
struct Neighbourhood {
    /// Angular frequency a sample, and the term's amplitude.
    terms: Vec<(f64, Complex64)>,
}

impl Neighbourhood {
    fn around(correlation: &[Complex64], centre: usize) -> Self {
        let length = 2 * GUARD;
        let mut terms: Vec<Complex64> = (0..length)
            .map(|index| {
                let from_centre = signed_bin(index, length);
                let taper = (PI * from_centre as f64 / length as f64).cos().powi(POWER);
                correlation[centre.saturating_add_signed(from_centre as isize)] * taper
            })
            .collect();
        Transform::new(length).forward(&mut terms);
        let mut terms: Vec<_> = terms
            .into_iter()
            .enumerate()
            .map(|(bin, term)| {
                let cycles = signed_bin(bin, length) as f64 / length as f64;
                (TAU * cycles, term / length as f64)
            })
            .collect();
        // The term at half the rate belongs to both signs alike.
        let (omega, term) = terms[GUARD];
        terms[GUARD] = (omega, term / 2.0);
        terms.push((-omega, term / 2.0));
        Self { terms }
    }

    /// `R(u)`, and the first and second derivative of `ln |R(u)|`.
    fn at(&self, u: f64) -> (Complex64, f64, f64) {
        let mut sums = [Complex64::ZERO; 3];
        for &(omega, term) in &self.terms {
            let value = term * Complex64::cis(omega * u);
            sums[0] += value;
            sums[1] += Complex64::new(0.0, omega) * value;
            sums[2] -= omega * omega * value;
        }
        let scale = PI / (2.0 * GUARD as f64);
        let (cosine, tangent) = ((scale * u).cos(), (scale * u).tan());
        let power = f64::from(POWER);
        let ratio = sums[1] / sums[0];
        (
            sums[0] / cosine.powi(POWER),
            ratio.re + power * scale * tangent,
            (sums[2] / sums[0] - ratio * ratio).re
                + power * scale * scale * (1.0 + tangent * tangent),
        )
    }
}

impl LagPeak {
    /// Finds the peak of `correlation`, whose middle is lag 0, within `search` lags to each side;
    /// there must be [`GUARD`] lags beyond. The peak is taken where the slope of `ln |R|` is `slope`.
    pub(super) fn find(correlation: &[Complex64], search: usize, slope: f64) -> Self {
        let middle = correlation.len() / 2;
        // From lag 0 outward, so that of equal ones the smallest lag is kept.
        let mut best = middle;
        let mut highest = correlation[middle].norm_sqr() * (1.0 + 1e-9);
        for lag in 1..=search {
            for index in [middle + lag, middle - lag] {
                let square = correlation[index].norm_sqr();
                if square > highest {
                    (best, highest) = (index, square * (1.0 + 1e-9));
                }
            }
        }
        let whole = best as f64 - middle as f64;
        let near = Neighbourhood::around(correlation, best);
        let coarse = (-16..=16)
            .map(|step| f64::from(step) / 16.0)
            .max_by(|&a, &b| {
                let norm = |u| near.at(u).0.norm();
                // The nearer to the middle of equal ones: a pure carrier has no peak.
                let close = (norm(a) - norm(b)).abs() <= 1e-9 * norm(a);
                if close {
                    b.abs().total_cmp(&a.abs())
                } else {
                    norm(a).total_cmp(&norm(b))
                }
            })
            .unwrap_or(0.0);
        let mut u = coarse;
        for _ in 0..20 {
            let (_, first, second) = near.at(u);
            // Below this curvature the signal has no width to tell a delay by.
            if second.is_nan() || second > -1e-10 {
                u = coarse;
                break;
            }
            let step = ((slope - first) / second).clamp(-0.1, 0.1);
            u = (u + step).clamp(coarse - 0.2, coarse + 0.2);
            if step.abs() < 1e-12 {
                break;
            }
        }
        Self {
            lag: whole + u,
            value: near.at(u).0,
            at_end: best.abs_diff(middle) >= search && search > 0,
        }
    }
}
