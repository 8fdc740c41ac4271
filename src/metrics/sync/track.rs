//! From one piece to the whole capture: Gauss-Newton steps on block sums, over a stretch that grows.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::acquire::{Facts, Found, LEAST};
use super::pair::{PairBlock, PairReader, Reference};
use super::{Grid, Sync, SyncError};
use crate::math::small::Square;
use crate::signal::Source;

/// Blocks that a stretch is cut into.
const BLOCKS: u64 = 128;

/// How much a stretch grows at a time.
const GROWTH: u64 = 4;

/// Steps on one stretch, at most.
const MOST_STEPS: usize = 6;

/// A block whose correlation is below this part of the best one's does not follow the reference.
const COHERENT: f64 = 0.25;

/// A drift is believed where it exceeds this many standard deviations.
const SURE: f64 = 5.0;

/// Sums over one block.
#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    /// Middle, samples from the grid's centre.
    middle: f64,
    first: u64,
    count: u64,
    xx: f64,
    yy: f64,
    dd: f64,
    xy: Complex64,
    dy: Complex64,
    dx: Complex64,
}

impl Sums {
    fn add(&mut self, x: &[Complex64], slope: &[Complex64], y: &[Complex64]) {
        for ((x, d), y) in x.iter().zip(slope).zip(y) {
            self.xx += x.norm_sqr();
            self.yy += y.norm_sqr();
            self.dd += d.norm_sqr();
            self.xy += x.conj() * y;
            self.dy += d.conj() * y;
            self.dx += d.conj() * x;
        }
        self.count += x.len() as u64;
    }

    fn correlation(&self) -> f64 {
        let strength = self.xy.norm() / (self.xx * self.yy).sqrt();
        if strength.is_finite() { strength } else { 0.0 }
    }

    /// What the reference should move by, in its own samples, and the weight of that.
    ///
    /// `y = g (x + s x')` with the gain projected out: `s = Re((<x', y> - <x', x> g) / g) / D`, with
    /// `D = |x'|^2 - |<x', x>|^2 / |x|^2`.
    fn shift(&self) -> (f64, f64) {
        let gain = self.xy / self.xx;
        let own = self.dd - self.dx.norm_sqr() / self.xx;
        let shift = ((self.dy - self.dx * gain) / gain).re / own;
        let weight = own * gain.norm_sqr();
        if shift.is_finite() && weight.is_finite() {
            (shift, weight)
        } else {
            (0.0, 0.0)
        }
    }

    /// Power of what the gain does not explain, a sample.
    fn rest(&self) -> f64 {
        (self.yy - self.xy.norm_sqr() / self.xx).max(0.0)
    }
}

/// Sums over the blocks of `from..to`.
fn block_sums(
    capture: &mut dyn Source,
    reference: &mut Reference<'_>,
    grid: Grid,
    (from, to): (u64, u64),
) -> Result<Vec<Sums>, SyncError> {
    let width = (to - from).div_ceil(BLOCKS).max(1);
    let mut blocks = vec![Sums::default(); (to - from).div_ceil(width) as usize];
    let mut reader = PairReader::new(capture, reference, grid, (from, to))?;
    let mut pair = PairBlock::default();
    while reader.next_block(&mut pair)? > 0 {
        let mut at = 0;
        while at < pair.capture.len() {
            let offset = pair.first + at as u64 - from;
            let index = offset / width;
            let left = ((index + 1) * width - offset) as usize;
            let end = (at + left).min(pair.capture.len());
            blocks[index as usize].add(
                &pair.reference[at..end],
                &pair.slope[at..end],
                &pair.capture[at..end],
            );
            at = end;
        }
    }
    for (index, block) in blocks.iter_mut().enumerate() {
        block.first = from + index as u64 * width;
        block.middle = block.first as f64 + (block.count as f64 - 1.0) / 2.0 - grid.centre;
    }
    blocks.retain(|block| block.count > 0);
    Ok(blocks)
}

/// The longest run of blocks that follow the reference.
fn coherent(blocks: &[Sums]) -> std::ops::Range<usize> {
    let best = blocks.iter().map(Sums::correlation).fold(0.0, f64::max);
    let good = |block: &Sums| block.correlation() >= (COHERENT * best).max(LEAST / 2.0);
    let (mut longest, mut start) = (0..0, 0);
    for index in 0..=blocks.len() {
        if blocks.get(index).is_some_and(good) {
            continue;
        }
        if index - start > longest.len() {
            longest = start..index;
        }
        start = index + 1;
    }
    longest
}

/// Weighted polynomial through `(at, value, weight)`; coefficients, and the inverse of the normal matrix' last
/// diagonal entry.
fn fit<const N: usize>(points: &[(f64, f64, f64)]) -> Option<([f64; N], [f64; N])> {
    let mut matrix = Square::<N>::ZERO;
    let mut right = [0.0; N];
    for &(at, value, weight) in points {
        let mut power = [1.0; N];
        for i in 1..N {
            power[i] = power[i - 1] * at;
        }
        for i in 0..N {
            for j in 0..N {
                matrix.0[i][j] += weight * power[i] * power[j];
            }
            right[i] += weight * power[i] * value;
        }
    }
    let solution = matrix.solve_leading(N, &right)?;
    let mut variances = [0.0; N];
    for (i, variance) in variances.iter_mut().enumerate() {
        let mut unit = [0.0; N];
        unit[i] = 1.0;
        *variance = matrix.solve_leading(N, &unit)?[i];
    }
    Some((solution, variances))
}

/// One correction of the grid.
struct Correction {
    grid: Grid,
    /// Largest movement of the reference in the stretch, samples of it.
    moved: f64,
    /// Largest turn in the stretch, cycles.
    turned: f64,
    cycles_deviation: f64,
    slow_phase_rad: f64,
}

/// Fits delay and phase of the blocks by lines (the phase by a parabola where it is one).
fn correct(blocks: &[Sums], grid: Grid) -> Option<Correction> {
    let (first, last) = (blocks.first()?, blocks.last()?);
    let (low, high) = (first.middle, last.middle);
    let (middle, reach) = ((low + high) / 2.0, ((high - low) / 2.0).max(1.0));
    let scaled = |block: &Sums| (block.middle - middle) / reach;
    let shifts: Vec<_> = blocks
        .iter()
        .map(|block| {
            let (shift, weight) = block.shift();
            (scaled(block), shift, weight)
        })
        .collect();
    let line = if blocks.len() >= 3 {
        fit::<2>(&shifts)?.0
    } else {
        let (weight, sum) = shifts
            .iter()
            .fold((0.0, 0.0), |(w, s), p| (w + p.2, s + p.1 * p.2));
        [if weight > 0.0 { sum / weight } else { 0.0 }, 0.0]
    };
    // Phases are unrolled from the middle outwards.
    let mut phases: Vec<f64> = blocks.iter().map(|block| block.xy.arg()).collect();
    let centre = blocks.len() / 2;
    let near = |value: f64, to: f64| value - TAU * ((value - to) / TAU).round();
    for index in centre + 1..phases.len() {
        phases[index] = near(phases[index], phases[index - 1]);
    }
    for index in (0..centre).rev() {
        phases[index] = near(phases[index], phases[index + 1]);
    }
    let points: Vec<_> = blocks
        .iter()
        .zip(&phases)
        .map(|(block, &phase)| (scaled(block), phase, block.xy.norm_sqr() / block.xx))
        .collect();
    let (mut curve, mut deviation) = ([phases[centre], 0.0, 0.0], 0.0);
    if blocks.len() >= 3 {
        let (straight, variances) = fit::<2>(&points)?;
        curve = [straight[0], straight[1], 0.0];
        deviation = variances[1];
    }
    let residual = |curve: &[f64; 3]| {
        let (mut sum, mut weights) = (0.0, 0.0);
        for (at, phase, weight) in &points {
            sum += weight * (phase - curve[0] - at * (curve[1] + at * curve[2])).powi(2);
            weights += weight;
        }
        (sum, sum / weights)
    };
    if blocks.len() >= 8 {
        let (bent, variances) = fit::<3>(&points)?;
        // Variance of a weighted residual as the residuals themselves show it.
        let noise = residual(&bent).0 / (blocks.len() - 3) as f64;
        if bent[2].abs() > SURE * (noise * variances[2]).sqrt() || grid.change != 0.0 {
            curve = bent;
            deviation = variances[1];
        }
    }
    let (sum, mean_square) = residual(&curve);
    let noise = sum / (blocks.len().saturating_sub(2)).max(1) as f64;
    // The larger of what the residuals show and what the noise of the samples says.
    let total: f64 = blocks.iter().map(|block| block.count as f64).sum();
    let by_samples = blocks.iter().map(Sums::rest).sum::<f64>() / total / 2.0;
    let deviation = (noise.max(by_samples) * deviation).sqrt() / reach / TAU;

    // Everything counts from the stretch's middle from now on.
    let to = grid.centre + middle;
    let slope = line[1] / reach;
    let bend = curve[2] / (reach * reach);
    Some(Correction {
        grid: Grid {
            centre: to,
            position: grid.at(to) + line[0],
            step: grid.step + slope,
            cycles: grid.cycles + grid.change * middle + curve[1] / reach / TAU,
            change: grid.change + 2.0 * bend / TAU,
        },
        moved: line[0].abs() + line[1].abs(),
        turned: (curve[1].abs() + curve[2].abs()) / TAU,
        cycles_deviation: deviation,
        slow_phase_rad: mean_square.sqrt(),
    })
}

/// Samples of the capture that have a partner in the reference.
fn overlap(grid: &Grid, capture: u64, reference: &Reference<'_>) -> (u64, u64) {
    if reference.looped() {
        return (0, capture);
    }
    let at = |position: f64| grid.centre + (position - grid.position) / grid.step;
    // Near its ends a reference that was sent once is not known between its samples.
    let guard = (reference.reach() as f64).min(reference.samples() as f64 / 8.0);
    let last = reference.samples() as f64 - 1.0 - guard;
    let from = at(guard).ceil().max(0.0) as u64;
    let to = (at(last).floor() + 1.0).clamp(0.0, capture as f64) as u64;
    (from.min(to), to)
}

/// Grows the stretch until it is all that overlaps.
pub(super) fn track(
    capture: &mut dyn Source,
    facts: &Facts,
    reference: &mut Reference<'_>,
    found: Found,
) -> Result<Sync, SyncError> {
    let mut grid = found.grid;
    let (mut from, mut to) = (found.from, found.to);
    let unrelated = |correlation| SyncError::Unrelated {
        correlation,
        least: LEAST,
    };
    loop {
        let limits = overlap(&grid, facts.samples, reference);
        from = from.max(limits.0);
        to = to.min(limits.1);
        if to < from + 2 {
            return Err(unrelated(0.0));
        }
        let whole = (from, to) == limits;
        let mut last = None;
        for step in 0..MOST_STEPS {
            let blocks = block_sums(capture, reference, grid, (from, to))?;
            let run = coherent(&blocks);
            let blocks = &blocks[run];
            let strength = total(blocks).correlation();
            let Some(correction) = correct(blocks, grid) else {
                return Err(unrelated(strength));
            };
            grid = correction.grid;
            let settled = correction.moved < 1e-4 && correction.turned < 1e-3;
            // The sums stand before the last correction, which is small by then.
            let ends = (
                blocks.first().map_or(from, |block| block.first),
                blocks.last().map_or(to, |block| block.first + block.count),
            );
            last = Some((correction, total(blocks), ends));
            if settled || step + 1 == MOST_STEPS {
                break;
            }
        }
        let Some((correction, sums, ends)) = last else {
            return Err(unrelated(0.0));
        };
        if !whole {
            let length = to - from;
            let more = length * (GROWTH - 1) / 2;
            from = from.saturating_sub(more);
            to = (to + more).min(facts.samples);
            continue;
        }
        let strength = sums.correlation();
        if strength < LEAST / 2.0 {
            return Err(unrelated(strength));
        }
        return Ok(finished(capture, reference, grid, ends, &correction, &sums));
    }
}

/// All blocks as one, each turned to the same phase.
fn total(blocks: &[Sums]) -> Sums {
    let mut sums = Sums::default();
    for block in blocks {
        sums.count += block.count;
        sums.xx += block.xx;
        sums.yy += block.yy;
        sums.xy += Complex64::from(block.xy.norm());
    }
    // The phase of the middle block is the gain's.
    if let Some(middle) = blocks.get(blocks.len() / 2)
        && middle.xy.norm() > 0.0
    {
        sums.xy *= middle.xy / middle.xy.norm();
    }
    sums
}

fn finished(
    capture: &dyn Source,
    reference: &Reference<'_>,
    grid: Grid,
    (from, to): (u64, u64),
    correction: &Correction,
    sums: &Sums,
) -> Sync {
    let capture_hz = capture.rate_hz();
    let reference_hz = reference.rate_hz();
    let rate_error = grid.step * capture_hz / reference_hz - 1.0;
    let mut start = grid.at(0.0);
    if reference.looped() {
        // The first start of a period at or after the capture's first sample.
        let period = reference.samples() as f64;
        start -= (start / period).ceil() * period;
    }
    Sync {
        delay_s: -start / reference_hz,
        rate_error,
        frequency_hz: grid.cycles * capture_hz,
        drift_hz_per_s: grid.change * capture_hz * capture_hz,
        gain: sums.xy / sums.xx,
        correlation: sums.correlation().min(1.0),
        from,
        to,
        frequency_deviation_hz: correction.cycles_deviation * capture_hz,
        slow_phase_deg: correction.slow_phase_rad.to_degrees(),
        grid,
    }
}
