//! Symbols of a stream found by their prefix and transformed.

use std::f64::consts::TAU;
use std::sync::Arc;

use num_complex::Complex64;

use crate::math::Transform;
use crate::math::kernel::{Kernel, Sampler};
use crate::metrics::symbols::figures::SymbolError;
use crate::signal::{Ofdm, Source};

/// Samples of the useful symbol for one of the format's: what a stage adds beside the carriers does not
/// fold onto them.
pub(super) const OVER: usize = 2;

/// Samples read, at most, at that rate.
const MOST: usize = 1 << 22;

/// Symbols folded for the blind start.
const FOLDED: usize = 256;

/// Fewest symbols.
const FEWEST: usize = 4;

/// Transforms of a stream's symbols, and where they stand.
pub(super) struct Windows {
    /// First sample of the first prefix.
    pub(super) first: usize,
    /// Turns a sample that were taken off.
    pub(super) cycles: f64,
    /// Symbol after symbol, carrier by carrier.
    pub(super) points: Vec<Complex64>,
}

/// The stream at [`OVER`] times the format's own rate.
pub(super) fn at_symbol_rate(
    shape: &Ofdm,
    source: &mut dyn Source,
) -> Result<Vec<Complex64>, SymbolError> {
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
pub(super) fn found(shape: &Ofdm, samples: &mut [Complex64]) -> Result<Windows, SymbolError> {
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
pub(super) fn transformed(
    shape: &Ofdm,
    samples: &[Complex64],
    first: usize,
    cycles: f64,
) -> Windows {
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
