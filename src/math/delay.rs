//! A delay line of any length, whole and fractional samples.

use std::f64::consts::PI;

use num_complex::Complex64;

/// Taps of the interpolator. With the window below, signals up to 0.33 of the sample rate are delayed with
/// an error below -120 dB (tested); oversampled signals sit far lower.
const TAPS: usize = 48;

/// Shape of the Kaiser window: side lobes near -140 dB.
const BETA: f64 = 14.0;

/// Samples by which every [`Delay`] lags beyond the delay asked for: half the interpolator.
pub const LATENCY: usize = TAPS / 2;

/// Delays a stream by a constant number of samples, plus [`LATENCY`].
///
/// A sinc interpolator under a Kaiser window (J. F. Kaiser, R. W. Schafer, "On the use of the I0-sinh
/// window for spectrum analysis", IEEE Trans. Acoust. Speech Signal Process., 1980). Whole delays copy.
#[derive(Debug, Clone)]
pub struct Delay {
    /// Newest sample last; twice as long as needed, so that it is moved rarely.
    history: Vec<Complex64>,
    end: usize,
    whole: usize,
    /// Oldest sample first; absent for a whole delay.
    taps: Option<[f64; TAPS]>,
}

impl Delay {
    /// A delay by `samples`, 0 or more.
    pub fn new(samples: f64) -> Self {
        let whole = samples.floor();
        let fraction = samples - whole;
        // Tap index holds the sample of age whole + TAPS - 1 - index; whole + LATENCY + fraction is wanted.
        let taps = (fraction > 1e-12).then(|| {
            let mut taps = [0.0; TAPS];
            for (index, tap) in taps.iter_mut().enumerate() {
                let distance = (TAPS as f64 / 2.0 - 1.0) - index as f64 - fraction;
                *tap = sinc(distance) * kaiser(distance / (TAPS as f64 / 2.0));
            }
            let sum: f64 = taps.iter().sum();
            taps.map(|tap| tap / sum)
        });
        let whole = whole as usize;
        let needed = whole + LATENCY + TAPS;
        Self {
            history: vec![Complex64::ZERO; 2 * needed + 4096],
            end: needed,
            whole,
            taps,
        }
    }

    /// Takes one sample and gives the one that entered `samples + LATENCY` ago; zero before the start.
    pub fn push(&mut self, sample: Complex64) -> Complex64 {
        if self.end == self.history.len() {
            let keep = self.whole + LATENCY + TAPS;
            self.history.copy_within(self.end - keep.., 0);
            self.end = keep;
        }
        self.history[self.end] = sample;
        self.end += 1;
        let newest = self.end - 1;
        match &self.taps {
            None => self.history[newest - LATENCY - self.whole],
            Some(taps) => {
                let last = newest - self.whole;
                let window = &self.history[last + 1 - TAPS..=last];
                let mut sum = Complex64::ZERO;
                for (tap, sample) in taps.iter().zip(window) {
                    sum += sample * tap;
                }
                sum
            }
        }
    }
}

fn sinc(x: f64) -> f64 {
    if x.abs() < 1e-12 {
        1.0
    } else {
        (PI * x).sin() / (PI * x)
    }
}

/// The Kaiser window at `x` of -1..1.
fn kaiser(x: f64) -> f64 {
    bessel_i0(BETA * (1.0 - x * x).max(0.0).sqrt()) / bessel_i0(BETA)
}

/// The modified Bessel function of order zero, by its power series.
fn bessel_i0(x: f64) -> f64 {
    let quarter = x * x / 4.0;
    let (mut sum, mut term, mut k) = (1.0, 1.0, 1.0);
    while term > 1e-17 * sum {
        term *= quarter / (k * k);
        sum += term;
        k += 1.0;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    fn worst_error(samples: f64, cycles_per_sample: f64) -> f64 {
        let tone = |n: f64| Complex64::cis(std::f64::consts::TAU * cycles_per_sample * n);
        let mut delay = Delay::new(samples);
        (0..20_000)
            .map(|n| (n, delay.push(tone(f64::from(n)))))
            .skip(200 + samples as usize)
            .map(|(n, out)| (out - tone(f64::from(n) - samples - LATENCY as f64)).norm())
            .fold(0.0, f64::max)
    }

    #[test]
    fn delays_tones_by_any_fraction() {
        for samples in [0.0, 3.0, 0.25, 0.5, 7.999, 1234.567] {
            for frequency in [0.0, 0.01, 0.2, 0.33] {
                let error = worst_error(samples, frequency);
                assert!(error < 1e-6, "{samples} samples at {frequency}: {error:e}");
            }
        }
    }
}
