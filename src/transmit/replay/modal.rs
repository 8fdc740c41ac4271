//! One topology in modal form.
//!
//! The supply is linear in the angle within an interval: `u' = s`, `s' = 0`. With `A = V L W` the mode
//!
//! ```text
//! d = W y + (W b / L) u + (W b / L^2) s
//! ```
//!
//! only turns and decays, `d(h) = exp(L h) d(0)`, and `y = V d - A^-1 b u - A^-2 b s`. Of a conjugate pair one
//! mode is kept and counted twice. `exp(L h)` comes from three tables of 256 lengths each and a series of four terms for the
//! rest: no call of a transcendental function is left in an interval.

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::nested::{LONGEST_RAD, columns_times};
use crate::math::small::{Column, Square};

/// Lengths of one table.
const BASE: usize = 256;

/// Tables, each `BASE` times finer than the one before.
const LEVELS: usize = 3;

/// The largest condition number of the eigenvectors: rounding is multiplied by it.
const CONDITION: f64 = 1e4;

/// The fastest rate, 1/rad: past it the first dropped term of the series, the fifth power of rate times
/// [`FINEST_RAD`] over 120, would exceed 1e-16.
const FASTEST: f64 = 4400.0;

/// The finest length of the tables, rad.
const FINEST_RAD: f64 = LONGEST_RAD / (BASE * BASE * BASE) as f64;

/// A topology whose eigenvectors are well-conditioned.
#[derive(Debug, Clone)]
pub struct Modal<const M: usize> {
    states: usize,
    pairs: usize,
    /// From (state, supply, slope) to real parts of pairs, their imaginary parts, real modes, supply, slope; column
    /// by column.
    into: Square<M>,
    back: Square<M>,
    rates: Vec<Complex64>,
    /// For each length of each table, mode by mode.
    powers: Vec<Complex64>,
    condition: f64,
}

impl<const M: usize> Modal<M> {
    /// Of `y' = a y + b u`; `None` where eigenvectors are ill-conditioned, or a rate vanishes or is too fast.
    pub fn new(a: &DMatrix<f64>, b: &DVector<f64>) -> Option<Self> {
        let states = a.nrows();
        let (rates, vectors) = eigen(a)?;
        let inverse = vectors.clone().lu().try_inverse()?;
        let condition = vectors.norm() * inverse.norm();
        if condition.is_nan() || condition > CONDITION {
            return None;
        }
        let held_1 = a.clone().lu().solve(b)?;
        let held_2 = a.clone().lu().solve(&held_1)?;
        let pairs: Vec<usize> = (0..states).filter(|&k| rates[k].im > 0.0).collect();
        let reals: Vec<usize> = (0..states).filter(|&k| rates[k].im == 0.0).collect();
        let mut modal = Self {
            states,
            pairs: pairs.len(),
            into: Square::ZERO,
            back: Square::ZERO,
            rates: Vec::new(),
            powers: Vec::new(),
            condition,
        };
        for (mode, &k) in pairs.iter().chain(&reals).enumerate() {
            let rate = rates[k];
            let force: Complex64 = (0..states).map(|i| inverse[(k, i)] * b[i]).sum();
            let row = (0..states).map(|i| inverse[(k, i)]);
            let row = row.chain([force / rate, force / (rate * rate)]);
            let paired = mode < pairs.len();
            let at = if paired { mode } else { pairs.len() + mode };
            for (column, entry) in row.enumerate() {
                modal.into.0[column][at] = entry.re;
                if paired {
                    modal.into.0[column][pairs.len() + mode] = entry.im;
                }
            }
            for i in 0..states {
                let part = vectors[(i, k)];
                if paired {
                    modal.back.0[at][i] = 2.0 * part.re;
                    modal.back.0[pairs.len() + mode][i] = -2.0 * part.im;
                } else {
                    modal.back.0[at][i] = part.re;
                }
            }
            modal.rates.push(rate);
        }
        for i in 0..states {
            modal.back.0[states][i] = -held_1[i];
            modal.back.0[states + 1][i] = -held_2[i];
        }
        for at in [states, states + 1] {
            modal.into.0[at][at] = 1.0;
            modal.back.0[at][at] = 1.0;
        }
        modal.tabulate();
        let fastest = modal.rates.iter().map(|rate| rate.norm());
        let finite = |matrix: &Square<M>| matrix.0.as_flattened().iter().all(|x| x.is_finite());
        let usable = fastest.fold(0.0, f64::max) <= FASTEST
            && finite(&modal.into)
            && finite(&modal.back)
            && modal.powers.iter().all(|power| power.is_finite());
        usable.then_some(modal)
    }

    /// Condition number of the eigenvectors, columns of length one.
    pub fn condition(&self) -> f64 {
        self.condition
    }

    fn tabulate(&mut self) {
        let mut unit = LONGEST_RAD;
        for _ in 0..LEVELS {
            unit /= BASE as f64;
            for step in 0..BASE {
                let length = step as f64 * unit;
                let powers = self.rates.iter().map(|rate| (rate * length).exp());
                self.powers.extend(powers);
            }
        }
    }

    /// (state, supply, slope) after `length_rad`.
    #[inline]
    pub fn advance(&self, z: &Column<M>, length_rad: f64) -> Column<M> {
        let modes = self.rates.len();
        let finest = ((length_rad * (1.0 / FINEST_RAD)) as usize).min(BASE * BASE * BASE - 1);
        let rest = length_rad - finest as f64 * FINEST_RAD;
        let table = |level: usize, step: usize| {
            let from = (level * BASE + step) * modes;
            self.powers.get(from..from + modes).unwrap_or(&[])
        };
        let coarse = table(0, finest / (BASE * BASE));
        let middle = table(1, finest / BASE % BASE);
        let fine = table(2, finest % BASE);
        let mut d = columns_times(&self.into, z);
        let all = self.rates.iter().zip(coarse).zip(middle).zip(fine);
        for (mode, (((rate, coarse), middle), fine)) in all.enumerate() {
            let small = rate * rest;
            let series = 1.0 + small * (1.0 + small * 0.25) * THIRD;
            let series = 1.0 + small * (1.0 + small * 0.5 * series);
            let power = (coarse * middle) * (fine * series);
            if mode < self.pairs {
                let imaginary = self.pairs + mode;
                let turned = power * Complex64::new(d[mode], d[imaginary]);
                (d[mode], d[imaginary]) = (turned.re, turned.im);
            } else {
                d[self.pairs + mode] *= power.re;
            }
        }
        d[self.states] += d[self.states + 1] * length_rad;
        columns_times(&self.back, &d)
    }
}

const THIRD: f64 = 1.0 / 3.0;

/// Eigenvalues and eigenvectors (columns of length one), conjugates in conjugate columns. Inverse iteration from
/// just beside each value of the Schur form; values are then the Rayleigh quotients with left and right vectors, which
/// are accurate to second order in both.
fn eigen(a: &DMatrix<f64>) -> Option<(Vec<Complex64>, DMatrix<Complex64>)> {
    let states = a.nrows();
    let values = a.complex_eigenvalues();
    let size = a.amax().max(1e-300);
    let complex = a.map(Complex64::from);
    let mut vectors = DMatrix::<Complex64>::zeros(states, states);
    let mut pending: Vec<usize> = Vec::new();
    let mut rates = vec![Complex64::ZERO; states];
    for column in 0..states {
        rates[column] = values[column];
        if values[column].im < 0.0 {
            // The conjugate of the closest one that was found before and has none yet.
            let upper = pending.pop()?;
            let conjugate = vectors.column(upper).map(|entry| entry.conj());
            vectors.set_column(column, &conjugate);
            continue;
        }
        vectors.set_column(column, &eigenvector(&complex, values[column], size)?);
        if values[column].im > 0.0 {
            pending.push(column);
        }
    }
    if !pending.is_empty() {
        return None;
    }
    let inverse = vectors.clone().lu().try_inverse()?;
    for (k, rate) in rates.iter_mut().enumerate() {
        let refined = (inverse.row(k) * &complex * vectors.column(k))[0];
        *rate = match rate.im == 0.0 {
            true => Complex64::from(refined.re),
            false => refined,
        };
    }
    Some((rates, vectors))
}

/// Three steps of inverse iteration from just beside `value`; `None` where it finds nothing.
fn eigenvector(a: &DMatrix<Complex64>, value: Complex64, size: f64) -> Option<DVector<Complex64>> {
    let states = a.nrows();
    let shift = value + Complex64::from(1e-13 * size.max(value.norm()));
    let mut system = a.clone();
    for i in 0..states {
        system[(i, i)] -= shift;
    }
    let system = system.lu();
    let mut vector = DVector::from_fn(states, |i, _| {
        Complex64::from(1.0 / (1.0 + 0.37 * i as f64))
    });
    for _ in 0..3 {
        vector = system.solve(&vector)?;
        let norm = vector.norm();
        if !(norm.is_finite() && norm > 0.0) {
            return None;
        }
        vector /= Complex64::from(norm);
    }
    if value.im == 0.0 {
        // The start was real, so is the vector.
        vector.iter_mut().for_each(|entry| entry.im = 0.0);
    }
    Some(vector)
}
