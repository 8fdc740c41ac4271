//! A stream of complex baseband samples that can be read again from its start.

use num_complex::Complex64;

use super::SignalError;

/// A stream of complex baseband samples at a constant rate.
///
/// Full scale is 1.0. Streams may be longer than memory: read block by block.
pub trait Source: Send {
    /// Samples a second, Hz. Positive and finite.
    fn rate_hz(&self) -> f64;

    /// Number of samples from start to end, where it is known before reading.
    fn len(&self) -> Option<u64>;

    /// True where the stream is known to hold no sample.
    fn is_empty(&self) -> bool {
        self.len() == Some(0)
    }

    /// Fills `block` from its front and returns how many samples were written; 0 only at the end.
    ///
    /// # Errors
    /// Truncated or malformed data, samples that are not finite, or an I/O failure, with the
    /// position of the sample.
    fn read(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError>;

    /// Goes back to the first sample.
    ///
    /// # Errors
    /// An I/O failure.
    fn rewind(&mut self) -> Result<(), SignalError>;
}

/// Samples held in memory, full scale 1.0.
#[derive(Debug, Clone)]
pub struct Samples {
    rate_hz: f64,
    samples: Vec<Complex64>,
    next: usize,
}

impl Samples {
    /// A source over `samples` at `rate_hz`.
    pub fn new(rate_hz: f64, samples: Vec<Complex64>) -> Self {
        Self {
            rate_hz,
            samples,
            next: 0,
        }
    }

    /// All samples, from the first.
    pub fn as_slice(&self) -> &[Complex64] {
        &self.samples
    }
}

impl Source for Samples {
    fn rate_hz(&self) -> f64 {
        self.rate_hz
    }

    fn len(&self) -> Option<u64> {
        Some(self.samples.len() as u64)
    }

    fn read(&mut self, block: &mut [Complex64]) -> Result<usize, SignalError> {
        let count = block.len().min(self.samples.len() - self.next);
        block[..count].copy_from_slice(&self.samples[self.next..self.next + count]);
        self.next += count;
        Ok(count)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        self.next = 0;
        Ok(())
    }
}
