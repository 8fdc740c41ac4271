//! From the instants of a track to the controls at the borders of carrier cycles.
//!
//! The track is read between its instants through a sinc of 24 taps under Kaiser's window (80 dB, right up to 0.39 of
//! the track's rate), at every border of a cycle, or, where many cycles fall into an instant, sixteen times an instant
//! and on the straight line between.

use std::collections::VecDeque;
use std::f64::consts::TAU;
use std::sync::Arc;

use num_complex::Complex64;

use crate::math::fir::kaiser_beta;
use crate::math::kernel::{Kernel, Sampler};
use crate::math::window::{bessel_i0, sinc};

/// Taps to each side.
const HALF: usize = 12;

/// Attenuation of the interpolator, dB.
const ATTENUATION_DB: f64 = 80.0;

/// Readings of the track to one of its instants.
const READINGS: f64 = 16.0;

/// Numbers at the border of a cycle.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Border {
    /// The control, and the supply where that moves beside it.
    pub control: [f64; 2],
    /// Drive phase, rad, without jumps of a turn.
    pub phase_rad: f64,
}

/// Reads one drive's controls cycle by cycle.
#[derive(Debug, Clone)]
pub struct Controls {
    controls: Sampler,
    phasors: Sampler,
    /// Cycles to a reading.
    cycles: usize,
    /// Readings that were taken and not yet used up.
    read: [VecDeque<Complex64>; 2],
    last: Option<Border>,
    latency: usize,
}

impl Controls {
    /// Of a track at `rate_hz` on a carrier at `carrier_hz`, the first border at the track's first instant.
    pub fn new(carrier_hz: f64, rate_hz: f64) -> Self {
        let ratio = carrier_hz / rate_hz;
        let cycles = (ratio / READINGS).floor().max(1.0) as usize;
        let beta = kaiser_beta(ATTENUATION_DB);
        let (floor, half) = (bessel_i0(beta), HALF as f64);
        let kernel = Arc::new(Kernel::new(HALF, 0.5, move |t| {
            let part = t / half;
            if part.abs() >= 1.0 {
                return 0.0;
            }
            sinc(t) * bessel_i0(beta * (1.0 - part * part).sqrt()) / floor
        }));
        let step = cycles as f64 / ratio;
        Self {
            controls: Sampler::new(kernel.clone(), 0.0, step),
            phasors: Sampler::new(kernel, 0.0, step),
            cycles,
            read: Default::default(),
            last: None,
            latency: HALF + step.ceil() as usize + 1,
        }
    }

    /// Instants by which cycles lag behind the track.
    pub fn latency(&self) -> usize {
        self.latency
    }

    /// Takes further instants; `each` gets the borders of every cycle that they complete.
    pub fn push(
        &mut self,
        controls: &[Complex64],
        phasors: &[Complex64],
        mut each: impl FnMut(Border, Border),
    ) {
        let [read_controls, read_phasors] = &mut self.read;
        self.controls
            .push(controls, |value, _| read_controls.push_back(value));
        self.phasors
            .push(phasors, |value, _| read_phasors.push_back(value));
        while let (Some(&control), Some(&phasor)) = (read_controls.front(), read_phasors.front()) {
            read_controls.pop_front();
            read_phasors.pop_front();
            let control = [control.re, control.im];
            let Some(last) = self.last else {
                self.last = Some(Border {
                    control,
                    phase_rad: angle(phasor, 0.0),
                });
                continue;
            };
            // The nearest turn: a phasor says no more.
            let turn = angle(phasor, last.phase_rad) - last.phase_rad;
            let turn = turn - TAU * (turn / TAU).round();
            let part = 1.0 / self.cycles as f64;
            let at = |cycle: usize| {
                let x = cycle as f64 * part;
                Border {
                    control: [0, 1].map(|i| last.control[i] + x * (control[i] - last.control[i])),
                    phase_rad: last.phase_rad + x * turn,
                }
            };
            let mut start = last;
            for cycle in 1..=self.cycles {
                let end = at(cycle);
                each(start, end);
                start = end;
            }
            self.last = Some(start);
        }
    }
}

/// The angle of a phasor, or `last` where it has none.
fn angle(phasor: Complex64, last: f64) -> f64 {
    if phasor.norm_sqr() > 1e-18 {
        phasor.arg()
    } else {
        last
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn controls_follow_the_track_between_its_instants() {
        let control = |t: f64| 3.0 + 2.0 * (0.5 * t).sin();
        let phase = |t: f64| 0.4 * t + 0.8 * (0.3 * t).cos();
        let instants: Vec<f64> = (0..600).map(f64::from).collect();
        let controls: Vec<_> = instants
            .iter()
            .map(|&t| Complex64::new(control(t), 1.0))
            .collect();
        let phasors: Vec<_> = instants.iter().map(|&t| Complex64::cis(phase(t))).collect();
        for ratio in [0.61, 3.68, 51.7] {
            let mut borders = Vec::new();
            let mut reader = Controls::new(ratio, 1.0);
            for (a, b) in controls.chunks(77).zip(phasors.chunks(77)) {
                reader.push(a, b, |start, end| borders.push((start, end)));
            }
            assert!(borders.len() as f64 > (600.0 - reader.latency() as f64) * ratio);
            let mut last: Option<Border> = None;
            for (n, (start, end)) in borders.iter().enumerate() {
                assert!(last.is_none_or(|last| last == *start));
                last = Some(*end);
                let t = n as f64 / ratio;
                if t < 40.0 {
                    continue;
                }
                // 80 dB of 2; sixteen straight lines to an instant leave (0.5 / 16)^2 / 8 of 2 more.
                let miss = (start.control[0] - control(t)).abs();
                assert!(miss < 5e-4, "{ratio} {n}: {miss:.1e}");
                assert!((start.control[1] - 1.0).abs() < 2e-4);
                let off = (start.phase_rad - phase(t)) / TAU;
                assert!((off - off.round()).abs() < 2e-4, "{ratio} {n}");
            }
        }
    }
}
