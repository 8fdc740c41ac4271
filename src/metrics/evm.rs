//! The error of an output against its reference, after gain and delay are taken off.

use num_complex::Complex64;

use super::align::{Alignment, MOVE};
use super::pair::PairError;
use crate::math::Transform;
use crate::math::fir::{fractional_advance, kaiser_half_taps, low_pass};
use crate::units::db;

/// Taps to each side, and attenuation, of the filter that takes off the fraction of a sample: right
/// to -120 dB up to 0.48 of the sample rate.
const DELAY_HALF: usize = 128;
const DELAY_DB: f64 = 130.0;
/// The band's filter: its transition as a part of the band, and its attenuation.
const TRANSITION: f64 = 0.1;
const BAND_DB: f64 = 80.0;
/// Longest band filter to each side, taps: it takes a meter to about 230 MB.
const LONGEST_HALF: usize = 1 << 16;

/// How far an output is from its reference.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct ErrorFigures {
    /// RMS error over the reference's RMS in the band, percent, with the gain least-squares in that band.
    pub evm_percent: f64,
    /// Largest error of any sample over the reference's RMS in the band, percent, with the alignment's gain.
    pub evm_peak_percent: f64,
    /// Mean square of the error over the reference's in all of the sampled band, dB, with the gain
    /// least-squares in all of it. Minus infinity for an exact copy.
    pub nmse_db: f64,
    /// Least-squares gain in the band.
    pub gain: Complex64,
    /// Width of the band, Hz; `None` is all of the sampled band.
    pub band_hz: Option<f64>,
    /// Samples compared.
    pub samples: u64,
    /// Samples left out at both ends: those that the delay leaves without a partner, and those for
    /// which the filters have no full support.
    pub left_out: u64,
}

/// Sums over pairs of a reference sample and an error.
#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    reference: f64,
    error: f64,
    product: Complex64,
    peak: f64,
}

impl Sums {
    fn add(&mut self, reference: &[Complex64], error: &[Complex64]) {
        // Four sums side by side: one alone would wait for each addition before the next.
        let mut lanes = [Self::default(); 4];
        let (fours, rest) = reference.as_chunks::<4>();
        let (error_fours, error_rest) = error.as_chunks::<4>();
        for (x, e) in fours.iter().zip(error_fours) {
            for ((lane, x), e) in lanes.iter_mut().zip(x).zip(e) {
                lane.count(*x, *e);
            }
        }
        for (x, e) in rest.iter().zip(error_rest) {
            lanes[0].count(*x, *e);
        }
        for lane in lanes {
            self.reference += lane.reference;
            self.error += lane.error;
            self.product += lane.product;
            self.peak = self.peak.max(lane.peak);
        }
    }

    #[inline]
    fn count(&mut self, x: Complex64, e: Complex64) {
        let square = e.norm_sqr();
        self.reference += x.norm_sqr();
        self.error += square;
        self.product += x.conj() * e;
        self.peak = if square > self.peak {
            square
        } else {
            self.peak
        };
    }

    /// What is left of the gain: `<x, x + e> / <x, x>`.
    fn gain(&self) -> Complex64 {
        1.0 + self.product / self.reference
    }

    /// `|(x + e) / gain - x|^2 / |x|^2` with the least-squares gain, written without the difference
    /// of large numbers.
    fn ratio(&self) -> f64 {
        let rest = self.error - self.product.norm_sqr() / self.reference;
        rest.max(0.0) / self.gain().norm_sqr() / self.reference
    }
}

/// Holds an aligned output against its reference: the second pass of two.
///
/// With `x` the reference, `y` the output advanced by the alignment's delay, both over the same
/// samples and through the same filter, `g = <x, y> / <x, x>`: **EVM = 100 rms(y / g - x) / rms(x)**,
/// in percent. The error stands at the reference's scale, so additive noise `n` in `y = g (x + n)`
/// reads `rms(n) / rms(x)`, and Gaussian phase noise of `s` rad reads `sqrt(exp(s^2) - 1)`.
/// NMSE is the square of the same ratio without the filter, in dB.
///
/// The band's filter has linear phase: flat to 0.95, half amplitude at 1, 80 dB down at 1.05 times
/// half the width. The fraction of a sample is taken off by a windowed sinc. Both run as block
/// convolutions through one transform, and memory is a few blocks.
#[derive(Debug, Clone)]
pub struct ErrorMeter {
    alignment: Alignment,
    band_hz: Option<f64>,
    /// Samples of each stream that have no partner and are passed over first.
    skip_reference: usize,
    skip_output: usize,
    /// Filter support to each side.
    half: usize,
    transform: Transform,
    /// Takes the output to the reference: delay, gain and the transform's factor.
    advance: Vec<Complex64>,
    band: Option<Vec<f64>>,
    /// Reference, error, and the error in the band.
    work: [Vec<Complex64>; 3],
    reference: Vec<Complex64>,
    output: Vec<Complex64>,
    /// First sample held that is still needed.
    start: usize,
    full: Sums,
    inside: Sums,
    samples: u64,
    seen: u64,
}

impl ErrorMeter {
    /// A meter of streams at `rate_hz` with the `alignment` of their first pass. `band_hz` is the full
    /// width of the band, centred on the carrier, in which the EVM is taken; `None` takes all.
    ///
    /// # Errors
    /// [`PairError::Rate`], [`PairError::Band`]; [`PairError::Silent`] for a gain of 0.
    pub fn new(
        alignment: Alignment,
        rate_hz: f64,
        band_hz: Option<f64>,
    ) -> Result<Self, PairError> {
        if !(rate_hz > 0.0 && rate_hz.is_finite()) {
            return Err(PairError::Rate { given_hz: rate_hz });
        }
        if !(alignment.gain.norm() > 0.0 && alignment.gain.is_finite()) {
            return Err(PairError::Silent { stream: "output" });
        }
        let band_taps = match band_hz {
            None => None,
            Some(band_hz) => {
                let width = band_hz / rate_hz;
                let half = kaiser_half_taps(BAND_DB, TRANSITION * width);
                if !(width > 0.0 && width <= 1.0 && half <= LONGEST_HALF) {
                    let narrowest = kaiser_half_taps(BAND_DB, TRANSITION) as f64;
                    return Err(PairError::Band {
                        given_hz: band_hz,
                        narrowest_hz: rate_hz * narrowest / LONGEST_HALF as f64,
                        widest_hz: rate_hz,
                    });
                }
                Some(low_pass(width / 2.0, half, BAND_DB))
            }
        };
        let half = DELAY_HALF + band_taps.as_ref().map_or(0, |taps| taps.len() / 2);
        let length = (8 * half).next_power_of_two().max(8192);
        let mut transform = Transform::new(length);

        let delay = alignment.delay_s * rate_hz;
        let whole = delay.round();
        let scale = 1.0 / (alignment.gain * length as f64);
        let mut advance = response(
            &fractional_advance(delay - whole, DELAY_HALF, DELAY_DB),
            &mut transform,
        );
        advance.iter_mut().for_each(|value| *value *= scale);
        let band = band_taps.map(|taps| {
            // Symmetric taps about index 0: the response is real.
            let response = response(&taps, &mut transform);
            response.into_iter().map(|value| value.re).collect()
        });
        let zeros = vec![Complex64::ZERO; length];
        Ok(Self {
            alignment,
            band_hz,
            skip_reference: (-whole).max(0.0) as usize,
            skip_output: whole.max(0.0) as usize,
            half,
            transform,
            advance,
            band,
            work: [zeros.clone(), zeros.clone(), zeros],
            reference: Vec::new(),
            output: Vec::new(),
            start: 0,
            full: Sums::default(),
            inside: Sums::default(),
            samples: 0,
            seen: 0,
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
        let length = self.transform.length();
        for (reference, output) in reference.chunks(length).zip(output.chunks(length)) {
            self.seen += reference.len() as u64;
            take(&mut self.reference, &mut self.skip_reference, reference);
            take(&mut self.output, &mut self.skip_output, output);
            while self.reference.len().min(self.output.len()) >= self.start + length {
                self.compare(self.start, length);
                self.start += length - 2 * self.half;
            }
            // Moved to the front only now and then.
            if self.start >= length.max(MOVE) {
                self.reference.drain(..self.start);
                self.output.drain(..self.start);
                self.start = 0;
            }
        }
        Ok(())
    }

    /// Compares the inner ones of the `count` samples that start at `at`.
    fn compare(&mut self, at: usize, count: usize) {
        let [reference, output, error] = &mut self.work;
        for (work, held) in [
            (&mut *reference, &self.reference),
            (&mut *output, &self.output),
        ] {
            work[..count].copy_from_slice(&held[at..at + count]);
            work[count..].fill(Complex64::ZERO);
        }
        let inner = self.half..count - self.half;
        self.transform.forward(reference);
        self.transform.forward(output);
        let scale = 1.0 / self.transform.length() as f64;
        for ((y, x), advance) in output
            .iter_mut()
            .zip(reference.iter_mut())
            .zip(&self.advance)
        {
            *x *= scale;
            *y = *y * advance - *x;
        }
        if let Some(band) = &self.band {
            for (((x, e), y), band) in reference
                .iter_mut()
                .zip(&mut *error)
                .zip(&*output)
                .zip(band)
            {
                *x *= band;
                *e = y * band;
            }
            self.transform.inverse(reference);
            self.transform.inverse(error);
            self.inside
                .add(&reference[inner.clone()], &error[inner.clone()]);
        }
        self.transform.inverse(output);
        self.full.add(
            &self.reference[at + inner.start..at + inner.end],
            &output[inner.clone()],
        );
        self.samples += inner.len() as u64;
    }

    /// The figures of all samples so far.
    ///
    /// # Errors
    /// [`PairError::TooShort`], [`PairError::Silent`].
    pub fn finish(mut self) -> Result<ErrorFigures, PairError> {
        let rest = self.reference.len().min(self.output.len()) - self.start;
        if rest > 2 * self.half {
            self.compare(self.start, rest);
        }
        if self.samples == 0 {
            return Err(PairError::TooShort {
                given: self.seen,
                needed: self.seen - rest as u64 + 2 * self.half as u64 + 1,
            });
        }
        let inside = match self.band {
            Some(_) => self.inside,
            None => self.full,
        };
        for sums in [inside, self.full] {
            if !(sums.reference > 0.0 && sums.reference.is_finite()) {
                return Err(PairError::Silent {
                    stream: "reference",
                });
            }
        }
        let mean_square = inside.reference / self.samples as f64;
        Ok(ErrorFigures {
            evm_percent: 100.0 * inside.ratio().sqrt(),
            evm_peak_percent: 100.0 * (inside.peak / mean_square).sqrt(),
            nmse_db: db(self.full.ratio()),
            gain: self.alignment.gain * inside.gain(),
            band_hz: self.band_hz,
            samples: self.samples,
            left_out: self.seen - self.samples,
        })
    }
}

/// Appends `samples` but for the first `skip` of the stream.
fn take(held: &mut Vec<Complex64>, skip: &mut usize, samples: &[Complex64]) {
    let passed = samples.len().min(*skip);
    *skip -= passed;
    held.extend_from_slice(&samples[passed..]);
}

/// The transform of `taps` with their centre at index 0.
fn response(taps: &[f64], transform: &mut Transform) -> Vec<Complex64> {
    let length = transform.length();
    let half = taps.len() / 2;
    let mut circle = vec![Complex64::ZERO; length];
    for (index, tap) in taps.iter().enumerate() {
        circle[(index + length - half) % length] = Complex64::from(*tap);
    }
    transform.forward(&mut circle);
    circle
}
