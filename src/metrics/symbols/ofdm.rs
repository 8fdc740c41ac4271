//! Points of OFDM with a cyclic prefix: symbols found by the prefix, carriers equalized one by one.

use std::f64::consts::{PI, TAU};
use std::sync::Arc;

use num_complex::Complex64;

use super::decide::{nearest_point, stripped, symmetry};
use super::figures::{Recovered, SymbolError, SymbolFigures};
use crate::math::Transform;
use crate::math::kernel::{Kernel, Sampler};
use crate::math::small::Square;
use crate::signal::{Ofdm, Source};
use crate::units::db;

/// Samples of the useful symbol for one of the format's: what a stage adds beside the carriers does not
/// fold onto them.
const OVER: usize = 2;

/// Samples read, at most, at that rate.
const MOST: usize = 1 << 22;

/// Symbols folded for the blind start.
const FOLDED: usize = 256;

/// Fewest symbols.
const FEWEST: usize = 4;

/// Rounds of equalizing and deciding.
const ROUNDS: usize = 4;

/// Transforms of a stream's symbols, and where they stand.
struct Windows {
    /// First sample of the first prefix.
    first: usize,
    /// Turns a sample that were taken off.
    cycles: f64,
    /// Symbol after symbol, carrier by carrier.
    points: Vec<Complex64>,
}

/// Errors of the points of `capture`. Sent points are decided on `reference` at the same instants where there
/// is one.
///
/// The prefix gives start and frequency (J. J. van de Beek, M. Sandell, P. O. Börjesson, "ML estimation of
/// time and frequency offset in OFDM systems", IEEE Trans. Signal Process., July 1997): offsets up to half
/// the carriers' spacing. The transform's window starts in the middle of what is left of the prefix after its
/// faded edge. Frequency and clock are refined by lines through the phases of the decided points over symbols and
/// carriers; no phase is taken off symbol by symbol. Each carrier is divided by its own least-squares gain over
/// all symbols.
///
/// # Errors
/// [`SymbolError`].
pub fn ofdm_symbols(
    shape: &Ofdm,
    capture: &mut dyn Source,
    reference: Option<&mut dyn Source>,
) -> Result<SymbolFigures, SymbolError> {
    let carriers = shape.offsets().len();
    let mut samples = at_symbol_rate(shape, capture)?;
    let (sent, first) = match reference {
        Some(reference) => {
            let mut clean = at_symbol_rate(shape, reference)?;
            clean.truncate(samples.len());
            samples.truncate(clean.len());
            let windows = found(shape, &mut clean)?;
            (Some(decide(shape, &windows)?.sent), Some(windows.first))
        }
        None => (None, None),
    };
    let windows = match first {
        // The capture is on the reference's grid already.
        Some(first) => transformed(shape, &samples, first, 0.0),
        None => found(shape, &mut samples)?,
    };
    let fitted = match &sent {
        Some(sent) => refine(shape, &windows.points, sent).ok_or(SymbolError::Lost)?,
        None => decide(shape, &windows)?,
    };
    let sent_from = if sent.is_some() {
        "reference"
    } else {
        "decided"
    };
    let (mut points, mut sent, mut gains) =
        (fitted.points, sent.unwrap_or(fitted.sent), Vec::new());
    for _ in 0..ROUNDS {
        gains = carrier_gains(&points, &sent, carriers);
        if sent_from == "reference" {
            break;
        }
        for (row, decided) in points
            .chunks_exact(carriers)
            .zip(sent.chunks_exact_mut(carriers))
        {
            for ((y, s), gain) in row.iter().zip(decided).zip(&gains) {
                *s = nearest_point(shape.modulation, 0, y / gain);
            }
        }
    }
    for row in points.chunks_exact_mut(carriers) {
        row.iter_mut().zip(&gains).for_each(|(y, gain)| *y /= gain);
    }
    let rate_hz = shape.spacing_hz * (OVER * shape.fft_size) as f64;
    let mut figures = SymbolFigures::of(
        &points,
        &sent,
        carriers,
        Recovered {
            frequency_hz: (windows.cycles + fitted.cycles) * rate_hz,
            clock_error: fitted.clock,
            first_s: (windows.first + OVER * shape.prefix) as f64 / rate_hz,
            sent_from,
        },
    );
    let mean = gains.iter().map(|gain| gain.norm_sqr()).sum::<f64>() / carriers as f64;
    figures.carrier_gain_db = (carriers <= 4096).then(|| {
        gains
            .iter()
            .map(|gain| db(gain.norm_sqr() / mean))
            .collect()
    });
    Ok(figures)
}

/// The stream at [`OVER`] times the format's own rate.
fn at_symbol_rate(shape: &Ofdm, source: &mut dyn Source) -> Result<Vec<Complex64>, SymbolError> {
    let wanted_hz = shape.spacing_hz * (OVER * shape.fft_size) as f64;
    let rate_hz = source.rate_hz();
    let step = rate_hz / wanted_hz;
    let occupied_hz = shape.spacing_hz * shape.carriers as f64;
    if rate_hz < occupied_hz || step > 256.0 {
        return Err(SymbolError::Format(format!(
            "{rate_hz} samples a second; {occupied_hz} to {} are possible",
            256.0 * wanted_hz
        )));
    }
    let cutoff = 0.5 * (1.0 / step).min(1.0);
    let mut sampler = Sampler::new(Arc::new(Kernel::interpolator(cutoff)), 0.0, step);
    let mut out = Vec::new();
    let mut block = vec![Complex64::ZERO; 1 << 14];
    source.rewind()?;
    let mut read = 0u64;
    while out.len() < MOST {
        let count = source.read(&mut block)?;
        if count == 0 {
            sampler.finish(|value, _| out.push(value));
            break;
        }
        read += count as u64;
        sampler.push(&block[..count], |value, _| out.push(value));
    }
    // No value past the last sample.
    let inside = ((read as f64 - 1.0) / step).floor() as usize + 1;
    out.truncate(inside.min(MOST));
    Ok(out)
}

/// Symbols found by their prefix.
fn found(shape: &Ofdm, samples: &mut [Complex64]) -> Result<Windows, SymbolError> {
    let useful = OVER * shape.fft_size;
    let prefix = OVER * shape.prefix;
    let symbol = useful + prefix;
    let symbols = samples.len() / symbol;
    if symbols < FEWEST + 1 {
        return Err(SymbolError::TooFew {
            given: symbols.saturating_sub(1) as u64,
            needed: FEWEST as u64,
        });
    }
    // Products and powers, folded by the symbol.
    let mut products = vec![Complex64::ZERO; symbol];
    let mut powers = vec![0.0; symbol];
    let reach = (samples.len() - useful).min(FOLDED * symbol);
    for n in 0..reach {
        let (a, b) = (samples[n], samples[n + useful]);
        products[n % symbol] += a.conj() * b;
        powers[n % symbol] += (a.norm_sqr() + b.norm_sqr()) / 2.0;
    }
    let total: f64 = powers.iter().sum();
    if !(total > 0.0 && total.is_finite()) {
        return Err(SymbolError::Lost);
    }
    // The faded edge is no copy.
    let edge = OVER * shape.edge;
    let (mut sum, mut power) = (Complex64::ZERO, 0.0);
    for n in edge..prefix.max(edge + 1) {
        sum += products[n % symbol];
        power += powers[n % symbol];
    }
    let width = prefix.max(edge + 1) - edge;
    let mut best = (f64::NEG_INFINITY, 0usize, Complex64::ZERO);
    for start in 0..symbol {
        let score = sum.norm() - power;
        if score > best.0 {
            best = (score, start, sum);
        }
        let (out, next) = ((start + edge) % symbol, (start + edge + width) % symbol);
        sum += products[next] - products[out];
        power += powers[next] - powers[out];
    }
    let (_, first, product) = best;
    let cycles = product.arg() / TAU / useful as f64;
    crate::math::kernel::Rotation {
        cycles,
        change: 0.0,
    }
    .turn(0.0, samples);
    Ok(transformed(shape, samples, first, cycles))
}

/// The transform of every whole symbol from `first` on.
fn transformed(shape: &Ofdm, samples: &[Complex64], first: usize, cycles: f64) -> Windows {
    let useful = OVER * shape.fft_size;
    let prefix = OVER * shape.prefix;
    let symbol = useful + prefix;
    // From the middle of what is a copy, and the turn that this gives each carrier.
    let early = (prefix - OVER * shape.edge.min(shape.prefix)) / 2;
    let mut transform = Transform::new(useful);
    let mut work = vec![Complex64::ZERO; useful];
    let offsets = shape.offsets();
    let mut points = Vec::new();
    let mut at = first + prefix - early;
    while at + useful <= samples.len() {
        work.copy_from_slice(&samples[at..at + useful]);
        transform.forward(&mut work);
        for &offset in &offsets {
            let bin = offset.rem_euclid(useful as i64) as usize;
            let turn = TAU * (offset as f64) * early as f64 / useful as f64;
            points.push(work[bin] * Complex64::cis(turn) / useful as f64);
        }
        at += symbol;
    }
    Windows {
        first,
        cycles,
        points,
    }
}

/// Points with frequency and clock taken off.
struct Fitted {
    points: Vec<Complex64>,
    sent: Vec<Complex64>,
    cycles: f64,
    clock: f64,
}

/// Decides the points of a stream whose carriers differ little but for a delay.
fn decide(shape: &Ofdm, windows: &Windows) -> Result<Fitted, SymbolError> {
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
fn refine(shape: &Ofdm, points: &[Complex64], sent: &[Complex64]) -> Option<Fitted> {
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
fn carrier_gains(points: &[Complex64], sent: &[Complex64], carriers: usize) -> Vec<Complex64> {
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
fn turned_gains(points: &[Complex64], sent: &[Complex64], carriers: usize) -> Vec<Complex64> {
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
