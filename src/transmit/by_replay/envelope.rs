//! From one value at each border of carrier cycles to the envelope at the instants of a track.
//!
//! A low-pass of finite length under Kaiser's window, read at any instant: flat to 0.0002 dB up to 0.4 of the track's rate,
//! 100 dB down from 0.6 of it on. Where the track is finer than the carrier's cycles, the same is of the carrier's
//! frequency. Very long kernels are shortened by averaging whole groups of cycles first.

use std::sync::Arc;

use num_complex::Complex64;

use crate::math::fir::{kaiser_beta, kaiser_half_taps};
use crate::math::kernel::{Kernel, Sampler};
use crate::math::window::{bessel_i0, sinc};

/// Rejection, and ripple of the same size, dB.
pub const ATTENUATION_DB: f64 = 100.0;

/// From the end of the flat part to the beginning of the rejected one, parts of the rate.
const TRANSITION: f64 = 0.2;

/// Cycles a sample past which groups of cycles are averaged first: the average's droop at 0.4 of the rate stays below
/// 0.001 dB then.
const MOST_CYCLES: f64 = 64.0;

/// The envelope at `rate_hz` of a carrier at `carrier_hz`.
#[derive(Debug, Clone)]
pub struct Envelope {
    sampler: Sampler,
    group: usize,
    sum: Complex64,
    summed: usize,
    averaged: Vec<Complex64>,
    latency: usize,
}

impl Envelope {
    pub fn new(carrier_hz: f64, rate_hz: f64) -> Self {
        let group = (carrier_hz / rate_hz / MOST_CYCLES).floor().max(1.0) as usize;
        let own_hz = carrier_hz / group as f64;
        let slower_hz = rate_hz.min(own_hz);
        // Cycles (or groups) in one sample of the slower rate.
        let ratio = own_hz / slower_hz;
        let half_taps = kaiser_half_taps(ATTENUATION_DB, TRANSITION) as f64 + 1.0;
        let half = half_taps * ratio;
        let beta = kaiser_beta(ATTENUATION_DB);
        let floor = bessel_i0(beta);
        let kernel = Kernel::new(half.ceil() as usize, (0.6 / ratio).min(0.5), |t| {
            let part = t / half;
            if part.abs() >= 1.0 {
                return 0.0;
            }
            let taper = bessel_i0(beta * (1.0 - part * part).sqrt()) / floor;
            sinc(t / ratio) / ratio * taper
        });
        // The middle of group k lies (g - 1) / 2 cycles after the border that it begins with.
        let first = -0.5 * (group - 1) as f64 / group as f64;
        let step = own_hz / rate_hz;
        Self {
            sampler: Sampler::new(Arc::new(kernel), first, step),
            group,
            sum: Complex64::ZERO,
            summed: 0,
            averaged: Vec::new(),
            latency: (half / step).ceil() as usize + 2,
        }
    }

    /// Instants by which the envelope lags behind the cycles.
    pub fn latency(&self) -> usize {
        self.latency
    }

    /// Takes the values of further cycles; the envelope at every instant that they complete is appended.
    pub fn push(&mut self, cycles: impl Iterator<Item = Complex64>, envelope: &mut Vec<Complex64>) {
        self.averaged.clear();
        for value in cycles {
            self.sum += value;
            self.summed += 1;
            if self.summed == self.group {
                self.averaged.push(self.sum / self.group as f64);
                (self.sum, self.summed) = (Complex64::ZERO, 0);
            }
        }
        self.sampler
            .push(&self.averaged, |value, _| envelope.push(value));
    }
}

#[cfg(test)]
mod tests {
    use std::f64::consts::TAU;

    use super::*;

    /// What tones become, over ratios of the two rates.
    #[test]
    fn the_band_is_flat_and_what_lies_above_is_rejected() {
        for ratio in [0.7, 3.68, 51.7, 700.3] {
            let (carrier_hz, rate_hz) = (ratio, 1.0);
            let slower = f64::min(carrier_hz, rate_hz);
            let cycles = (400.0 * ratio.max(1.0)) as usize;
            // 1.45 of the slower rate folds where it is finer than the cycles: only rejection of images is asked there.
            for (tone, passes) in [(0.0, true), (0.23, true), (-0.4, true), (0.6, false)] {
                let hz = tone * slower;
                if !passes && ratio < 1.0 {
                    continue;
                }
                let mut envelope = Vec::new();
                Envelope::new(carrier_hz, rate_hz).push(
                    (0..cycles).map(|n| Complex64::cis(TAU * hz * n as f64 / carrier_hz)),
                    &mut envelope,
                );
                let edge = (40.0 / slower) as usize;
                assert!(envelope.len() > 3 * edge);
                for (m, value) in envelope.iter().enumerate().skip(edge) {
                    let wanted = if passes {
                        Complex64::cis(TAU * hz * m as f64)
                    } else {
                        Complex64::ZERO
                    };
                    // 100 dB, and the group's average where there is one: 2e-5 of droop.
                    let allowed = if ratio > 64.0 { 1.2e-4 } else { 2e-5 };
                    let miss = (value - wanted).norm();
                    assert!(miss < allowed, "{ratio} {tone} {m}: {miss:.1e}");
                }
            }
        }
    }
}
