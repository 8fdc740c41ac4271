//! Baseline `class_b`: an ideal linear class B stage of the same full output.
//!
//! ```text
//! efficiency = pi/4 * r,   r = output amplitude / full amplitude
//! supply current = (4/pi) * full power * r / supply
//! ```
//! H. L. Krauss, C. W. Bostian, F. H. Raab, "Solid State Radio Engineering", 1980 (recalled from memory); it
//! follows from the mean of half a sine, 1/pi of its peak.

use num_complex::Complex64;

use super::Track;
use super::phase::magnitude;
use crate::map::{Control, Map, MapError, MapPoint, Origin};
use crate::math::delay::{Delay, LATENCY};

/// Efficiency at full output.
pub const CLASS_B_PEAK_EFFICIENCY: f64 = std::f64::consts::FRAC_PI_4;

/// Points of a straight map over the drive.
pub(super) const STRAIGHT_POINTS: usize = 101;

/// The baseline has no settings.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, serde::Serialize)]
pub struct ClassBScheme;

impl ClassBScheme {
    /// Its map over the drive, of the same full output, load and supply as `top`, the point at full range.
    ///
    /// # Errors
    /// [`MapError`] where `top` is silent.
    pub fn map(
        frequency_hz: f64,
        load_ohm: f64,
        origin: Origin,
        top: &MapPoint,
    ) -> Result<Map, MapError> {
        let full_v = top.output_v.norm();
        let full_w = full_v * full_v / (2.0 * load_ohm);
        let point = |drive: f64| MapPoint {
            control: drive,
            output_v: Complex64::new(full_v * drive, 0.0),
            supply_v: top.supply_v,
            supply_a: Some(full_w * drive / CLASS_B_PEAK_EFFICIENCY / top.supply_v),
            efficiency: Some(CLASS_B_PEAK_EFFICIENCY * drive),
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
            driver_w: None,
        };
        let points = straight(point);
        Map::new(Control::Drive, origin, frequency_hz, load_ohm, points)
    }
}

/// Points over a drive from 0 to 1.
pub(super) fn straight(point: impl Fn(f64) -> MapPoint) -> Vec<MapPoint> {
    let last = (STRAIGHT_POINTS - 1) as f64;
    (0..STRAIGHT_POINTS)
        .map(|at| point(at as f64 / last))
        .collect()
}

/// The baseline at work: the signal itself, as late as every other scheme.
#[derive(Debug, Clone)]
pub(super) struct ClassBDrive {
    level: f64,
    wanted: Delay,
}

impl ClassBDrive {
    pub(super) fn new(level: f64) -> Self {
        Self {
            level,
            wanted: Delay::new(0.0),
        }
    }

    pub(super) fn settling() -> usize {
        2 * LATENCY
    }

    pub(super) fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let magnitude = magnitude(wanted);
            track.wanted.push(wanted);
            track.asked.push(self.level * magnitude);
            track.control.push(self.level * magnitude);
            track.phase.push(if magnitude > 0.0 {
                wanted / magnitude
            } else {
                Complex64::ONE
            });
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn efficiency_is_a_quarter_of_pi_times_the_mean_ratio_of_powers_and_amplitudes() {
        // Efficiency over a signal: (pi/4) <r^2> / <r>.
        let top = MapPoint {
            control: 6.0,
            output_v: Complex64::new(0.0, 10.0),
            supply_v: 6.0,
            supply_a: None,
            efficiency: None,
            switch_peak_v: None,
            switch_peak_a: None,
            switch_min_v: None,
            closing_v: None,
            driver_w: None,
        };
        let map = ClassBScheme::map(1e6, 50.0, Origin::Stage, &top).unwrap();
        let mut drive = ClassBDrive::new(0.8);
        let samples: Vec<_> = (0..400)
            .map(|n| Complex64::from_polar(0.5 + 0.5 * (0.1 * f64::from(n)).sin(), 0.3))
            .collect();
        let mut track = Track::default();
        drive.push(&samples, &mut track);
        let (mut out_w, mut drawn_w) = (0.0, 0.0);
        for n in LATENCY..400 {
            let output = map.output_held_v(track.control[n]).0 * track.phase[n];
            assert!((output - 8.0 * samples[n - LATENCY]).norm() < 1e-9);
            out_w += output.norm_sqr() / 100.0;
            drawn_w += 6.0 * map.supply_held_a(track.control[n]).unwrap();
        }
        let ratios: Vec<f64> = samples[..400 - LATENCY]
            .iter()
            .map(|sample| 0.8 * sample.norm())
            .collect();
        let (first, second) = ratios
            .iter()
            .fold((0.0, 0.0), |(a, b), r| (a + r, b + r * r));
        let law = CLASS_B_PEAK_EFFICIENCY * second / first;
        assert!((out_w / drawn_w / law - 1.0).abs() < 1e-9);
    }
}
