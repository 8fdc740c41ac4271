//! Each carrier over its own gain, and the sent points decided, in rounds.

use std::f64::consts::{PI, TAU};

use num_complex::Complex64;

use super::windows::Windows;
use crate::math::Transform;
use crate::math::small::Square;
use crate::metrics::symbols::decide::{nearest_point, stripped, symmetry};
use crate::metrics::symbols::figures::SymbolError;
use crate::signal::Ofdm;

/// Samples of the useful symbol for one of the format's: what a stage adds beside the carriers does not
/// fold onto them.
pub(super) const OVER: usize = 2;

/// Symbols folded for the blind start.
const FOLDED: usize = 256;

/// Fewest symbols.
const FEWEST: usize = 4;

/// Rounds of equalizing and deciding.
pub(super) const ROUNDS: usize = 4;

/// Points with frequency and clock taken off.
pub(super) struct Fitted {
    pub(super) points: Vec<Complex64>,
    pub(super) sent: Vec<Complex64>,
    pub(super) cycles: f64,
    pub(super) clock: f64,
}

/// Decides the points of a stream whose carriers differ little but for a delay.
pub(super) fn decide(shape: &Ofdm, windows: &Windows) -> Result<Fitted, SymbolError> {
    let offsets = shape.offsets();
    let carriers = offsets.len();
    let modulation = shape.modulation;
    let symbols = windows.points.len() / carriers;
    if symbols < FEWEST {
        return Err(SymbolError::TooFew {
            given: symbols as u64,
            needed: FEWEST as u64,
        });
    }
    let power =
        windows.points.iter().map(|y| y.norm_sqr()).sum::<f64>() / windows.points.len() as f64;
    if !(power > 0.0 && power.is_finite()) {
        return Err(SymbolError::Lost);
    }
    let unit = 1.0 / power.sqrt();
    let (order, angle) = symmetry(modulation);
    // Powers over the carriers make a line, whose place is the delay. Phases differ from symbol to symbol where
    // the frequency is off: sizes are added.
    let size = (8 * carriers).next_power_of_two();
    let mut transform = Transform::new(size);
    let mut sums = vec![0.0; size];
    let stripped_row = |row: &[Complex64], work: &mut Vec<Complex64>| {
        work.clear();
        work.resize(size, Complex64::ZERO);
        for (&offset, y) in offsets.iter().zip(row) {
            work[offset.rem_euclid(size as i64) as usize] = stripped(modulation, 0, y * unit);
        }
    };
    let mut work = Vec::new();
    for row in windows.points.chunks_exact(carriers).take(FOLDED) {
        stripped_row(row, &mut work);
        transform.forward(&mut work);
        sums.iter_mut()
            .zip(&work)
            .for_each(|(sum, value)| *sum += value.norm_sqr());
    }
    let best = (0..size)
        .max_by(|&a, &b| sums[a].total_cmp(&sums[b]))
        .unwrap_or(0);
    let signed = crate::math::fft::signed_bin(best, size) as f64;
    // Turns a carrier.
    let tilt = signed / size as f64 / f64::from(order);
    let mut points: Vec<Complex64> = windows.points.iter().map(|y| y * unit).collect();
    for row in points.chunks_exact_mut(carriers) {
        for (&offset, y) in offsets.iter().zip(row) {
            *y *= Complex64::cis(-TAU * tilt * offset as f64);
        }
    }
    // Phases are followed from symbol to symbol, for the decisions only.
    let first: Complex64 = points[..carriers]
        .iter()
        .map(|y| stripped(modulation, 0, *y))
        .sum();
    let (mut phase, mut speed, mut slope) = ((first.arg() - angle) / f64::from(order), 0.0, 0.0);
    let mut sent = Vec::with_capacity(points.len());
    for row in points.chunks_exact(carriers) {
        let (mut error, mut along, mut spread) = (Complex64::ZERO, 0.0, 0.0);
        for (&offset, y) in offsets.iter().zip(row) {
            let k = offset as f64;
            let turned = y * Complex64::cis(-phase - slope * k);
            let s = nearest_point(modulation, 0, turned);
            let product = turned * s.conj();
            error += product;
            along += k * product.im;
            spread += k * k * s.norm_sqr();
            sent.push(s);
        }
        let turn = error.arg();
        phase += 0.5 * turn + speed;
        speed += 0.05 * turn;
        if spread > 0.0 {
            slope += 0.3 * along / spread;
        }
    }
    // Carriers that differ: gains from the first decisions, then decisions again.
    for _ in 0..ROUNDS {
        let fitted = refine(shape, &points, &sent).ok_or(SymbolError::Lost)?;
        let gains = carrier_gains(&fitted.points, &sent, carriers);
        let mut changed = false;
        for (row, decided) in fitted
            .points
            .chunks_exact(carriers)
            .zip(sent.chunks_exact_mut(carriers))
        {
            for ((y, s), gain) in row.iter().zip(decided).zip(&gains) {
                let next = nearest_point(modulation, 0, y / gain);
                changed |= (next - *s).norm_sqr() > 1e-12;
                *s = next;
            }
        }
        if !changed {
            break;
        }
    }
    refine(shape, &points, &sent).ok_or(SymbolError::Lost)
}

/// Takes off the line of phases over the symbols, and over symbols times carriers, that the points have against
/// the sent ones: frequency and clock.
pub(super) fn refine(shape: &Ofdm, points: &[Complex64], sent: &[Complex64]) -> Option<Fitted> {
    let offsets = shape.offsets();
    let carriers = offsets.len();
    let count = points.len().min(sent.len()) / carriers * carriers;
    let symbols = count / carriers;
    let (mut points, sent) = (points[..count].to_vec(), sent[..count].to_vec());
    let symbol = (OVER * (shape.fft_size + shape.prefix)) as f64;
    let (mut cycles, mut clock) = (0.0, 0.0);
    for _ in 0..ROUNDS {
        // Phases of whole symbols, unrolled, against the carriers' own mean gains.
        let gains = turned_gains(&points, &sent, carriers);
        let mut matrix = Square::<4>::ZERO;
        let mut right = [0.0; 4];
        let mut before = 0.0;
        let scale = 2.0 / (symbols as f64 - 1.0).max(1.0);
        let widest = offsets.iter().map(|k| k.abs()).max().unwrap_or(1).max(1) as f64;
        for (index, (row, s)) in points
            .chunks_exact(carriers)
            .zip(sent.chunks_exact(carriers))
            .enumerate()
        {
            let common: Complex64 = row
                .iter()
                .zip(s)
                .zip(&gains)
                .map(|((y, s), gain)| y * (s * gain).conj())
                .sum();
            let phase = common.arg();
            let common_phase = phase - TAU * ((phase - before) / TAU).round();
            before = common_phase;
            let back = Complex64::cis(-common_phase);
            let at = index as f64 * scale - 1.0;
            for ((&offset, (y, s)), gain) in offsets.iter().zip(row.iter().zip(s)).zip(&gains) {
                let product = y * (s * gain).conj() * back;
                let weight = (s * gain).norm_sqr();
                let k = offset as f64 / widest;
                let basis = [1.0, k, at, at * k];
                let value = product.im + weight * common_phase;
                for i in 0..4 {
                    right[i] += basis[i] * value;
                    for j in 0..4 {
                        matrix.0[i][j] += weight * basis[i] * basis[j];
                    }
                }
            }
        }
        let line = if carriers > 1 {
            matrix.solve_leading(4, &right)?
        } else {
            return None;
        };
        let (turn, tilt) = (line[2] * scale, line[3] * scale / widest);
        for (index, row) in points.chunks_exact_mut(carriers).enumerate() {
            let n = index as f64 - (symbols as f64 - 1.0) / 2.0;
            for (&offset, y) in offsets.iter().zip(row) {
                *y *= Complex64::cis(-n * (turn + tilt * offset as f64));
            }
        }
        cycles += turn / TAU / symbol;
        // Carrier k turns by 2 pi k symbol / useful for a clock that is off by one.
        clock += tilt / TAU * (OVER * shape.fft_size) as f64 / symbol;
        if turn.abs() * symbols as f64 <= 1e-7 * PI {
            break;
        }
    }
    Some(Fitted {
        points,
        sent,
        cycles,
        clock,
    })
}

/// Least-squares gain of each carrier over all symbols.
pub(super) fn carrier_gains(
    points: &[Complex64],
    sent: &[Complex64],
    carriers: usize,
) -> Vec<Complex64> {
    let mut products = vec![Complex64::ZERO; carriers];
    let mut squares = vec![0.0; carriers];
    for (row, s) in points
        .chunks_exact(carriers)
        .zip(sent.chunks_exact(carriers))
    {
        for (k, (y, s)) in row.iter().zip(s).enumerate() {
            products[k] += s.conj() * y;
            squares[k] += s.norm_sqr();
        }
    }
    products
        .iter()
        .zip(&squares)
        .map(|(product, square)| product / square)
        .collect()
}

/// The same with every symbol turned to the phase of the first.
pub(super) fn turned_gains(
    points: &[Complex64],
    sent: &[Complex64],
    carriers: usize,
) -> Vec<Complex64> {
    let symbols = points.len() / carriers;
    let mut turned = Vec::with_capacity(points.len());
    let first = carrier_gains(&points[..carriers], &sent[..carriers], carriers);
    for index in 0..symbols {
        let range = index * carriers..(index + 1) * carriers;
        let common: Complex64 = points[range.clone()]
            .iter()
            .zip(&sent[range.clone()])
            .zip(&first)
            .map(|((y, s), gain)| y * (s * gain).conj())
            .sum();
        let back = if common.norm() > 0.0 {
            common.conj() / common.norm()
        } else {
            Complex64::ONE
        };
        turned.extend(points[range].iter().map(|y| y * back));
    }
    carrier_gains(&turned, sent, carriers)
}
