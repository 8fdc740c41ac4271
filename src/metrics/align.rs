//! Delay and gain of an output against its reference.

use std::f64::consts::PI;

use num_complex::Complex64;

use super::lag::{GUARD, LagPeak};
use super::pair::PairError;
use crate::math::Transform;

/// Longest search to each side, samples: it bounds the memory of a meter to about 200 MB.
const LONGEST_SEARCH: usize = 1 << 17;
/// Samples over which each end of the streams is faded in and out, at most.
const FADE: usize = 1024;
/// Samples done with that may stand before those still needed.
pub(super) const MOVE: usize = 1 << 15;
/// Fewest samples that are summed over.
const FEWEST: usize = 64;
/// Correlation below which nothing is said: two unrelated streams of some thousand samples reach
/// about 0.05, an output clipped to its phase alone still about 0.9.
const LEAST_CORRELATION: f64 = 0.1;

/// Where the output lies against the reference: `y(t) = gain x(t - delay)` and a rest.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Alignment {
    /// The output's delay behind the reference, s; negative where it is ahead.
    pub delay_s: f64,
    /// Least-squares complex gain `<x, y> / <x, x>` at this delay, over all of the sampled band.
    pub gain: Complex64,
    /// `|<x, y>| / (|x| |y|)` at this delay, 0 to 1; the output's power is taken over the
    /// reference's span, undelayed.
    pub correlation: f64,
    /// Samples of the reference that were summed over.
    pub samples: u64,
}

/// Finds delay and gain over whole streams: the first pass of two.
///
/// The cross-correlation `R(tau) = sum v(t) x*(t) y(t + tau)` is summed exactly for every whole lag
/// in the search range, block by block through transforms. `v` is 1 but for a fade at both ends of
/// the streams. The delay is where `|R|` is largest, found by Newton's method on the band-limited
/// interpolation of `R`; the reference's own slope `sum v Re(x* x')`, which the
/// fades leave behind, is taken off, so that a delayed copy is found without bias.
/// Signals may reach to 0.48 of the sample rate to each side.
///
/// Of a reference that repeats itself the smallest of equally good delays is taken.
#[derive(Debug, Clone)]
pub struct AlignmentMeter {
    rate_hz: f64,
    /// Longest delay searched, samples.
    search: usize,
    /// Lags summed to each side: the search and the neighbours its interpolation needs.
    lags: usize,
    /// Samples of the reference in a block.
    block: usize,
    transform: Transform,
    work: [Vec<Complex64>; 2],
    cross: Vec<Complex64>,
    reference: Vec<Complex64>,
    output: Vec<Complex64>,
    /// First sample held that is still needed.
    start: usize,
    fade: usize,
    summed: u64,
    seen: u64,
    reference_square: f64,
    output_square: f64,
    slope: f64,
}

impl AlignmentMeter {
    /// A meter of two streams at `rate_hz` that are at most `max_delay_s` apart, either way.
    ///
    /// # Errors
    /// [`PairError::Rate`], [`PairError::Search`].
    pub fn new(rate_hz: f64, max_delay_s: f64) -> Result<Self, PairError> {
        if !(rate_hz > 0.0 && rate_hz.is_finite()) {
            return Err(PairError::Rate { given_hz: rate_hz });
        }
        let search = (max_delay_s * rate_hz).ceil();
        if !(max_delay_s >= 0.0 && search <= LONGEST_SEARCH as f64) {
            return Err(PairError::Search {
                given_s: max_delay_s,
                longest_s: LONGEST_SEARCH as f64 / rate_hz,
            });
        }
        let search = search as usize + 1;
        let lags = search + GUARD;
        let length = (4 * lags).next_power_of_two().max(8192);
        let zeros = vec![Complex64::ZERO; length];
        let block = length - 2 * lags;
        Ok(Self {
            rate_hz,
            search,
            lags,
            block,
            transform: Transform::new(length),
            work: [zeros.clone(), zeros.clone()],
            cross: zeros,
            reference: Vec::new(),
            output: Vec::new(),
            start: 0,
            fade: FADE.min(block / 2),
            summed: 0,
            seen: 0,
            reference_square: 0.0,
            output_square: 0.0,
            slope: 0.0,
        })
    }

    /// Takes the next samples of both streams, equally many.
    ///
    /// # Errors
    /// [`PairError::Uneven`]; nothing is taken then.
    pub fn push(&mut self, reference: &[Complex64], output: &[Complex64]) -> Result<(), PairError> {
        if reference.len() != output.len() {
            return Err(PairError::Uneven {
                reference: reference.len(),
                output: output.len(),
            });
        }
        // Parts of one block keep the samples held back few, however much comes at once.
        let part = self.transform.length();
        for (reference, output) in reference.chunks(part).zip(output.chunks(part)) {
            self.seen += reference.len() as u64;
            self.reference.extend_from_slice(reference);
            self.output.extend_from_slice(output);
            // A block is summed only when another one follows: the last ones carry the fade.
            while self.reference.len() - self.start >= 2 * (self.block + self.lags) {
                self.sum_block(self.start, self.block, None);
                self.start += self.block;
            }
            if self.start >= part.max(MOVE) {
                self.reference.drain(..self.start);
                self.output.drain(..self.start);
                self.start = 0;
            }
        }
        Ok(())
    }

    /// Adds the block whose first lag stands at `at` in the samples held; `left` is the number of
    /// samples from its start to the end of the sum, where that is known.
    fn sum_block(&mut self, at: usize, count: usize, left: Option<usize>) {
        let from = at + self.lags;
        let [reference, output] = &mut self.work;
        reference[..count].copy_from_slice(&self.reference[from..from + count]);
        reference[count..].fill(Complex64::ZERO);
        let wide = count + 2 * self.lags;
        output[..wide].copy_from_slice(&self.output[at..at + wide]);
        output[wide..].fill(Complex64::ZERO);

        let middle = &self.output[from..from + count];
        self.reference_square += energy(&reference[..count]);
        self.output_square += energy(middle);

        // The fades, on the few samples they reach.
        let rising = (self.fade as u64).saturating_sub(self.summed) as usize;
        let falling = left.map_or(count, |left| left.saturating_sub(self.fade).min(count));
        for index in (0..rising.min(count)).chain(falling.max(rising.min(count))..count) {
            let (weight, slope) = if index < rising {
                fade(self.summed as usize + index, self.fade)
            } else {
                let (weight, slope) = fade(left.unwrap_or(0) - 1 - index, self.fade);
                (weight, -slope)
            };
            let square = reference[index].norm_sqr();
            self.reference_square -= (1.0 - weight) * square;
            self.output_square -= (1.0 - weight) * middle[index].norm_sqr();
            // sum v Re(x* x') = -1/2 sum v' |x|^2
            self.slope -= slope * square / 2.0;
            reference[index] *= weight;
        }

        self.transform.forward(reference);
        self.transform.forward(output);
        for ((cross, x), y) in self.cross.iter_mut().zip(reference).zip(output) {
            *cross += x.conj() * *y;
        }
        self.summed += count as u64;
    }

    /// Delay and gain of all samples so far.
    ///
    /// # Errors
    /// [`PairError::TooShort`], [`PairError::Silent`], [`PairError::Unrelated`],
    /// [`PairError::SearchEnd`].
    pub fn finish(mut self) -> Result<Alignment, PairError> {
        let mut left = (self.reference.len() - self.start).saturating_sub(2 * self.lags);
        if self.summed == 0 {
            if left < FEWEST {
                return Err(PairError::TooShort {
                    given: self.seen,
                    needed: (2 * self.lags + FEWEST) as u64,
                });
            }
            self.fade = self.fade.min(left / 4);
        }
        let mut at = self.start;
        while left > 0 {
            let count = left.min(self.block);
            self.sum_block(at, count, Some(left));
            at += count;
            left -= count;
        }
        for (stream, square) in [
            ("reference", self.reference_square),
            ("output", self.output_square),
        ] {
            if !(square > 0.0 && square.is_finite()) {
                return Err(PairError::Silent { stream });
            }
        }

        let length = self.transform.length() as f64;
        self.transform.inverse(&mut self.cross);
        let mut correlation = self.cross;
        correlation.truncate(2 * self.lags + 1);
        correlation.iter_mut().for_each(|lag| *lag /= length);
        let peak = LagPeak::find(
            &correlation,
            self.search,
            self.slope / self.reference_square,
        );
        let strength = peak.value.norm() / (self.reference_square * self.output_square).sqrt();
        if strength.is_nan() || strength < LEAST_CORRELATION {
            return Err(PairError::Unrelated {
                correlation: strength,
                least: LEAST_CORRELATION,
            });
        }
        let delay_s = peak.lag / self.rate_hz;
        if peak.at_end {
            return Err(PairError::SearchEnd { delay_s });
        }
        Ok(Alignment {
            delay_s,
            gain: peak.value / self.reference_square,
            correlation: strength.min(1.0),
            samples: self.summed,
        })
    }
}

/// Sum of squares, four sums side by side: one alone would wait for each addition.
fn energy(samples: &[Complex64]) -> f64 {
    let (fours, rest) = samples.as_chunks::<4>();
    let mut lanes = [0.0; 4];
    for four in fours {
        for (lane, sample) in lanes.iter_mut().zip(four) {
            *lane += sample.norm_sqr();
        }
    }
    lanes.iter().sum::<f64>() + rest.iter().map(|sample| sample.norm_sqr()).sum::<f64>()
}

/// A raised cosine from 0 to 1 over `length` samples: its value and its slope at sample `at`.
fn fade(at: usize, length: usize) -> (f64, f64) {
    let phase = PI * (at as f64 + 0.5) / length as f64;
    (
        (1.0 - phase.cos()) / 2.0,
        PI / (2.0 * length as f64) * phase.sin(),
    )
}
