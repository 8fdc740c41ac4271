//! A source read at a whole multiple of its rate.

use num_complex::Complex64;
use rubato::audioadapter_buffers::direct::SequentialSliceOfVecs;
use rubato::{Fft, FixedSync, Indexing, Resampler, WindowFunction};

use super::{SignalError, Source};

/// Input samples a block of the resampler.
const BLOCK: usize = 1024;

/// A band-limited interpolation of a source to `factor` times its rate, its delay removed: output sample
/// `n * factor` lies at the instant of input sample `n`.
///
/// The interpolation filter passes up to 0.96 of the input's Nyquist frequency; signals that fill the band
/// to its very edge lose what lies above. Before the start and past the end the source is zero.
pub struct Oversampled<'a> {
    source: &'a mut dyn Source,
    factor: usize,
    resampler: Option<Fft<f64>>,
    input: Vec<Complex64>,
    channels_in: [Vec<f64>; 2],
    channels_out: [Vec<f64>; 2],
    /// Output samples in `channels_out` not yet delivered.
    ready: std::ops::Range<usize>,
    /// Output samples still to be dropped at the start.
    skip: usize,
    taken: u64,
    delivered: u64,
    ended: bool,
}

impl<'a> Oversampled<'a> {
    /// `source` from its start at `factor` times its rate; a factor of 1 passes samples through.
    ///
    /// # Errors
    /// [`SignalError::Resampling`], or a source that cannot be rewound.
    pub fn new(source: &'a mut dyn Source, factor: usize) -> Result<Self, SignalError> {
        let mut oversampled = Self {
            source,
            factor: factor.max(1),
            resampler: None,
            input: vec![Complex64::ZERO; BLOCK],
            channels_in: [Vec::new(), Vec::new()],
            channels_out: [Vec::new(), Vec::new()],
            ready: 0..0,
            skip: 0,
            taken: 0,
            delivered: 0,
            ended: false,
        };
        oversampled.rewind()?;
        Ok(oversampled)
    }

    fn refill(&mut self) -> Result<(), SignalError> {
        let mut count = 0;
        while count < BLOCK && !self.ended {
            let got = self.source.read(&mut self.input[count..])?;
            self.ended |= got == 0;
            count += got;
        }
        self.taken += count as u64;
        for (index, sample) in self.input[..count].iter().enumerate() {
            self.channels_in[0][index] = sample.re;
            self.channels_in[1][index] = sample.im;
        }
        let Some(resampler) = &mut self.resampler else {
            for (channel, from) in self.channels_out.iter_mut().zip(&self.channels_in) {
                channel[..count].copy_from_slice(&from[..count]);
            }
            self.ready = 0..count;
            return Ok(());
        };
        let failed = |error: &dyn std::fmt::Display| SignalError::Resampling(error.to_string());
        let input = SequentialSliceOfVecs::new(&self.channels_in[..], 2, BLOCK)
            .map_err(|error| failed(&error))?;
        let frames = BLOCK * self.factor;
        let mut output = SequentialSliceOfVecs::new_mut(&mut self.channels_out[..], 2, frames)
            .map_err(|error| failed(&error))?;
        let indexing = Indexing::new().partial_len(count);
        let (_, made) = resampler
            .process_into_buffer(&input, &mut output, Some(&indexing))
            .map_err(|error| failed(&error))?;
        let skipped = self.skip.min(made);
        self.skip -= skipped;
        self.ready = skipped..made;
        Ok(())
    }
}

impl Source for Oversampled<'_> {
    fn rate_hz(&self) -> f64 {
        self.source.rate_hz() * self.factor as f64
    }

    fn len(&self) -> Option<u64> {
        self.source
            .len()
            .map(|samples| samples.saturating_mul(self.factor as u64))
    }

    fn read(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError> {
        let mut count = 0;
        while count < block.len() {
            if self.ended && self.delivered == self.taken * self.factor as u64 {
                break;
            }
            if self.ready.is_empty() {
                self.refill()?;
                continue;
            }
            let mut available = self.ready.len().min(block.len() - count);
            if self.ended {
                let left = self.taken * self.factor as u64 - self.delivered;
                available = available.min(left as usize);
            }
            for (target, index) in block[count..count + available]
                .iter_mut()
                .zip(self.ready.clone())
            {
                *target = Complex64::new(self.channels_out[0][index], self.channels_out[1][index]);
            }
            self.ready.start += available;
            self.delivered += available as u64;
            count += available;
        }
        Ok(count)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        self.source.rewind()?;
        self.channels_in = [vec![0.0; BLOCK], vec![0.0; BLOCK]];
        self.channels_out = [
            vec![0.0; BLOCK * self.factor],
            vec![0.0; BLOCK * self.factor],
        ];
        self.resampler = (self.factor > 1)
            .then(|| {
                Fft::new_custom(
                    1,
                    self.factor,
                    BLOCK,
                    1,
                    2,
                    WindowFunction::BlackmanHarris2,
                    FixedSync::Both,
                )
            })
            .transpose()
            .map_err(|error| SignalError::Resampling(error.to_string()))?;
        self.skip = self.resampler.as_ref().map_or(0, Resampler::output_delay);
        (self.ready, self.taken, self.delivered, self.ended) = (0..0, 0, 0, false);
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::super::Samples;
    use super::*;

    #[test]
    fn interpolates_tones_in_time() {
        for factor in [1usize, 2, 5, 16] {
            // Four tones up to 0.4 of the rate, three blocks and a bit long.
            let value = |n: f64| -> Complex64 {
                [0.01, -0.13, 0.27, 0.4]
                    .iter()
                    .map(|f| Complex64::cis(std::f64::consts::TAU * f * n + f * 10.0))
                    .sum()
            };
            let samples = (0..3500).map(|n| value(f64::from(n))).collect();
            let mut source = Samples::new(1.0, samples);
            let mut oversampled = Oversampled::new(&mut source, factor).unwrap();
            assert_eq!(oversampled.len(), Some(3500 * factor as u64));
            let mut out = vec![Complex64::ZERO; 3500 * factor + 100];
            let mut got = 0;
            loop {
                let count = oversampled
                    .read(&mut out[got..(got + 777).min(3500 * factor + 100)])
                    .unwrap();
                got += count;
                if count == 0 {
                    break;
                }
            }
            assert_eq!(got, 3500 * factor);
            for (n, sample) in out
                .iter()
                .enumerate()
                .take(2500 * factor)
                .skip(1000 * factor)
            {
                let error = (sample - value(n as f64 / factor as f64)).norm();
                assert!(error < 1e-7, "factor {factor}, sample {n}: {error:e}");
            }
        }
    }
}
