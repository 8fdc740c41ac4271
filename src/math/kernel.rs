//! Values of a sampled sequence between its samples.

use std::f64::consts::TAU;
use std::sync::Arc;

use num_complex::Complex64;

use super::fir::kaiser_beta;
use super::window::{bessel_i0, sinc};

/// Table rows to one sample of the narrowest kernel feature. Between rows the taps are taken on the
/// straight line, which is wrong by at most `(pi / 1024)^2 / 8`: -118 dB at half the sample rate.
const ROWS: f64 = 1024.0;

/// Attenuation of the interpolator, dB.
const ATTENUATION_DB: f64 = 110.0;

/// Taps to each side of the interpolator at full bandwidth: right to its attenuation up to 0.46 of the rate.
const HALF: usize = 48;

/// Longest kernel to each side, samples: it bounds the table to 128 MB at one row a sample.
pub const LONGEST_HALF: usize = 1 << 16;

/// An impulse response of finite length, tabulated finely enough to be read anywhere.
#[derive(Debug, Clone)]
pub struct Kernel {
    half: usize,
    rows: usize,
    /// Row `p` holds `h(i - half + 1 - p / rows)` for `i` from 0 to `2 half - 1`.
    table: Vec<f64>,
}

impl Kernel {
    /// The kernel `h(t)`, `t` in samples, zero beyond `half` samples to each side, whose spectrum reaches to
    /// `bandwidth` (cycles a sample, one side, up to 1/2).
    pub fn new(half: usize, bandwidth: f64, h: impl Fn(f64) -> f64) -> Self {
        let half = half.clamp(1, LONGEST_HALF);
        let rows = (ROWS * (2.0 * bandwidth).clamp(1e-6, 1.0)).ceil().max(1.0) as usize;
        let mut table = Vec::with_capacity((rows + 1) * 2 * half);
        for row in 0..=rows {
            let part = row as f64 / rows as f64;
            for tap in 0..2 * half {
                table.push(h(tap as f64 - half as f64 + 1.0 - part));
            }
        }
        Self { half, rows, table }
    }

    /// A band-limited interpolator whose half-amplitude point lies at `cutoff` (cycles a sample, up to 1/2)
    /// and whose gain is one: a sinc under Kaiser's window, 110 dB down.
    pub fn interpolator(cutoff: f64) -> Self {
        let cutoff = cutoff.clamp(1e-6, 0.5);
        let half = (HALF as f64 * 0.5 / cutoff).ceil() as usize;
        let beta = kaiser_beta(ATTENUATION_DB);
        let reach = half as f64;
        let floor = bessel_i0(beta);
        Self::new(half, cutoff, move |t| {
            let part = t / reach;
            if part.abs() > 1.0 {
                return 0.0;
            }
            let taper = bessel_i0(beta * (1.0 - part * part).sqrt()) / floor;
            2.0 * cutoff * sinc(2.0 * cutoff * t) * taper
        })
    }

    /// Support to each side, samples.
    pub fn half(&self) -> usize {
        self.half
    }

    /// The value at `part` (0 to below 1) past sample `half - 1` of `samples`, which holds `2 half` of them,
    /// and its slope a sample.
    fn value(&self, samples: &[Complex64], part: f64) -> (Complex64, Complex64) {
        let at = part * self.rows as f64;
        let row = (at as usize).min(self.rows - 1);
        let width = 2 * self.half;
        let (first, second) = self.table[row * width..(row + 2) * width].split_at(width);
        // Two sums of each side by side: one alone would wait for each addition.
        let mut below = [Complex64::ZERO; 2];
        let mut above = [Complex64::ZERO; 2];
        let (pairs, _) = samples.as_chunks::<2>();
        let (first, _) = first.as_chunks::<2>();
        let (second, _) = second.as_chunks::<2>();
        for ((x, a), b) in pairs.iter().zip(first).zip(second) {
            below[0] += x[0] * a[0];
            above[0] += x[0] * b[0];
            below[1] += x[1] * a[1];
            above[1] += x[1] * b[1];
        }
        let below = below[0] + below[1];
        let rise = above[0] + above[1] - below;
        (below + rise * (at - row as f64), rise * self.rows as f64)
    }
}

/// Reads a stream through a kernel at the instants `start + k step` (samples of the stream), `k` from 0.
///
/// Before its first sample the stream counts as zero. The value at `t` is `sum x[n] h(n - t)`.
#[derive(Debug, Clone)]
pub struct Sampler {
    kernel: Arc<Kernel>,
    start: f64,
    step: f64,
    taken: u64,
    held: Vec<Complex64>,
    /// Index in the stream of the first sample held.
    first: i64,
}

impl Sampler {
    /// A reader at `start + k step`; `step` is positive.
    pub fn new(kernel: Arc<Kernel>, start: f64, step: f64) -> Self {
        let half = kernel.half as i64;
        // Zeros for everything that the first instants may ask for before the stream.
        let lead = (-(start.floor() as i64) + half).clamp(half, 1 << 22);
        Self {
            kernel,
            start,
            step,
            taken: 0,
            held: vec![Complex64::ZERO; lead as usize],
            first: -lead,
        }
    }

    /// As [`Sampler::new`] for a stream whose first sample has index `first`.
    pub fn from_index(kernel: Arc<Kernel>, start: f64, step: f64, first: i64) -> Self {
        Self {
            kernel,
            start,
            step,
            taken: 0,
            held: Vec::new(),
            first,
        }
    }

    /// Index of the sample that the next instant needs first.
    pub fn needs_from(&self) -> i64 {
        self.position().floor() as i64 - self.kernel.half as i64 + 1
    }

    fn position(&self) -> f64 {
        self.start + self.taken as f64 * self.step
    }

    /// Takes the next samples of the stream; `each` gets value and slope (a sample) of every instant that they
    /// complete.
    pub fn push(&mut self, samples: &[Complex64], mut each: impl FnMut(Complex64, Complex64)) {
        self.held.extend_from_slice(samples);
        let width = 2 * self.kernel.half;
        loop {
            let position = self.position();
            let whole = position.floor();
            let begin = whole as i64 - self.kernel.half as i64 + 1 - self.first;
            if begin < 0 {
                // Only where a stream begins later than the instants do: nothing is known there.
                each(Complex64::ZERO, Complex64::ZERO);
                self.taken += 1;
                continue;
            }
            let begin = begin as usize;
            let Some(window) = self.held.get(begin..begin + width) else {
                break;
            };
            let (value, slope) = self.kernel.value(window, position - whole);
            each(value, slope);
            self.taken += 1;
        }
        let done = (self.needs_from() - self.first).clamp(0, self.held.len() as i64) as usize;
        if done > 1 << 15 || done == self.held.len() {
            self.held.drain(..done);
            self.first += done as i64;
        }
    }

    /// Ends the stream with zeros for half the kernel.
    pub fn finish(&mut self, each: impl FnMut(Complex64, Complex64)) {
        let zeros = vec![Complex64::ZERO; self.kernel.half];
        self.push(&zeros, each);
    }
}

/// Turns a stream by `-2 pi (cycles n + turn n^2 / 2)` rad at sample `n`.
#[derive(Debug, Clone, Copy)]
pub struct Rotation {
    /// Cycles a sample at `n = 0`.
    pub cycles: f64,
    /// Change of that a sample.
    pub change: f64,
}

impl Rotation {
    /// Turns `samples`, the first of which is sample `n`.
    pub fn turn(&self, n: f64, samples: &mut [Complex64]) {
        if self.cycles == 0.0 && self.change == 0.0 {
            return;
        }
        // A recurrence over short runs, started anew exactly: its rounding stays below 1e-14.
        for (run, part) in samples.chunks_mut(64).enumerate() {
            let at = n + 64.0 * run as f64;
            let phase = |n: f64| (n * (self.cycles + 0.5 * self.change * n)).fract();
            let mut turn = Complex64::cis(-TAU * phase(at));
            let mut step = Complex64::cis(-TAU * (self.cycles + self.change * (at + 0.5)));
            let bend = Complex64::cis(-TAU * self.change);
            for sample in part {
                *sample *= turn;
                turn *= step;
                step *= bend;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn tone(cycles: f64, n: f64) -> Complex64 {
        Complex64::cis(TAU * cycles * n + 0.3)
    }

    #[test]
    fn tones_are_read_between_samples_at_any_rate() {
        for (cutoff, start, step, highest) in [
            (0.5, -3.3, 0.731, 0.46),
            (0.5, 100.25, 1.0, 0.46),
            (0.5, 7.0, 2f64.sqrt(), 0.46),
            (0.125, 50.5, 4.01, 0.11),
        ] {
            let kernel = Arc::new(Kernel::interpolator(cutoff));
            for cycles in [0.0, 0.2 * highest, -highest] {
                let mut sampler = Sampler::new(kernel.clone(), start, step);
                let mut got = Vec::new();
                for block in (0..6000).collect::<Vec<_>>().chunks(257) {
                    let samples: Vec<_> =
                        block.iter().map(|&n| tone(cycles, f64::from(n))).collect();
                    sampler.push(&samples, |value, slope| got.push((value, slope)));
                }
                assert!(got.len() > 500);
                for (k, (value, slope)) in got.iter().enumerate() {
                    let at = start + k as f64 * step;
                    if at < 500.0 {
                        continue;
                    }
                    // -105 dB: 110 of the window, and the straight lines between rows.
                    let error = (value - tone(cycles, at)).norm();
                    assert!(error < 6e-6, "{cutoff} {cycles} at {at}: {error:e}");
                    let right = Complex64::new(0.0, TAU * cycles) * tone(cycles, at);
                    assert!((slope - right).norm() < 2e-2, "{slope} {right}");
                }
            }
        }
    }

    #[test]
    fn a_rotation_is_exact_far_out() {
        let rotation = Rotation {
            cycles: 0.123,
            change: 1e-7,
        };
        let mut samples = vec![Complex64::ONE; 1000];
        rotation.turn(9e6, &mut samples);
        for (k, sample) in samples.iter().enumerate() {
            let n = 9e6 + k as f64;
            let cycles = 0.123 * n + 0.5e-7 * n * n;
            // The phase itself is known to about 1e-9 of a cycle there.
            assert!((sample - Complex64::cis(-TAU * cycles)).norm() < 1e-7);
        }
    }
}
