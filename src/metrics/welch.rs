//! The averaged spectrum of a stream: overlapping windowed blocks, their powers averaged.

use num_complex::Complex64;

use super::plan::{Hold, SpectrumPlan};
use super::spectrum::{Spectrum, SpectrumError};
use crate::math::Transform;

/// Takes a stream in pieces of any size and averages the power spectra of its blocks.
///
/// Density of bin `k`: `mean |sum w[n] x[n] exp(-j 2 pi k n / length)|^2 / (2 R rate sum w^2)`, W/Hz
/// (P. D. Welch, IEEE Trans. Audio Electroacoust., June 1967). No mean is removed. Samples after the
/// last whole block are left out. Memory is a few blocks, whatever the stream's length.
///
/// ```
/// use num_complex::Complex64;
/// use quietedge::math::Window;
/// use quietedge::metrics::{Hold, SpectrumMeter, SpectrumPlan};
///
/// let plan = SpectrumPlan::for_resolution(48e3, 150.0, Window::Hann, Hold::None)?;
/// let mut meter = SpectrumMeter::new(plan, 48e3, 50.0)?;
/// for _ in 0..10 {
///     meter.push(&[Complex64::new(10.0, 0.0); 480]);
/// }
/// let spectrum = meter.finish()?;
/// assert!((spectrum.power_w(-1e3, 1e3)? - 1.0).abs() < 1e-6); // 10^2 / (2 * 50) W
/// # Ok::<(), quietedge::metrics::SpectrumError>(())
/// ```
#[derive(Debug, Clone)]
pub struct SpectrumMeter {
    plan: SpectrumPlan,
    rate_hz: f64,
    load_ohm: f64,
    hop: usize,
    window: Vec<f64>,
    transform: Transform,
    work: Vec<Complex64>,
    /// Samples from the start of the next block on, fewer than one block.
    held: Vec<Complex64>,
    /// Samples still to be passed over before the next block starts.
    skip: usize,
    sum: Vec<f64>,
    peak: Option<Vec<f64>>,
    segments: u64,
    samples: u64,
}

impl SpectrumMeter {
    /// A meter of a stream at `rate_hz` whose samples are peak phasors (V) over `load_ohm`.
    ///
    /// # Errors
    /// A plan, rate or load that no spectrum can be taken with.
    pub fn new(plan: SpectrumPlan, rate_hz: f64, load_ohm: f64) -> Result<Self, SpectrumError> {
        plan.check(rate_hz)?;
        if !(load_ohm > 0.0 && load_ohm.is_finite()) {
            return Err(SpectrumError::Load {
                given_ohm: load_ohm,
            });
        }
        let length = plan.length;
        Ok(Self {
            hop: plan.hop(),
            window: plan.window.samples(length),
            transform: Transform::new(length),
            work: vec![Complex64::ZERO; length],
            held: Vec::with_capacity(length),
            skip: 0,
            sum: vec![0.0; length],
            peak: match plan.hold {
                Hold::None => None,
                Hold::Peak => Some(vec![0.0; length]),
            },
            segments: 0,
            samples: 0,
            plan,
            rate_hz,
            load_ohm,
        })
    }

    /// Takes the next samples of the stream.
    pub fn push(&mut self, mut samples: &[Complex64]) {
        self.samples += samples.len() as u64;
        let passed = self.skip.min(samples.len());
        self.skip -= passed;
        samples = &samples[passed..];

        // Blocks that start among the samples held back and end among the new ones.
        let mut start = 0;
        while start < self.held.len() {
            let early = self.held.len() - start;
            let late = self.plan.length - early;
            if samples.len() < late {
                self.held.drain(..start);
                self.held.extend_from_slice(samples);
                return;
            }
            windowed(
                &mut self.work[..early],
                &self.held[start..],
                &self.window[..early],
            );
            windowed(
                &mut self.work[early..],
                &samples[..late],
                &self.window[early..],
            );
            self.segment();
            start += self.hop;
        }
        // Blocks wholly among the new ones are windowed straight from where they are.
        let mut from = start - self.held.len();
        self.held.clear();
        while from + self.plan.length <= samples.len() {
            windowed(
                &mut self.work,
                &samples[from..from + self.plan.length],
                &self.window,
            );
            self.segment();
            from += self.hop;
        }
        match samples.get(from..) {
            Some(rest) => self.held.extend_from_slice(rest),
            None => self.skip = from - samples.len(),
        }
    }

    /// Transforms the block in `work` and adds its powers.
    fn segment(&mut self) {
        self.transform.forward(&mut self.work);
        match &mut self.peak {
            None => {
                for (sum, bin) in self.sum.iter_mut().zip(&self.work) {
                    *sum += bin.norm_sqr();
                }
            }
            Some(peak) => {
                for ((sum, peak), bin) in self.sum.iter_mut().zip(peak).zip(&self.work) {
                    let power = bin.norm_sqr();
                    *sum += power;
                    *peak = peak.max(power);
                }
            }
        }
        self.segments += 1;
    }

    /// The spectrum of all whole blocks so far.
    ///
    /// # Errors
    /// [`SpectrumError::TooShort`].
    pub fn finish(self) -> Result<Spectrum, SpectrumError> {
        if self.segments == 0 {
            return Err(SpectrumError::TooShort {
                given: self.samples,
                needed: self.plan.length,
            });
        }
        let length = self.plan.length;
        let plain: f64 = self.window.iter().sum();
        let squares: f64 = self.window.iter().map(|w| w * w).sum();
        let scale = 1.0 / (2.0 * self.load_ohm * self.rate_hz * squares);
        // Lowest offset first: bin i of the result is bin i - length / 2 of the transform, modulo its length.
        let ordered = |powers: &[f64], scale: f64| -> Vec<f64> {
            let (low, high) = powers.split_at(length - length / 2);
            high.iter().chain(low).map(|power| power * scale).collect()
        };
        Ok(Spectrum {
            bin_hz: self.rate_hz / length as f64,
            enbw_hz: self.rate_hz * squares / (plain * plain),
            mean_w_per_hz: ordered(&self.sum, scale / self.segments as f64),
            peak_w_per_hz: self.peak.as_deref().map(|peak| ordered(peak, scale)),
            segments: self.segments,
        })
    }
}

fn windowed(work: &mut [Complex64], samples: &[Complex64], window: &[f64]) {
    for ((out, sample), weight) in work.iter_mut().zip(samples).zip(window) {
        *out = sample * weight;
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::Window;
    use crate::metrics::{ChannelFilter, channel_power_w};
    use proptest::prelude::*;
    use std::f64::consts::TAU;

    fn plan(length: usize, window: Window, overlap: f64, hold: Hold) -> SpectrumPlan {
        SpectrumPlan {
            length,
            window,
            overlap,
            hold,
        }
    }

    fn measured(plan: SpectrumPlan, rate_hz: f64, samples: &[Complex64]) -> Spectrum {
        let meter = SpectrumMeter::new(plan, rate_hz, 50.0);
        let mut meter = meter.unwrap_or_else(|error| panic!("{error}"));
        meter.push(samples);
        meter.finish().unwrap_or_else(|error| panic!("{error}"))
    }

    #[test]
    fn the_flat_top_reads_a_tone_between_bins() {
        for part in [0.0, 0.2, 0.5, 0.7] {
            let cycles = (100.0 + part) / 1024.0;
            let tone: Vec<_> = (0..4096)
                .map(|n| 10.0 * Complex64::cis(TAU * cycles * n as f64))
                .collect();
            let spectrum = measured(plan(1024, Window::FlatTop, 0.75, Hold::Peak), 1024.0, &tone);
            let peak = spectrum.peak_w_per_hz.as_deref().unwrap_or(&[]);
            let highest = peak.iter().cloned().fold(0.0, f64::max) * spectrum.enbw_hz;
            // 10^2 / (2 * 50 ohm) = 1 W; the window's scalloping is 0.0039 dB.
            assert!(
                (10.0 * highest.log10()).abs() < 0.005,
                "{part}: {highest} W"
            );
            let at = peak.iter().position(|&p| p * spectrum.enbw_hz == highest);
            let offset_hz = spectrum.offset_hz(at.unwrap_or(0));
            assert!((offset_hz - 100.0 - part).abs() <= 0.5 + 1e-9);
        }
    }

    #[test]
    fn a_root_raised_cosine_passes_its_symbol_rate_of_white_noise() {
        let spectrum = Spectrum {
            bin_hz: 10.0,
            enbw_hz: 15.0,
            mean_w_per_hz: vec![2e-3; 8001],
            peak_w_per_hz: None,
            segments: 1,
        };
        for rolloff in [0.0, 0.2, 0.35, 1.0] {
            let filter = ChannelFilter::RootRaisedCosine {
                symbol_rate_hz: 18e3,
                rolloff,
            };
            let power_w = channel_power_w(&spectrum, 5e3, &filter);
            let power_w = power_w.unwrap_or_else(|error| panic!("{error}"));
            assert!((power_w / (2e-3 * 18e3) - 1.0).abs() < 1e-6, "{power_w}");
        }
    }

    proptest! {
        /// Without overlap and with the rectangular window the bins hold exactly the samples' power.
        #[test]
        fn powers_add_up_to_the_mean_square(
            values in prop::collection::vec((-1.0..1.0, -1.0..1.0), 16..200),
            odd in 0_usize..2,
        ) {
            let samples: Vec<_> = values.iter().map(|&(re, im)| Complex64::new(re, im)).collect();
            let length = 16 + odd;
            prop_assume!(samples.len() >= length);
            let spectrum = measured(plan(length, Window::Kaiser(0.0), 0.0, Hold::None), 1e3, &samples);
            let used = samples.len() / length * length;
            let mean_w = samples[..used].iter().map(|x| x.norm_sqr()).sum::<f64>() / used as f64 / 100.0;
            prop_assert!((spectrum.total_w() - mean_w).abs() < 1e-12);
        }

        /// How a stream is cut into pieces changes nothing.
        #[test]
        fn pieces_do_not_matter(
            cuts in prop::collection::vec(0_usize..90, 1..40),
            overlap in prop::sample::select(vec![0.0, 0.5, 0.66, 0.75, 0.9]),
        ) {
            let total: usize = cuts.iter().sum::<usize>() + 64;
            let samples: Vec<_> = (0..total)
                .map(|n| Complex64::cis(0.3 * n as f64 + 0.01 * (n * n % 101) as f64))
                .collect();
            let plan = plan(32, Window::BlackmanHarris, overlap, Hold::Peak);
            let whole = measured(plan, 1e3, &samples);
            let meter = SpectrumMeter::new(plan, 1e3, 50.0);
            let mut meter = meter.unwrap_or_else(|error| panic!("{error}"));
            let mut rest = &samples[..];
            for cut in cuts.iter().chain(&[64]) {
                let (piece, later) = rest.split_at(*cut);
                meter.push(piece);
                rest = later;
            }
            prop_assert_eq!(meter.finish(), Ok(whole));
        }
    }
}
