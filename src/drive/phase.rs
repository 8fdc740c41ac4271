//! The phase path at work: a phasor of constant magnitude, filtered and limited again.

use num_complex::Complex64;

use crate::math::lowpass::Lowpass;

/// Magnitudes below this fraction of full scale have no phase of their own: the last one is kept.
const NO_PHASE: f64 = 1e-9;

/// Limiter, low-pass and limiter.
#[derive(Debug, Clone)]
pub(super) struct PhaseLimiter {
    filter: Option<Lowpass<Complex64>>,
    last: Complex64,
    settled: bool,
}

impl PhaseLimiter {
    /// With a Butterworth low-pass of `order` where `bandwidth_hz` is given, at `rate_hz`.
    pub(super) fn new(order: u32, bandwidth_hz: Option<f64>, rate_hz: f64) -> Self {
        Self {
            filter: bandwidth_hz.map(|bandwidth_hz| Lowpass::new(order, bandwidth_hz, rate_hz)),
            last: Complex64::ONE,
            settled: false,
        }
    }

    /// The phasor of magnitude one at the next instant.
    pub(super) fn push(&mut self, sample: Complex64) -> Complex64 {
        let mut phase = unit(sample).unwrap_or(self.last);
        if let Some(filter) = &mut self.filter {
            if !self.settled {
                filter.settle(phase);
                self.settled = true;
            }
            phase = unit(filter.push(phase)).unwrap_or(self.last);
        }
        self.last = phase;
        phase
    }
}

/// Without the care against overflow that full-scale samples do not need.
pub(super) fn magnitude(sample: Complex64) -> f64 {
    sample.norm_sqr().sqrt()
}

fn unit(sample: Complex64) -> Option<Complex64> {
    let magnitude = magnitude(sample);
    (magnitude > NO_PHASE).then(|| sample / magnitude)
}
