//! One piece of the capture, looked for all over the reference.

use std::f64::consts::PI;

use num_complex::Complex64;

use super::pair::{BLOCK, Reference};
use super::{Grid, SyncError, skip};
use crate::math::Transform;
use crate::signal::Source;

/// Samples of the piece that is looked for, and of the shorter one that is tried where the first is not
/// found: clocks far apart slip less over it.
const PIECES: [usize; 2] = [1 << 14, 1 << 11];

/// Fewest samples of both streams.
const FEWEST: u64 = 256;

/// Correlation below which nothing is said. The best of ten million places and as many frequencies reaches
/// about 0.05 by chance over 16,384 samples, 0.13 over 2048.
pub(super) const LEAST: f64 = 0.2;

/// Largest ratio of the two rates.
const MOST_RATIO: f64 = 256.0;

/// Places whose scores differ by less than this part are equally good: of them the one with the smallest
/// delay is taken, as where both files hold several periods.
const EQUAL: f64 = 0.02;

/// Places this near, samples, belong to one peak.
const NEIGHBOURS: i64 = 64;

/// What one reading of a stream tells.
#[derive(Debug, Clone, Copy)]
pub(super) struct Facts {
    pub(super) samples: u64,
    /// First sample of the loudest stretch of the length of the longest piece.
    loudest: u64,
}

/// Reads the stream once.
pub(super) fn survey(source: &mut dyn Source, stream: &'static str) -> Result<Facts, SyncError> {
    source.rewind()?;
    let piece = PIECES[0];
    let mut block = vec![Complex64::ZERO; piece / 4];
    // Energies of quarters, four of which make a piece.
    let mut last = [0.0; 4];
    let (mut samples, mut quarters, mut filled, mut energy) = (0u64, 0u64, 0usize, 0.0);
    let mut best = (0.0, 0u64);
    loop {
        let count = source.read(&mut block[..piece / 4 - filled])?;
        if count == 0 {
            break;
        }
        energy += block[..count].iter().map(|x| x.norm_sqr()).sum::<f64>();
        samples += count as u64;
        filled += count;
        if filled == piece / 4 {
            last.rotate_left(1);
            last[3] = energy;
            quarters += 1;
            let sum: f64 = last.iter().sum();
            if quarters >= 4 && sum > best.0 * (1.0 + 1e-9) {
                best = (sum, (quarters - 4) * piece as u64 / 4);
            }
            (filled, energy) = (0, 0.0);
        }
    }
    if best.0 == 0.0 && energy == 0.0 && last.iter().all(|e| *e == 0.0) {
        return Err(SyncError::Silent { stream });
    }
    if samples < FEWEST {
        return Err(SyncError::TooShort {
            stream,
            given: samples,
            needed: FEWEST,
        });
    }
    Ok(Facts {
        samples,
        loudest: best.1,
    })
}

/// Where the piece was found.
#[derive(Debug, Clone, Copy)]
pub(super) struct Found {
    pub(super) grid: Grid,
    /// Samples of the capture that the piece has.
    pub(super) from: u64,
    pub(super) to: u64,
}

/// A place that one way of correlating likes.
#[derive(Debug, Clone, Copy)]
struct Place {
    score: f64,
    /// In samples of the capture's rate from the reference's start.
    lag: i64,
}

/// Looks for a piece of the capture all over the reference.
///
/// Two correlations are taken: of the samples, which suffers from a frequency offset, and of the powers
/// less their mean, which does not but needs an amplitude that varies. The better one is told by the line
/// in the spectrum of `y x*`: for a tone in noise its peak is the maximum-likelihood frequency (D. C. Rife,
/// R. R. Boorstyn, "Single-tone parameter estimation from discrete-time observations", IEEE Trans. Inf.
/// Theory, September 1974).
pub(super) fn acquire(
    capture: &mut dyn Source,
    facts: &Facts,
    reference: &mut Reference<'_>,
) -> Result<Found, SyncError> {
    let step = reference.rate_hz() / capture.rate_hz();
    if !(1.0 / MOST_RATIO..=MOST_RATIO).contains(&step) {
        return Err(SyncError::Rates {
            capture_hz: capture.rate_hz(),
            reference_hz: reference.rate_hz(),
            most: MOST_RATIO,
        });
    }
    // Length of the reference in samples of the capture.
    let length = (reference.samples() as f64 / step).floor() as u64;
    if length < FEWEST {
        return Err(SyncError::TooShort {
            stream: "reference",
            given: reference.samples(),
            needed: (FEWEST as f64 * step).ceil() as u64,
        });
    }
    let mut best = 0.0f64;
    for most in PIECES {
        let count = (most as u64).min(facts.samples).min(length) as usize;
        let from = facts.loudest.min(facts.samples - count as u64);
        capture.rewind()?;
        skip(capture, from)?;
        let mut piece = vec![Complex64::ZERO; count];
        let mut got = 0;
        while got < count {
            let more = capture.read(&mut piece[got..])?;
            if more == 0 {
                break;
            }
            got += more;
        }
        let places = places(&piece, reference, length, (step, from as i64))?;
        for place in places {
            let start = place.lag as f64 * step;
            let x = resampled(reference, start, step, count)?;
            let (cycles, strength) = line(&x, &piece);
            best = best.max(strength);
            if strength >= LEAST {
                // The tone's phase counts from the piece's middle.
                let middle = from as f64 + (count / 2) as f64;
                return Ok(Found {
                    grid: Grid {
                        centre: middle,
                        position: start + (count / 2) as f64 * step,
                        step,
                        cycles,
                        change: 0.0,
                    },
                    from,
                    to: from + count as u64,
                });
            }
        }
    }
    Err(SyncError::Unrelated {
        correlation: best,
        least: LEAST,
    })
}

/// `count` values of the reference from `start` on.
fn resampled(
    reference: &mut Reference<'_>,
    start: f64,
    step: f64,
    count: usize,
) -> Result<Vec<Complex64>, SyncError> {
    let mut sampler = reference.sampler(start, step)?;
    let mut out = Vec::with_capacity(count + BLOCK);
    while out.len() < count {
        let samples = reference.more()?;
        sampler.push(samples, |value, _| out.push(value));
    }
    out.truncate(count);
    Ok(out)
}

/// The places that samples and powers like best, the likelier first.
fn places(
    piece: &[Complex64],
    reference: &mut Reference<'_>,
    length: u64,
    (step, home): (f64, i64),
) -> Result<Vec<Place>, SyncError> {
    let count = piece.len();
    // A long reference is taken in large blocks; a short one in one.
    let total = length as usize + count;
    let size = (8 * count)
        .min(total.next_power_of_two())
        .max(2 * count)
        .next_power_of_two();
    let hop = size - count + 1;
    let mut transform = Transform::new(size);
    let spectrum = |samples: &mut dyn Iterator<Item = Complex64>, transform: &mut Transform| {
        let mut work: Vec<Complex64> = samples.collect();
        work.resize(size, Complex64::ZERO);
        transform.forward(&mut work);
        work.iter_mut().for_each(|value| *value = value.conj());
        work
    };
    let mean = piece.iter().map(|y| y.norm_sqr()).sum::<f64>() / count as f64;
    let of_samples = spectrum(&mut piece.iter().copied(), &mut transform);
    let of_powers = spectrum(
        &mut piece.iter().map(|y| Complex64::from(y.norm_sqr() - mean)),
        &mut transform,
    );
    // Places from before the start (unless it is looped) to the last whole one.
    let first = if reference.looped() {
        0
    } else {
        -(count as i64 / 2)
    };
    let last = if reference.looped() {
        length as i64
    } else {
        length as i64 - count as i64 / 2
    };
    let mut sampler = reference.sampler(first as f64 * step, step)?;
    let mut held: Vec<Complex64> = Vec::new();
    let mut best = [Place { score: 0.0, lag: 0 }; 2];
    let mut at = first;
    while at <= last {
        while held.len() < size {
            let samples = reference.more()?;
            sampler.push(samples, |value, _| held.push(value));
        }
        // Running sums normalize each place by the reference it covers.
        let (mut energy, mut square) = (vec![0.0; size + 1], vec![0.0; size + 1]);
        for (n, x) in held[..size].iter().enumerate() {
            let power = x.norm_sqr();
            energy[n + 1] = energy[n] + power;
            square[n + 1] = square[n] + power * power;
        }
        let mut samples = held[..size].to_vec();
        let mut powers: Vec<Complex64> = samples
            .iter()
            .map(|x| Complex64::from(x.norm_sqr()))
            .collect();
        for (work, pattern) in [(&mut samples, &of_samples), (&mut powers, &of_powers)] {
            transform.forward(work);
            work.iter_mut().zip(pattern).for_each(|(x, p)| *x *= p);
            transform.inverse(work);
        }
        let places = hop.min((last - at + 1) as usize);
        for n in 0..places {
            let covered = energy[n + count] - energy[n];
            let spread = square[n + count] - square[n] - covered * covered / count as f64;
            let ways = [
                (samples[n].norm_sqr(), covered),
                (powers[n].re.max(0.0).powi(2), spread),
            ];
            for (best, (value, scale)) in best.iter_mut().zip(ways) {
                // A stretch without power resembles nothing.
                if scale <= 1e-12 * square[size].sqrt().max(energy[size] * 1e-3) {
                    continue;
                }
                let score = value / scale;
                let lag = at + n as i64;
                let (near, nearer) = (
                    (lag - best.lag).abs() < NEIGHBOURS,
                    (lag - home).abs() < (best.lag - home).abs(),
                );
                if score > best.score * (1.0 + EQUAL)
                    || near && score > best.score
                    || !near && nearer && score > best.score * (1.0 - EQUAL)
                {
                    *best = Place { score, lag };
                }
            }
        }
        held.drain(..hop);
        at += hop as i64;
    }
    let energy = mean * count as f64;
    let variance = piece
        .iter()
        .map(|y| (y.norm_sqr() - mean).powi(2))
        .sum::<f64>();
    let samples_score = best[0].score / energy / size as f64 / size as f64;
    let powers_score = if variance > 0.0 {
        best[1].score / variance / size as f64 / size as f64
    } else {
        0.0
    };
    let mut places = vec![best[0], best[1]];
    if powers_score > samples_score {
        places.reverse();
    }
    places.dedup_by_key(|place| place.lag);
    Ok(places)
}

/// The strongest line of `y x*`: cycles a sample, and its size against `|x| |y|`.
pub(super) fn line(x: &[Complex64], y: &[Complex64]) -> (f64, f64) {
    let size = (4 * x.len()).next_power_of_two();
    let mut product: Vec<Complex64> = x.iter().zip(y).map(|(x, y)| y * x.conj()).collect();
    let plain = product.clone();
    product.resize(size, Complex64::ZERO);
    Transform::new(size).forward(&mut product);
    let best = product
        .iter()
        .enumerate()
        .max_by(|a, b| a.1.norm_sqr().total_cmp(&b.1.norm_sqr()))
        .map_or(0, |(bin, _)| bin);
    // A parabola through three magnitudes: within a hundredth of a bin at this padding.
    let size_at = |bin: usize| product[bin % size].norm();
    let (below, peak, above) = (size_at(best + size - 1), size_at(best), size_at(best + 1));
    let bend = below - 2.0 * peak + above;
    let part = if bend < 0.0 {
        (0.5 * (below - above) / bend).clamp(-0.5, 0.5)
    } else {
        0.0
    };
    let mut cycles = (best as f64 + part) / size as f64;
    if cycles >= 0.5 {
        cycles -= 1.0;
    }
    let sum: Complex64 = plain
        .iter()
        .enumerate()
        .map(|(n, z)| z * Complex64::cis(-2.0 * PI * cycles * n as f64))
        .sum();
    let norm = |samples: &[Complex64]| samples.iter().map(|x| x.norm_sqr()).sum::<f64>();
    let strength = sum.norm() / (norm(x) * norm(y)).sqrt();
    (cycles, if strength.is_finite() { strength } else { 0.0 })
}
