//! Symbols of a single carrier: matched filter, timing, frequency and phase.

use std::f64::consts::{PI, TAU};
use std::sync::Arc;

use num_complex::Complex64;

use super::decide::{nearest_point, stripped, symmetry};
use super::figures::{Recovered, SymbolError, SymbolFigures};
use crate::math::Transform;
use crate::math::kernel::{Kernel, LONGEST_HALF, Rotation, Sampler};
use crate::math::small::Square;
use crate::signal::{Modulation, Source, root_raised_cosine};

/// Symbols compared, at most.
const MOST: u64 = 1 << 20;

/// Fewest symbols.
const FEWEST: u64 = 32;

/// Symbols of the first stretch.
const FIRST: u64 = 2048;

/// How much a stretch grows at a time.
const GROWTH: u64 = 4;

/// Steps on one stretch.
const STEPS: usize = 8;

/// Values a symbol for the blind timing.
const FINE: usize = 4;

/// Where symbols stand and how they are turned, in samples of the stream.
#[derive(Debug, Clone, Copy)]
struct Grid {
    /// Instant of symbol 0.
    start: f64,
    /// Samples a symbol.
    step: f64,
    /// Cycles a sample.
    cycles: f64,
    gain: Complex64,
}

struct Reader<'a> {
    source: &'a mut dyn Source,
    kernel: Arc<Kernel>,
}

impl Reader<'_> {
    /// The filtered stream and its slope a sample at `count` instants.
    fn at(
        &mut self,
        (start, step): (f64, f64),
        cycles: f64,
        count: u64,
    ) -> Result<Vec<(Complex64, Complex64)>, SymbolError> {
        self.source.rewind()?;
        let mut sampler = Sampler::new(self.kernel.clone(), start, step);
        let mut out = Vec::new();
        let mut block = vec![Complex64::ZERO; 1 << 14];
        let rotation = Rotation {
            cycles,
            change: 0.0,
        };
        let mut n = 0u64;
        while (out.len() as u64) < count {
            let got = self.source.read(&mut block)?;
            if got == 0 {
                sampler.finish(|z, d| out.push((z, d)));
                break;
            }
            rotation.turn(n as f64, &mut block[..got]);
            n += got as u64;
            sampler.push(&block[..got], |z, d| out.push((z, d)));
        }
        out.truncate(count as usize);
        Ok(out)
    }
}

/// The matched filter of `sps` samples a symbol: the longer, the smaller the roll-off.
fn matched(sps: f64, rolloff: f64) -> Kernel {
    // Tails fall with the square of the roll-off times the distance.
    let span = (16.0 / rolloff).clamp(32.0, 160.0);
    let half = ((span * sps).ceil() as usize).min(LONGEST_HALF);
    let bandwidth = (1.0 + rolloff) / 2.0 / sps;
    Kernel::new(half, bandwidth, |t| {
        root_raised_cosine(t / sps, rolloff) / sps
    })
}

/// Errors of the symbols of `capture` (modulation, symbol rate in Hz, roll-off). Sent points are decided on
/// `reference` at the same instants where there is one.
///
/// Blind timing is the phase of `|z|^2` at the symbol rate (M. Oerder, H. Meyr, "Digital filter and square
/// timing recovery", IEEE Trans. Commun., May 1988), blind frequency and phase the line of `z^4` (`z^8` for
/// eight phases), which finds offsets up to an eighth (a sixteenth) of the symbol rate. Gauss-Newton steps on
/// the decided points then find gain, frequency, timing and clock, over a stretch that grows.
///
/// # Errors
/// [`SymbolError`].
pub fn carrier_symbols(
    format: (Modulation, f64, f64),
    capture: &mut dyn Source,
    reference: Option<&mut dyn Source>,
) -> Result<SymbolFigures, SymbolError> {
    let (modulation, symbol_rate_hz, rolloff) = format;
    let rate_hz = capture.rate_hz();
    let sps = rate_hz / symbol_rate_hz;
    if sps < 1.0 + rolloff || 32.0 * sps > LONGEST_HALF as f64 {
        return Err(SymbolError::Format(format!(
            "{sps:.3} samples a symbol; {:.3} to {} are possible with this roll-off",
            1.0 + rolloff,
            LONGEST_HALF / 32
        )));
    }
    let kernel = Arc::new(matched(sps, rolloff));
    let mut samples = 0u64;
    let mut block = vec![Complex64::ZERO; 1 << 14];
    capture.rewind()?;
    loop {
        let count = capture.read(&mut block)?;
        if count == 0 {
            break;
        }
        samples += count as u64;
    }
    // Symbols with the whole filter inside.
    let half = kernel.half() as f64;
    let room = ((samples as f64 - 2.0 * half - 2.0) / sps).floor();
    if room < FEWEST as f64 {
        return Err(SymbolError::TooFew {
            given: room.max(0.0) as u64,
            needed: FEWEST,
        });
    }
    let total = (room as u64 - 1).min(MOST);
    let (grid, sent, sent_from) = match reference {
        Some(reference) => {
            let mut reader = Reader {
                source: reference,
                kernel: kernel.clone(),
            };
            let (grid, sent) = recover(modulation, &mut reader, sps, total)?;
            (grid, Some(sent), "reference")
        }
        None => {
            let mut reader = Reader {
                source: capture,
                kernel: kernel.clone(),
            };
            let (grid, _) = recover(modulation, &mut reader, sps, total)?;
            (grid, None, "decided")
        }
    };
    let mut reader = Reader {
        source: capture,
        kernel,
    };
    let mut grid = grid;
    if let Some(sent) = &sent {
        // The reference's turn is not the capture's.
        let values = reader.at((grid.start, grid.step), grid.cycles, total)?;
        grid.gain = least_squares_gain(&values, sent);
    }
    let mut result = None;
    for _ in 0..STEPS {
        let values = reader.at((grid.start, grid.step), grid.cycles, total)?;
        let points = match &sent {
            Some(sent) => sent.clone(),
            None => decided(modulation, &values, grid.gain),
        };
        grid.gain = least_squares_gain(&values, &points);
        let (next, moved) = improved(&values, &points, grid).ok_or(SymbolError::Lost)?;
        result = Some((values, points, grid));
        if moved < 1e-6 {
            break;
        }
        grid = next;
    }
    let (values, points, grid) = result.ok_or(SymbolError::Lost)?;
    let received: Vec<Complex64> = values.iter().map(|(z, _)| z / grid.gain).collect();
    Ok(SymbolFigures::of(
        &received,
        &points[..received.len()],
        1,
        Recovered {
            frequency_hz: grid.cycles * rate_hz,
            clock_error: sps / grid.step - 1.0,
            first_s: grid.start / rate_hz,
            sent_from,
        },
    ))
}

fn decided(
    modulation: Modulation,
    values: &[(Complex64, Complex64)],
    gain: Complex64,
) -> Vec<Complex64> {
    values
        .iter()
        .enumerate()
        .map(|(index, (z, _))| nearest_point(modulation, index as u64, z / gain))
        .collect()
}

fn least_squares_gain(values: &[(Complex64, Complex64)], sent: &[Complex64]) -> Complex64 {
    let (mut product, mut square) = (Complex64::ZERO, 0.0);
    for ((z, _), s) in values.iter().zip(sent) {
        product += s.conj() * z;
        square += s.norm_sqr();
    }
    product / square
}

/// Grid and decided points of a stream.
fn recover(
    modulation: Modulation,
    reader: &mut Reader<'_>,
    sps: f64,
    total: u64,
) -> Result<(Grid, Vec<Complex64>), SymbolError> {
    let mut count = FIRST.min(total);
    let begin = reader.kernel.half() as f64;
    let fine = reader.at((begin, sps / FINE as f64), 0.0, count * FINE as u64)?;
    let tone: Complex64 = fine
        .iter()
        .enumerate()
        .map(|(m, (z, _))| z.norm_sqr() * Complex64::cis(-TAU * m as f64 / FINE as f64))
        .sum();
    let part = (-tone.arg() / TAU).rem_euclid(1.0);
    let start = begin + part * sps;
    let values = reader.at((start, sps), 0.0, count)?;
    let power = values.iter().map(|(z, _)| z.norm_sqr()).sum::<f64>() / count as f64;
    if !(power > 0.0 && power.is_finite()) {
        return Err(SymbolError::Lost);
    }
    let (order, angle) = symmetry(modulation);
    // Scaled first: high powers of tiny numbers vanish.
    let unit = 1.0 / power.sqrt();
    let size = (4 * values.len()).next_power_of_two();
    let mut line: Vec<Complex64> = values
        .iter()
        .enumerate()
        .map(|(k, (z, _))| stripped(modulation, k as u64, z * unit))
        .collect();
    line.resize(size, Complex64::ZERO);
    let plain = line.clone();
    Transform::new(size).forward(&mut line);
    let best = line
        .iter()
        .enumerate()
        .max_by(|a, b| a.1.norm_sqr().total_cmp(&b.1.norm_sqr()))
        .map_or(0, |(bin, _)| bin);
    let (below, peak, above) = (
        line[(best + size - 1) % size].norm(),
        line[best].norm(),
        line[(best + 1) % size].norm(),
    );
    let bend = below - 2.0 * peak + above;
    let fraction = if bend < 0.0 {
        (0.5 * (below - above) / bend).clamp(-0.5, 0.5)
    } else {
        0.0
    };
    let mut turn = (best as f64 + fraction) / size as f64;
    if turn >= 0.5 {
        turn -= 1.0;
    }
    let sum: Complex64 = plain
        .iter()
        .take(values.len())
        .enumerate()
        .map(|(k, z)| z * Complex64::cis(-TAU * turn * k as f64))
        .sum();
    let phase = (sum.arg() - angle) / f64::from(order);
    let cycles = turn / f64::from(order) / sps;
    // A turn that the stream takes off counts from sample 0, the phase from symbol 0.
    let gain = Complex64::from_polar(power.sqrt(), phase - TAU * cycles * start);
    let mut grid = Grid {
        start,
        step: sps,
        cycles,
        gain,
    };
    loop {
        let mut points = Vec::new();
        for _ in 0..STEPS {
            let values = reader.at((grid.start, grid.step), grid.cycles, count)?;
            points = decided(modulation, &values, grid.gain);
            grid.gain = least_squares_gain(&values, &points);
            if grid.gain.norm().is_nan() || grid.gain.norm() <= 0.0 {
                return Err(SymbolError::Lost);
            }
            let (next, moved) = improved(&values, &points, grid).ok_or(SymbolError::Lost)?;
            grid = next;
            if moved < 1e-4 {
                break;
            }
        }
        if count == total {
            return Ok((grid, points));
        }
        count = (count * GROWTH).min(total);
    }
}

/// One Gauss-Newton step: lines through the timing errors and the phase errors of the symbols. Also tells the
/// largest movement: of timing in symbols, of phase in turns.
fn improved(
    values: &[(Complex64, Complex64)],
    sent: &[Complex64],
    grid: Grid,
) -> Option<(Grid, f64)> {
    let last = values.len() as f64 - 1.0;
    let scale = 2.0 / last.max(1.0);
    let (mut matrices, mut rights) = ([Square::<2>::ZERO; 2], [[0.0; 2]; 2]);
    for (k, ((z, slope), s)) in values.iter().zip(sent).enumerate() {
        let at = [1.0, k as f64 * scale - 1.0];
        let (z, slope) = (z / grid.gain, slope / grid.gain);
        let error = s - z;
        let timing = ((slope.conj() * error).re, slope.norm_sqr());
        let phase = ((z * s.conj()).im, s.norm_sqr());
        for (which, (value, weight)) in [timing, phase].into_iter().enumerate() {
            for i in 0..2 {
                rights[which][i] += at[i] * value;
                for j in 0..2 {
                    matrices[which].0[i][j] += weight * at[i] * at[j];
                }
            }
        }
    }
    let timing = matrices[0].solve_leading(2, &rights[0])?;
    let phase = matrices[1].solve_leading(2, &rights[1])?;
    // Far off, a linear step may overshoot.
    let limit = 0.1 * grid.step;
    let shift = timing[0].clamp(-limit, limit);
    let tilt = timing[1].clamp(-limit, limit);
    let turn = phase[1].clamp(-0.5, 0.5);
    let start = grid.start + shift - tilt;
    let step = grid.step + tilt * scale;
    let cycles = grid.cycles + turn * scale / TAU / grid.step;
    // The middle keeps its phase but for the constant part.
    let middle = start + step * last / 2.0;
    let back = -TAU * (cycles - grid.cycles) * middle;
    let gain = grid.gain * Complex64::cis(phase[0].clamp(-PI / 8.0, PI / 8.0) + back);
    let moved = ((shift.abs() + tilt.abs()) / grid.step).max((turn.abs()) / TAU);
    Some((
        Grid {
            start,
            step,
            cycles,
            gain,
        },
        moved,
    ))
}
