//! How large a signal is: RMS, peak and their ratio.

use num_complex::Complex64;
use serde::Serialize;

use super::{SignalError, Source};
use crate::units;

/// Magnitudes over a whole signal, full scale 1.0.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Levels {
    /// Samples counted.
    pub samples: u64,
    /// Root of the mean squared magnitude.
    pub rms: f64,
    /// Largest magnitude.
    pub peak: f64,
    /// Peak-to-average power ratio of the complex envelope's samples, dB:
    /// `10 log10(peak^2 / rms^2)`. Peaks between samples are not counted.
    pub papr_db: f64,
}

/// Adds up magnitudes.
#[derive(Debug, Default)]
struct Sum {
    samples: u64,
    energy: f64,
    peak_squared: f64,
}

impl Sum {
    fn add(&mut self, block: &[Complex64]) {
        self.samples += block.len() as u64;
        // Block sums first: the rounding error grows with the number of blocks, not of samples.
        let (mut energy, mut peak_squared) = (0.0, self.peak_squared);
        for sample in block {
            let squared = sample.norm_sqr();
            energy += squared;
            if squared > peak_squared {
                peak_squared = squared;
            }
        }
        self.energy += energy;
        self.peak_squared = peak_squared;
    }

    fn levels(&self) -> Levels {
        let mean = self.energy / self.samples.max(1) as f64;
        Levels {
            samples: self.samples,
            rms: mean.sqrt(),
            peak: self.peak_squared.sqrt(),
            papr_db: units::db(self.peak_squared / mean),
        }
    }
}

impl Levels {
    /// Of samples in memory.
    pub fn of(samples: &[Complex64]) -> Self {
        let mut sum = Sum::default();
        for block in samples.chunks(4096) {
            sum.add(block);
        }
        sum.levels()
    }

    /// Of everything that `source` still holds, read block by block.
    ///
    /// # Errors
    /// As [`Source::read`].
    pub fn of_source(source: &mut dyn Source) -> Result<Self, SignalError> {
        let mut sum = Sum::default();
        let mut block = vec![Complex64::ZERO; 1 << 14];
        loop {
            let count = source.read(&mut block)?;
            if count == 0 {
                return Ok(sum.levels());
            }
            for part in block[..count].chunks(4096) {
                sum.add(part);
            }
        }
    }
}
