//! A capture and its reference on one time grid: rate, frequency and delay found and taken off.
//!
//! ```text
//! acquire  one piece of the capture is looked for all over the reference -> delay, frequency
//! track    the piece grows until it is the whole capture                 -> delay, rate, frequency, drift
//! pair     both streams again, sample by sample on the capture's grid
//! ```

mod acquire;
mod error;
mod pair;
mod track;

use std::f64::consts::TAU;

use num_complex::Complex64;
use serde::Serialize;

use crate::signal::{SignalError, Source};

pub use error::SyncError;
pub use pair::{PairReader, Reference};

/// How a capture lies against its reference.
///
/// With `t` in seconds from the capture's first sample by its stated rate, and `m` the middle of what was
/// compared: `y(t) = gain x(u(t)) exp(j 2 pi (frequency_hz (t - m) + drift_hz_per_s (t - m)^2 / 2))` and a
/// rest, where `u(t) = (1 + rate_error) t - delay_s` is the reference's own time, of a reference that
/// repeats itself less whole periods.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Sync {
    /// The reference's start lies this long after the capture's first sample; negative before it. Of a
    /// repeating reference its first start, from 0 to below a period.
    pub delay_s: f64,
    /// How much faster the reference's clock runs than the capture's, as a part of one: what the two
    /// stated rates do not explain.
    pub rate_error: f64,
    /// Frequency of the capture above the reference at the middle of what was compared, Hz.
    pub frequency_hz: f64,
    /// Change of that frequency, Hz/s; 0 where it is not larger than its own uncertainty.
    pub drift_hz_per_s: f64,
    /// Least-squares complex gain.
    pub gain: Complex64,
    /// `|<x, y>| / (|x| |y|)` over all that was compared, 0 to 1.
    pub correlation: f64,
    /// First sample of the capture that was compared.
    pub from: u64,
    /// The sample after the last one that was compared.
    pub to: u64,
    /// Standard deviation of the frequency as its residuals show it, Hz.
    pub frequency_deviation_hz: f64,
    /// RMS of the phase that is left in the blocks compared, degrees: phase noise slower than a block.
    pub slow_phase_deg: f64,
    #[serde(skip)]
    pub(crate) grid: Grid,
}

impl Sync {
    /// The same with the frequency and phase that `blocks` still show: (middle in samples of the capture, sum of
    /// `y p*` over the block), `p` a better prediction of the capture than one gain of the reference.
    ///
    /// An output whose phase bends with its amplitude turns back and forth against its reference: the line through
    /// the phases of the one gain is off by that. Against the static map it is not.
    #[must_use]
    pub fn refined(&self, blocks: &[(f64, Complex64)], rate_hz: f64) -> Self {
        let (mut w, mut wt, mut wtt, mut wp, mut wtp) = (0.0, 0.0, 0.0, 0.0, 0.0);
        let mut last = 0.0;
        for &(middle, sum) in blocks {
            let weight = sum.norm();
            if !(weight > 0.0 && weight.is_finite()) {
                continue;
            }
            let here = sum.arg();
            last = here - TAU * ((here - last) / TAU).round();
            let t = middle - self.grid.centre;
            w += weight;
            wt += weight * t;
            wtt += weight * t * t;
            wp += weight * last;
            wtp += weight * t * last;
        }
        let across = wtt * w - wt * wt;
        if across.is_nan() || across <= 0.0 {
            return *self;
        }
        let slope = (wtp * w - wt * wp) / across;
        let phase = (wp - slope * wt) / w;
        let mut refined = *self;
        refined.grid.cycles += slope / TAU;
        refined.frequency_hz += slope / TAU * rate_hz;
        refined.gain *= Complex64::cis(phase);
        refined
    }
}

/// The numbers behind [`Sync`], in samples.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub(crate) struct Grid {
    /// Sample of the capture that the rest counts from.
    pub(crate) centre: f64,
    /// Where the reference stands there, in its own samples.
    pub(crate) position: f64,
    /// Samples of the reference for one of the capture.
    pub(crate) step: f64,
    /// Cycles a sample of the capture at the centre.
    pub(crate) cycles: f64,
    /// Change of that a sample.
    pub(crate) change: f64,
}

impl Grid {
    /// Position in the reference of sample `n` of the capture.
    pub(crate) fn at(&self, n: f64) -> f64 {
        self.position + (n - self.centre) * self.step
    }
}

/// Whether the sent signal was sent over and over.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Repeat {
    /// Where the reference is shorter than the capture it is taken to repeat.
    #[default]
    Auto,
    /// Its last sample leads into its first.
    Yes,
    /// It was sent once.
    No,
}

/// Finds how `capture` lies against `reference`. Both are read several times from their starts.
///
/// Signals up to 0.46 of the lower of the two rates count; the piece that is looked for first is 16,384
/// samples long, over which the two clocks may slip by a part of the reciprocal bandwidth: some tens of
/// millionths at full bandwidth.
///
/// # Errors
/// [`SyncError`].
pub fn synchronize(
    capture: &mut dyn Source,
    reference: &mut dyn Source,
    repeat: Repeat,
) -> Result<Sync, SyncError> {
    let capture_facts = acquire::survey(capture, "capture")?;
    let reference_facts = acquire::survey(reference, "reference")?;
    let ratio = reference.rate_hz() / capture.rate_hz();
    let looped = match repeat {
        Repeat::Yes => true,
        Repeat::No => false,
        Repeat::Auto => {
            (reference_facts.samples as f64) < capture_facts.samples as f64 * ratio * 0.999
        }
    };
    let mut reference = Reference::new(reference, reference_facts.samples, looped, ratio);
    let first = acquire::acquire(capture, &capture_facts, &mut reference)?;
    track::track(capture, &capture_facts, &mut reference, first)
}

/// Passes over `count` samples.
pub(crate) fn skip(source: &mut dyn Source, mut count: u64) -> Result<(), SignalError> {
    let mut block = vec![Complex64::ZERO; 1 << 14];
    while count > 0 {
        let most = (block.len() as u64).min(count) as usize;
        let got = source.read(&mut block[..most])?;
        if got == 0 {
            break;
        }
        count -= got as u64;
    }
    Ok(())
}
