//! Test signals without data: tones, band-limited noise, a ramp.

use std::f64::consts::{PI, TAU};

use num_complex::Complex64;
use rand::{Rng, RngExt};
use rand_distr::StandardNormal;
use rustfft::FftPlanner;
use serde::Serialize;

use super::SignalError;
use super::recipe::{self, Ends};

/// How the tones stand to each other at the first sample.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Phases {
    /// All at zero: the highest peak there is.
    Equal,
    /// `pi (k - 1)^2 / n` for tone `k` of `n`: a low peak. D. J. Newman's polynomials as used by
    /// S. Boyd, "Multitone signals with low crest factor", IEEE Trans. Circuits Syst., Oct. 1986
    /// (recalled from memory).
    Newman,
    /// Drawn from the seed.
    Random,
}

/// Equally strong tones, equally spaced, centred on the carrier.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Tones {
    /// Samples a second, Hz.
    pub rate_hz: f64,
    /// Number of samples.
    pub samples: usize,
    /// Number of tones; 2 is the two-tone test. An odd number has one on the carrier itself.
    pub count: usize,
    /// Distance between neighbours, Hz.
    pub spacing_hz: f64,
    /// How they stand to each other.
    pub phases: Phases,
    /// What happens at the ends.
    pub ends: Ends,
}

impl Tones {
    /// Offset of tone `k` (from 0), Hz.
    pub fn offset_hz(&self, k: usize) -> f64 {
        (k as f64 - (self.count as f64 - 1.0) / 2.0) * self.spacing_hz
    }

    /// Checks the parameters; returns the number of samples.
    pub(super) fn check(&self) -> Result<usize, SignalError> {
        recipe::positive("sample rate", self.rate_hz)?;
        recipe::positive("tone spacing", self.spacing_hz)?;
        recipe::at_least("tones", self.count, 1)?;
        let half_band_hz = self.offset_hz(self.count - 1);
        if half_band_hz >= self.rate_hz / 2.0 {
            return Err(recipe::refuse(
                "tones",
                format!("{} over +/-{half_band_hz} Hz", self.count),
                format!("within half the sample rate, +/-{} Hz", self.rate_hz / 2.0),
            ));
        }
        let work = self.count.checked_mul(self.samples);
        if work.is_none_or(|work| work > 1 << 34) {
            return Err(recipe::refuse(
                "tones times samples",
                format!("{} times {}", self.count, self.samples),
                "at most 1.7e10",
            ));
        }
        if self.ends == Ends::Periodic {
            // Both the outermost tone and the spacing must close; then all of them do.
            for (what, hz) in [
                ("tone spacing", self.spacing_hz),
                ("outer tone", half_band_hz),
            ] {
                let turns = self.turns(hz);
                if (turns - turns.round()).abs() > 1e-6 || (hz > 0.0 && turns.round() < 1.0) {
                    return Err(recipe::refuse(
                        what,
                        format!("{hz} Hz, {turns} turns in {} samples", self.samples),
                        format!(
                            "whole turns for a periodic signal: multiples of {} Hz",
                            self.rate_hz / self.samples as f64
                        ),
                    ));
                }
            }
        }
        recipe::length(Some(self.samples))
    }

    fn turns(&self, hz: f64) -> f64 {
        hz * self.samples as f64 / self.rate_hz
    }

    /// The unscaled samples.
    pub(super) fn make(&self, random: &mut impl Rng) -> Result<Vec<Complex64>, SignalError> {
        let length = self.check()?;
        let mut out = vec![Complex64::ZERO; length];
        for k in 0..self.count {
            let start = match self.phases {
                Phases::Equal => 0.0,
                Phases::Newman => PI * (k as f64).powi(2) / self.count as f64,
                Phases::Random => TAU * random.random::<f64>(),
            };
            let hz = self.offset_hz(k);
            let exact = self.turns(hz).round() as i128;
            for (n, sample) in out.iter_mut().enumerate() {
                // Turns since the start, less the whole ones: exact for any length where periodic.
                let turn = match self.ends {
                    Ends::Periodic => {
                        (exact * n as i128).rem_euclid(length as i128) as f64 / length as f64
                    }
                    Ends::Open => (hz / self.rate_hz * n as f64).fract(),
                };
                *sample += Complex64::from_polar(1.0, TAU * turn + start);
            }
        }
        Ok(out)
    }
}

/// Complex Gaussian noise with a flat spectrum inside a band around the carrier and none outside.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Noise {
    /// Samples a second, Hz.
    pub rate_hz: f64,
    /// Number of samples.
    pub samples: usize,
    /// Width of the band, Hz, half of it on each side of the carrier.
    pub bandwidth_hz: f64,
    /// What happens at the ends.
    pub ends: Ends,
}

impl Noise {
    /// Checks the parameters; returns the number of samples.
    pub(super) fn check(&self) -> Result<usize, SignalError> {
        recipe::positive("sample rate", self.rate_hz)?;
        recipe::positive("bandwidth", self.bandwidth_hz)?;
        if self.bandwidth_hz > self.rate_hz {
            return Err(recipe::refuse(
                "bandwidth",
                format!("{} Hz", self.bandwidth_hz),
                format!("at most the sample rate, {} Hz", self.rate_hz),
            ));
        }
        let length = recipe::length(Some(self.samples))?;
        let lines = self.bandwidth_hz * length as f64 / self.rate_hz;
        if lines < 8.0 {
            return Err(recipe::refuse(
                "samples",
                self.samples,
                format!(
                    "at least {}, for eight periods of the bandwidth",
                    (8.0 * self.rate_hz / self.bandwidth_hz).ceil()
                ),
            ));
        }
        Ok(length)
    }

    /// The unscaled samples: independent Gaussian lines on the FFT's grid inside the band. An open
    /// signal is a piece, at most half as long, of such a period.
    pub(super) fn make(&self, random: &mut impl Rng) -> Result<Vec<Complex64>, SignalError> {
        let length = self.check()?;
        let size = match self.ends {
            Ends::Periodic => length,
            Ends::Open => (2 * length).next_power_of_two(),
        };
        // The slack keeps a line that is exactly on the band's edge.
        let highest = (self.bandwidth_hz / 2.0 * size as f64 / self.rate_hz * (1.0 + 1e-12)) as i64;
        let highest = highest.min((size as i64 - 1) / 2);
        let mut out = vec![Complex64::ZERO; size];
        for line in -highest..=highest {
            let re: f64 = random.sample(StandardNormal);
            let im: f64 = random.sample(StandardNormal);
            out[line.rem_euclid(size as i64) as usize] = Complex64::new(re, im);
        }
        FftPlanner::new().plan_fft_inverse(size).process(&mut out);
        out.truncate(length);
        Ok(out)
    }
}

/// A magnitude that rises linearly at zero phase; with periodic ends it falls again as it rose.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Ramp {
    /// Samples a second, Hz.
    pub rate_hz: f64,
    /// Number of samples.
    pub samples: usize,
    /// The lowest magnitude as a fraction of the highest, 0 to 1.
    pub from: f64,
    /// What happens at the ends.
    pub ends: Ends,
}

impl Ramp {
    /// Checks the parameters; returns the number of samples.
    pub(super) fn check(&self) -> Result<usize, SignalError> {
        recipe::positive("sample rate", self.rate_hz)?;
        recipe::within("start of the ramp", self.from, 0.0, 1.0)?;
        recipe::at_least("samples", self.samples, 2)?;
        recipe::length(Some(self.samples))
    }

    /// The unscaled samples.
    pub(super) fn make(&self) -> Result<Vec<Complex64>, SignalError> {
        let length = self.check()?;
        let top = match self.ends {
            Ends::Open => length - 1,
            Ends::Periodic => length / 2,
        };
        let step = (1.0 - self.from) / top as f64;
        Ok((0..length)
            .map(|n| {
                let height = match self.ends {
                    Ends::Open => n,
                    Ends::Periodic => n.min(length - n),
                };
                Complex64::from(self.from + step * height.min(top) as f64)
            })
            .collect())
    }
}
