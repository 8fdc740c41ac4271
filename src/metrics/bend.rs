//! Amplitude and phase of an output over the amplitude of its reference: the static map, and what it leaves.

use std::f64::consts::TAU;

use num_complex::Complex64;
use serde::Serialize;

use crate::units::db;

/// Cells over the reference's amplitude.
const CELLS: usize = 96;

/// Pairs kept for pictures.
const MOST_PAIRS: usize = 20_000;

/// A cell with fewer samples is left out of the map.
const FEWEST: u64 = 8;

/// What an output does with the amplitude of its reference.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Bend {
    /// The fitted static map, amplitudes rising.
    pub map: Vec<BendPoint>,
    /// Mean square of what one complex gain leaves, over the output's, dB.
    pub linear_rest_db: f64,
    /// Mean square of what the static map leaves, over the output's, dB: memory and noise.
    pub static_rest_db: f64,
    /// Largest part of the rise of the amplitude that the monotone fit had to level, as a part of the peak.
    pub levelled: f64,
    /// Some pairs of (reference amplitude, output amplitude over the gain, phase in degrees), evenly taken.
    #[serde(skip)]
    pub pairs: Vec<[f64; 3]>,
}

/// One point of the static map.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct BendPoint {
    /// Reference amplitude, full scale 1.
    pub amplitude: f64,
    /// Output amplitude, over the linear gain; never falls.
    pub output: f64,
    /// Output phase against the linear gain's, degrees.
    pub phase_deg: f64,
    /// RMS distance of the output from the map here, over the linear gain.
    pub spread: f64,
    /// Samples in the cell.
    pub samples: u64,
}

/// Sums of `v = y x* / |x|` over the samples of one cell, for a straight line through them.
#[derive(Debug, Clone, Copy, Default)]
struct Cell {
    count: u64,
    amplitude: f64,
    square: f64,
    value: Complex64,
    product: Complex64,
    energy: f64,
}

impl Cell {
    fn mean(&self) -> Complex64 {
        self.value / self.count as f64
    }

    /// Energy that the cell's own line leaves, a sample.
    fn rest(&self) -> f64 {
        let count = self.count as f64;
        let across = self.square - self.amplitude * self.amplitude / count;
        let along = self.product - self.value * (self.amplitude / count);
        let around = self.energy - self.value.norm_sqr() / count;
        let explained = if across > 1e-12 * self.square {
            along.norm_sqr() / across
        } else {
            0.0
        };
        // Two complex numbers were fitted.
        (around - explained).max(0.0) / (count - 2.0).max(1.0)
    }
}

/// Collects pairs of a reference and an output on one time grid.
///
/// In each of 96 cells of the reference's amplitude `a` the complex output, turned back by the reference's
/// phase, is fitted by a straight line over `a`. The energy that the lines leave is memory and noise: a
/// static map of `a` alone explains the rest.
#[derive(Debug, Clone)]
pub struct BendMeter {
    peak: f64,
    gain: Complex64,
    cells: Vec<Cell>,
    xx: f64,
    yy: f64,
    xy: Complex64,
    seen: u64,
    stride: u64,
    pairs: Vec<[f64; 3]>,
}

impl BendMeter {
    /// A meter of references up to `peak` and outputs that are about `gain` times as large; `samples` of them
    /// are to come.
    pub fn new(peak: f64, gain: Complex64, samples: u64) -> Self {
        Self {
            peak,
            gain,
            cells: vec![Cell::default(); CELLS],
            xx: 0.0,
            yy: 0.0,
            xy: Complex64::ZERO,
            seen: 0,
            stride: (samples / MOST_PAIRS as u64).max(1),
            pairs: Vec::new(),
        }
    }

    /// Takes the next pairs.
    pub fn push(&mut self, reference: &[Complex64], output: &[Complex64]) {
        let unscale = 1.0 / self.gain;
        let cells_a_unit = CELLS as f64 / self.peak;
        for (x, y) in reference.iter().zip(output) {
            let y = y * unscale;
            let amplitude = x.norm();
            let power = y.norm_sqr();
            self.xx += amplitude * amplitude;
            self.yy += power;
            let product = x.conj() * y;
            self.xy += product;
            let value = if amplitude > 0.0 {
                product / amplitude
            } else {
                y
            };
            let index = ((amplitude * cells_a_unit) as usize).min(CELLS - 1);
            let cell = &mut self.cells[index];
            cell.count += 1;
            cell.amplitude += amplitude;
            cell.square += amplitude * amplitude;
            cell.value += value;
            cell.product += value * amplitude;
            cell.energy += power;
            if self.seen.is_multiple_of(self.stride) {
                self.pairs
                    .push([amplitude, power.sqrt(), value.arg().to_degrees()]);
            }
            self.seen += 1;
        }
    }

    /// The map; `None` without any power.
    pub fn finish(self) -> Option<Bend> {
        if !(self.xx > 0.0 && self.yy > 0.0 && self.yy.is_finite()) {
            return None;
        }
        let linear = self.xy / self.xx;
        let linear_rest = (self.yy - self.xy.norm_sqr() / self.xx).max(0.0) / self.yy;
        let static_rest = self
            .cells
            .iter()
            .filter(|cell| cell.count > 0)
            .map(|cell| cell.rest() * cell.count as f64)
            .sum::<f64>()
            / self.yy;
        let used: Vec<&Cell> = self
            .cells
            .iter()
            .filter(|cell| cell.count >= FEWEST)
            .collect();
        let outputs: Vec<f64> = used
            .iter()
            .map(|cell| (cell.mean() / linear).norm())
            .collect();
        let weights: Vec<f64> = used.iter().map(|cell| cell.count as f64).collect();
        let monotone = pooled(&outputs, &weights);
        let highest = monotone.last().copied().unwrap_or(1.0);
        let levelled = outputs
            .iter()
            .zip(&monotone)
            .map(|(a, b)| (a - b).abs())
            .fold(0.0, f64::max)
            / highest;
        let mut phase = 0.0;
        let mut points: Vec<BendPoint> = used
            .iter()
            .zip(&monotone)
            .rev()
            .map(|(cell, &output)| {
                // From the top, where the phase is surest, downwards without jumps.
                let here = (cell.mean() / linear).arg();
                phase = here - TAU * ((here - phase) / TAU).round();
                BendPoint {
                    amplitude: cell.amplitude / cell.count as f64,
                    output,
                    phase_deg: phase.to_degrees(),
                    spread: cell.rest().sqrt() / linear.norm(),
                    samples: cell.count,
                }
            })
            .collect();
        points.reverse();
        Some(Bend {
            map: points,
            linear_rest_db: db(linear_rest),
            static_rest_db: db(static_rest),
            levelled,
            pairs: self.pairs,
        })
    }
}

/// The nearest sequence that never falls, weighted: neighbours that fall are joined to their mean until
/// none does (M. Ayer, H. D. Brunk, G. M. Ewing, W. T. Reid, E. Silverman, Ann. Math. Statist., 1955).
fn pooled(values: &[f64], weights: &[f64]) -> Vec<f64> {
    let mut blocks: Vec<(f64, f64, usize)> = Vec::new();
    for (&value, &weight) in values.iter().zip(weights) {
        blocks.push((value, weight, 1));
        while let [.., before, last] = blocks[..] {
            if before.0 <= last.0 {
                break;
            }
            let weight = before.1 + last.1;
            let mean = (before.0 * before.1 + last.0 * last.1) / weight;
            blocks.pop();
            blocks.pop();
            blocks.push((mean, weight, before.2 + last.2));
        }
    }
    blocks
        .into_iter()
        .flat_map(|(value, _, count)| std::iter::repeat_n(value, count))
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn falling_neighbours_are_pooled() {
        assert_eq!(
            pooled(
                &[1.0, 3.0, 2.0, 2.0, 5.0, 4.0],
                &[1.0, 1.0, 1.0, 2.0, 1.0, 3.0]
            ),
            [1.0, 2.25, 2.25, 2.25, 4.25, 4.25]
        );
    }

    /// A cubic without memory: its map is found, and nothing is left; with an echo of -40 dB that is left.
    #[test]
    fn a_static_curve_leaves_only_the_memory() {
        let mut state = 1u64;
        let mut draw = || {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 11) as f64 * 2f64.powi(-53) - 0.5
        };
        let x: Vec<_> = (0..200_000)
            .map(|_| Complex64::new(draw(), draw()))
            .collect();
        let bent = |x: Complex64| x * (Complex64::ONE - x.norm_sqr() * Complex64::new(0.3, 0.2));
        for echo in [0.0, 0.01] {
            let y: Vec<_> = (0..x.len())
                .map(|n| 3.0 * (bent(x[n]) + echo * if n > 0 { x[n - 1] } else { x[0] }))
                .collect();
            let mut meter = BendMeter::new(0.75, Complex64::new(3.0, 0.0), x.len() as u64);
            meter.push(&x, &y);
            let bend = meter.finish().unwrap();
            if echo == 0.0 {
                // Lines over cells of 1/128: the curve's bend within one leaves less than -80 dB.
                assert!(bend.static_rest_db < -80.0, "{}", bend.static_rest_db);
                assert!(bend.linear_rest_db > -35.0);
            } else {
                // The echo is as strong as the reference times 0.01; the output is a little weaker.
                assert!(
                    (bend.static_rest_db + 39.4).abs() < 0.5,
                    "{}",
                    bend.static_rest_db
                );
            }
            let first = bend.map[0].phase_deg;
            for point in &bend.map {
                let right = bent(Complex64::from(point.amplitude));
                let phase = right.arg().to_degrees() + first;
                assert!((point.phase_deg - phase).abs() < 0.5 + 10.0 * echo / point.amplitude);
            }
        }
    }
}
