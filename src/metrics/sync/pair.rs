//! A capture and its reference, sample by sample on the capture's grid.

use std::sync::Arc;

use num_complex::Complex64;

use super::{Grid, SyncError, skip};
use crate::math::kernel::{Kernel, Rotation, Sampler};
use crate::signal::{SignalError, Source};

/// Samples a block.
pub(super) const BLOCK: usize = 1 << 14;

/// A reference that may repeat itself, with the interpolator that reads it.
pub struct Reference<'a> {
    source: &'a mut dyn Source,
    samples: u64,
    looped: bool,
    kernel: Arc<Kernel>,
    /// Index of the sample that `source` gives next; past `samples` where it is looped.
    next: i64,
    block: Vec<Complex64>,
}

impl<'a> Reference<'a> {
    /// `ratio` is the reference's rate over the capture's.
    pub(super) fn new(source: &'a mut dyn Source, samples: u64, looped: bool, ratio: f64) -> Self {
        // A reference sampled faster than the capture is kept below half the capture's rate.
        let kernel = Arc::new(Kernel::interpolator(0.5 * (1.0 / ratio).min(1.0)));
        Self {
            source,
            samples,
            looped,
            kernel,
            next: i64::MAX,
            block: vec![Complex64::ZERO; BLOCK],
        }
    }

    /// The reference again for [`PairReader`]s after [`super::synchronize`].
    pub fn again(source: &'a mut dyn Source, samples: u64, looped: bool, capture_hz: f64) -> Self {
        let ratio = source.rate_hz() / capture_hz;
        Self::new(source, samples, looped, ratio)
    }

    /// Samples of one period, or of all.
    pub fn samples(&self) -> u64 {
        self.samples
    }

    /// Samples to each side that a value between samples is made of.
    pub(super) fn reach(&self) -> usize {
        self.kernel.half()
    }

    /// True where it repeats itself.
    pub fn looped(&self) -> bool {
        self.looped
    }

    /// Samples a second, Hz.
    pub fn rate_hz(&self) -> f64 {
        self.source.rate_hz()
    }

    /// A reader at `start + k step`; a looped reference is unrolled so that nothing before its start is asked for.
    pub(super) fn sampler(&mut self, start: f64, step: f64) -> Result<Sampler, SignalError> {
        self.source.rewind()?;
        self.next = 0;
        let half = self.kernel.half() as i64;
        let mut start = start;
        if self.looped {
            let period = self.samples as f64;
            let needed = start.floor() - half as f64;
            start -= (needed / period).floor() * period;
        }
        let from = (start.floor() as i64 - half + 1).max(0);
        let from = if self.looped {
            from
        } else {
            from.min(self.samples as i64)
        };
        let inside = if self.looped {
            from % self.samples as i64
        } else {
            from
        };
        skip(self.source, inside as u64)?;
        self.next = from;
        if from == 0 {
            return Ok(Sampler::new(self.kernel.clone(), start, step));
        }
        Ok(Sampler::from_index(self.kernel.clone(), start, step, from))
    }

    /// The next stretch of the reference; zeros past the end of one that was sent once.
    pub(super) fn more(&mut self) -> Result<&[Complex64], SignalError> {
        let count = self.source.read(&mut self.block)?;
        if count > 0 {
            self.next += count as i64;
            return Ok(&self.block[..count]);
        }
        if self.looped {
            self.source.rewind()?;
            let count = self.source.read(&mut self.block)?;
            self.next += count as i64;
            return Ok(&self.block[..count]);
        }
        self.block.fill(Complex64::ZERO);
        self.next += BLOCK as i64;
        Ok(&self.block)
    }
}

/// One block of both streams.
#[derive(Debug, Clone, Default)]
pub(super) struct PairBlock {
    /// The reference at the capture's instants.
    pub(super) reference: Vec<Complex64>,
    /// Its slope, a sample of the reference.
    pub(super) slope: Vec<Complex64>,
    /// The capture, its frequency taken off.
    pub(super) capture: Vec<Complex64>,
    pub(super) first: u64,
}

/// Reads samples `from..to` of a capture with the reference on its grid.
pub struct PairReader<'a, 'b> {
    capture: &'a mut dyn Source,
    reference: &'a mut Reference<'b>,
    sampler: Sampler,
    grid: Grid,
    next: u64,
    to: u64,
    ready: Vec<(Complex64, Complex64)>,
}

impl<'a, 'b> PairReader<'a, 'b> {
    /// Goes to sample `from` of both.
    pub(super) fn new(
        capture: &'a mut dyn Source,
        reference: &'a mut Reference<'b>,
        grid: Grid,
        (from, to): (u64, u64),
    ) -> Result<Self, SyncError> {
        capture.rewind()?;
        skip(capture, from)?;
        let sampler = reference.sampler(grid.at(from as f64), grid.step)?;
        Ok(Self {
            capture,
            reference,
            sampler,
            grid,
            next: from,
            to,
            ready: Vec::new(),
        })
    }

    /// Everything that `sync` compared.
    ///
    /// # Errors
    /// A stream that cannot be read.
    pub fn of(
        capture: &'a mut dyn Source,
        reference: &'a mut Reference<'b>,
        sync: &super::Sync,
    ) -> Result<Self, SyncError> {
        Self::new(capture, reference, sync.grid, (sync.from, sync.to))
    }

    /// The next samples of the reference on the capture's grid and of the capture without its frequency
    /// offset, equally many; none at the end.
    ///
    /// # Errors
    /// A stream that cannot be read.
    pub fn read(
        &mut self,
        reference: &mut Vec<Complex64>,
        capture: &mut Vec<Complex64>,
    ) -> Result<usize, SyncError> {
        let mut block = PairBlock::default();
        let count = self.next_block(&mut block)?;
        *reference = block.reference;
        *capture = block.capture;
        Ok(count)
    }

    pub(super) fn next_block(&mut self, block: &mut PairBlock) -> Result<usize, SyncError> {
        let wanted = (self.to - self.next).min(BLOCK as u64) as usize;
        block.capture.resize(wanted, Complex64::ZERO);
        let mut count = 0;
        while count < wanted {
            let got = self.capture.read(&mut block.capture[count..])?;
            if got == 0 {
                break;
            }
            count += got;
        }
        block.capture.truncate(count);
        while self.ready.len() < count {
            let samples = self.reference.more()?;
            let ready = &mut self.ready;
            self.sampler
                .push(samples, |value, slope| ready.push((value, slope)));
        }
        block.reference.clear();
        block.slope.clear();
        for (value, slope) in self.ready.drain(..count) {
            block.reference.push(value);
            block.slope.push(slope);
        }
        Rotation {
            cycles: self.grid.cycles,
            change: self.grid.change,
        }
        .turn(self.next as f64 - self.grid.centre, &mut block.capture);
        block.first = self.next;
        self.next += count as u64;
        Ok(count)
    }
}
