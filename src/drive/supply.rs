//! Scheme `supply`: the magnitude moves the supply, the phase moves the drive.
//!
//! ```text
//! x ---- delay ---- |.| ---- level, shaping ---- converter, filter, slew, ripple ---- supply
//!   \--- delay ---- x/|x| -- low-pass, limiter ----------------------------------- phase
//! ```

use num_complex::Complex64;

use super::Track;
use super::correct::{Corrected, Correction, Corrector};
use super::modulator::{Modulator, SupplyModulator};
use super::phase::{PhaseLimiter, magnitude};
use super::rate::{RateReason, band};
use super::sag::Sag;
use super::shaping::Shaping;
use crate::map::Map;
use crate::math::delay::{Delay, LATENCY};

/// The scheme as the study describes it.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct SupplyScheme {
    /// From the wanted magnitude to the supply's fraction.
    pub shaping: Shaping,
    /// What makes the supply.
    pub modulator: Modulator,
    /// What makes the drive's phase.
    pub phase_path: PhasePath,
}

/// The path of the drive's phase: a phasor of constant magnitude, filtered and limited again.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct PhasePath {
    /// Dead time, s.
    pub delay_s: f64,
    /// -3 dB bandwidth of the phasor's Butterworth low-pass around the carrier (half the band-pass), Hz.
    pub bandwidth_hz: Option<f64>,
    /// Order of that low-pass.
    pub order: u32,
}

impl Default for PhasePath {
    fn default() -> Self {
        Self {
            delay_s: 0.0,
            bandwidth_hz: None,
            order: 2,
        }
    }
}

/// The scheme at work at one sample rate.
#[derive(Debug, Clone)]
pub struct SupplyDrive {
    shaping: Shaping,
    level: f64,
    full_v: f64,
    wanted: Delay,
    magnitude: Delay,
    angle: Delay,
    modulator: SupplyModulator,
    /// Where the modulator has an output resistance.
    sag: Option<Sag>,
    phase: PhaseLimiter,
    correctors: Option<Correctors>,
}

/// The correction on both paths.
#[derive(Debug, Clone)]
struct Correctors {
    magnitude: Corrector,
    angle: Corrector,
}

impl SupplyDrive {
    /// The scheme at `rate_hz` on a stage of `full_v`, signal full scale at `level` of it.
    pub fn new(scheme: &SupplyScheme, level: f64, full_v: f64, rate_hz: f64) -> Self {
        Self {
            shaping: scheme.shaping,
            level,
            full_v,
            wanted: Delay::new(0.0),
            magnitude: Delay::new(scheme.modulator.delay_s * rate_hz),
            angle: Delay::new(scheme.phase_path.delay_s * rate_hz),
            modulator: SupplyModulator::new(&scheme.modulator, full_v, rate_hz),
            sag: None,
            phase: PhaseLimiter::new(
                scheme.phase_path.order,
                scheme.phase_path.bandwidth_hz,
                rate_hz,
            ),
            correctors: None,
        }
    }

    /// The same on the stage of `map`, whose current the modulator's output resistance carries.
    #[must_use]
    pub fn loaded(mut self, scheme: &SupplyScheme, map: &Map) -> Self {
        self.sag = Sag::new(scheme.modulator.output_ohm, map);
        self
    }

    /// The same with `correction` in front, at `factor` times the signal's rate: at least the correction's own
    /// rate, and a multiple of it.
    ///
    /// The correction works on its own clock and holds its output; both paths are held alike.
    #[must_use]
    pub fn corrected(mut self, correction: &Correction, factor: usize) -> Self {
        let corrector = Corrector::new(correction, factor);
        self.correctors = Some(Correctors {
            magnitude: corrector.clone(),
            angle: corrector,
        });
        self
    }

    /// The control that the scheme asks for, V, and the signal whose phase goes to the drive.
    fn ask(&mut self, for_magnitude: Complex64, for_angle: Complex64) -> (f64, Complex64) {
        let (level, full_v, shaping) = (self.level, self.full_v, self.shaping);
        let shaped = |sample| full_v * shaping.apply(level * magnitude(sample));
        let Some(correctors) = &mut self.correctors else {
            return (shaped(for_magnitude), for_angle);
        };
        let asked_v = match correctors.magnitude.push(for_magnitude, level) {
            Corrected::Direct { control, .. } => full_v * control,
            Corrected::Signal(sample) => shaped(sample),
        };
        let signal = match correctors.angle.push(for_angle, level) {
            Corrected::Direct { signal, .. } | Corrected::Signal(signal) => signal,
        };
        (asked_v, signal)
    }

    /// How many samples after the start the track still shows the start: interpolators filling, filters settling.
    pub fn settling(scheme: &SupplyScheme, rate_hz: f64) -> usize {
        settling(
            scheme.modulator.delay_s.max(scheme.phase_path.delay_s),
            &[
                scheme.modulator.slowest_hz(),
                scheme.phase_path.bandwidth_hz,
            ],
            rate_hz,
        )
    }

    /// Appends the controls for `samples` to `track`, all rows at the same instants ([`LATENCY`] late). A
    /// correction's own delay, its hold included, stays in the controls.
    pub fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let delayed = self.magnitude.push(sample);
            let angle = self.angle.push(sample);
            let (asked_v, signal) = self.ask(delayed, angle);
            track.wanted.push(wanted);
            track.asked.push(match self.correctors {
                None => self.full_v * self.shaping.apply(self.level * magnitude(wanted)),
                Some(_) => asked_v,
            });
            let open_v = self.modulator.push(asked_v);
            track.control.push(match &mut self.sag {
                Some(sag) => sag.push(open_v),
                None => open_v,
            });
            track.phase.push(self.phase.push(signal));
        }
    }
}

/// Instants after which dead time, interpolators and low-passes show nothing of the start.
pub(super) fn settling(dead_s: f64, bandwidths_hz: &[Option<f64>], rate_hz: f64) -> usize {
    let dead = dead_s * rate_hz;
    let slowest = bandwidths_hz
        .iter()
        .flatten()
        .fold(0.0, |slowest: f64, bandwidth_hz| {
            slowest.max(1.0 / bandwidth_hz)
        });
    // A Butterworth low-pass of order 8 rings below 1e-6 within about 12 periods of its bandwidth.
    2 * LATENCY + dead.ceil() as usize + (12.0 * slowest * rate_hz).ceil() as usize
}

impl SupplyScheme {
    /// The first supply, V, at which the modulator's output resistance and the stage of `map` have no single
    /// working point.
    pub fn falls_at_v(&self, map: &Map) -> Option<f64> {
        Sag::falls_at_v(self.modulator.output_ohm, map)
    }

    /// The sample rates that it asks for, and why.
    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        let modulator = &self.modulator;
        vec![
            (
                band(modulator.widest_hz(), signal_rate_hz),
                RateReason::ModulatorBandwidth,
            ),
            (
                band(self.phase_path.bandwidth_hz, signal_rate_hz),
                RateReason::PhaseBandwidth,
            ),
            (
                4.0 * modulator.converter.map_or(0.0, |c| c.rate_hz),
                RateReason::Converter,
            ),
            (
                4.0 * modulator.ripple.map_or(0.0, |r| r.frequency_hz),
                RateReason::Ripple,
            ),
        ]
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::drive::Shape;

    fn ideal() -> SupplyScheme {
        SupplyScheme {
            shaping: Shaping {
                shape: Shape::Corner,
                floor: 0.0,
            },
            modulator: Modulator::default(),
            phase_path: PhasePath::default(),
        }
    }

    #[test]
    fn an_ideal_track_is_the_signal_in_polar_form() {
        let mut drive = SupplyDrive::new(&ideal(), 0.8, 6.0, 1e6);
        let samples: Vec<_> = (0..500)
            .map(|n| Complex64::new((0.03 * f64::from(n)).sin(), 0.3))
            .collect();
        let mut track = Track::default();
        drive.push(&samples, &mut track);
        for n in LATENCY..500 {
            let output = track.control[n] / (0.8 * 6.0) * track.phase[n];
            assert!((output - samples[n - LATENCY]).norm() < 1e-12);
            assert_eq!(track.wanted[n], samples[n - LATENCY]);
            assert_eq!(track.asked[n], track.control[n]);
        }
    }

    #[test]
    fn a_correction_works_on_its_own_clock_and_is_held() {
        use crate::drive::{
            Between, Correction, Lookup, LookupSize, Polynomial, Spacing, Term, Word,
        };
        let size = LookupSize {
            depth: 2,
            address_bits: 20,
            amplitude_bits: 20,
            phase_bits: 8,
        };
        let words = [0, (1 << 20) - 1].map(|control| Word { control, phase: 64 });
        // A straight line that turns the phase by a quarter, and the same as a polynomial.
        let lookup = Lookup::new(size, Spacing::Magnitude, Between::Linear, 2, words.to_vec());
        let polynomial = Polynomial {
            terms: vec![Term {
                signal_lag: 0,
                envelope_lag: 0,
                power: 0,
            }],
            coefficients: vec![Complex64::I],
            lead: 0,
            rate: 2,
        };
        let corrections = [
            Correction::Table(lookup.unwrap()),
            Correction::Polynomial(polynomial),
        ];
        let samples: Vec<_> = (0..400)
            .map(|n| {
                Complex64::from_polar(0.6 + 0.3 * (0.05 * f64::from(n)).sin(), 0.02 * f64::from(n))
            })
            .collect();
        for correction in corrections {
            let mut drive = SupplyDrive::new(&ideal(), 0.8, 6.0, 1e6).corrected(&correction, 8);
            let mut track = Track::default();
            drive.push(&samples, &mut track);
            for n in LATENCY..400 {
                // Four instants to a sample of the correction.
                let held = samples[n / 4 * 4 - LATENCY];
                let output = track.control[n] / (0.8 * 6.0) * track.phase[n];
                assert!(
                    (output - held * Complex64::I).norm() < 1e-6,
                    "{n}: {output} {held}"
                );
                assert_eq!(track.wanted[n], samples[n - LATENCY]);
            }
        }
    }

    #[test]
    fn paths_are_delayed_apart() {
        let mut scheme = ideal();
        scheme.modulator.delay_s = 2.5e-6;
        scheme.phase_path.delay_s = 1e-6;
        let mut drive = SupplyDrive::new(&scheme, 1.0, 1.0, 1e6);
        let signal = |n: f64| Complex64::from_polar(0.5 + 0.3 * (0.1 * n).cos(), 0.05 * n);
        let samples: Vec<_> = (0..500).map(|n| signal(f64::from(n))).collect();
        let mut track = Track::default();
        drive.push(&samples, &mut track);
        for n in 100..500 {
            let at = (n - LATENCY) as f64;
            assert!((track.control[n] - signal(at - 2.5).norm()).abs() < 1e-6);
            assert!((track.phase[n] - signal(at - 1.0) / signal(at - 1.0).norm()).norm() < 1e-12);
        }
    }
}
