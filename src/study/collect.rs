//! Output and wanted signal at the signal's own rate, for the errors of symbols.

use std::sync::Arc;

use num_complex::Complex64;

use super::error::StudyError;
use crate::math::kernel::{Kernel, Sampler};
use crate::metrics::{SymbolFigures, SymbolFormat, symbol_errors};
use crate::signal::Samples;

/// Samples kept of each of the two, at most: 64 MB.
const MOST: usize = 1 << 22;

/// Samples of the signal passed over at the start, which the interpolation does not see whole.
const LEAD: usize = 64;

/// Takes both streams down to the signal's rate, the output's delay taken off.
pub(super) struct Collected {
    format: SymbolFormat,
    samplers: [Sampler; 2],
    kept: [Vec<Complex64>; 2],
}

impl Collected {
    /// Of streams at `factor` times the signal's rate, the output `delay` of their samples late.
    pub(super) fn new(format: SymbolFormat, factor: usize, delay: f64) -> Self {
        let kernel = Arc::new(Kernel::interpolator(0.5 / factor as f64));
        let lead = (LEAD * factor) as f64 + delay.abs().ceil();
        let step = factor as f64;
        Self {
            format,
            samplers: [
                Sampler::new(kernel.clone(), lead, step),
                Sampler::new(kernel, lead + delay, step),
            ],
            kept: [Vec::new(), Vec::new()],
        }
    }

    pub(super) fn push(&mut self, wanted: &[Complex64], output: &[Complex64]) {
        for ((sampler, kept), samples) in self
            .samplers
            .iter_mut()
            .zip(&mut self.kept)
            .zip([wanted, output])
        {
            if kept.len() < MOST {
                sampler.push(samples, |value, _| kept.push(value));
            }
        }
    }

    /// Errors of the output's symbols against the wanted ones.
    pub(super) fn finish(self, rate_hz: f64) -> Result<SymbolFigures, StudyError> {
        let [mut wanted, mut output] = self.kept;
        let count = wanted.len().min(output.len()).min(MOST);
        wanted.truncate(count);
        output.truncate(count);
        let mut wanted = Samples::new(rate_hz, wanted);
        let mut output = Samples::new(rate_hz, output);
        Ok(symbol_errors(&self.format, &mut output, Some(&mut wanted))?)
    }
}
