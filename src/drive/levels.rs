//! Scheme `levels`: the supply is switched among a few rails, the width does the rest.
//!
//! A linear stage scales with its supply, so that `V(supply, width) = supply / full * V(full, width)` holds exactly.

use num_complex::Complex64;

use super::Track;
use super::phase::{PhaseLimiter, magnitude};
use super::rate::{RateReason, band};
use super::supply::{PhasePath, settling};
use super::width::Inverse;
use crate::map::Map;
use crate::math::delay::Delay;

/// The scheme as the study describes it.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct LevelsScheme {
    /// Rails as parts of the full supply, rising, the last one 1.
    pub rails: Vec<f64>,
    /// Part of a rail's output by which the wanted amplitude must fall below it before it is taken.
    pub hysteresis: f64,
    /// Time in which a change of the rail settles to 1 %, s.
    pub settling_s: f64,
    /// Power out over power in of what makes the rails.
    pub efficiency: f64,
    /// Power that it draws whatever it delivers, W.
    pub idle_w: f64,
    /// What makes the drive's phase.
    pub phase_path: PhasePath,
}

impl LevelsScheme {
    pub(super) fn settling(&self, rate_hz: f64) -> usize {
        let dead = self.phase_path.delay_s.max(3.0 * self.settling_s);
        settling(dead, &[self.phase_path.bandwidth_hz], rate_hz)
    }

    pub(super) fn rates(&self, signal_rate_hz: f64) -> Vec<(f64, RateReason)> {
        let settled = if self.settling_s > 0.0 {
            // Four instants to a time constant, no finer than is seen by the signal.
            band(Some(100f64.ln() / self.settling_s), signal_rate_hz)
        } else {
            16.0 * signal_rate_hz
        };
        vec![
            (settled, RateReason::Edges),
            (
                band(self.phase_path.bandwidth_hz, signal_rate_hz),
                RateReason::PhaseBandwidth,
            ),
        ]
    }
}

/// The scheme at work at one sample rate.
#[derive(Debug, Clone)]
pub(super) struct LevelsDrive<'a> {
    scheme: LevelsScheme,
    map: &'a Map,
    inverse: Inverse,
    level: f64,
    full_supply_v: f64,
    full_rad: f64,
    rail: usize,
    supply: Option<f64>,
    /// Part of a step that is left after an instant.
    left: f64,
    wanted: Delay,
    angle: Delay,
    phase: PhaseLimiter,
}

impl<'a> LevelsDrive<'a> {
    pub(super) fn new(scheme: &LevelsScheme, map: &'a Map, level: f64, rate_hz: f64) -> Self {
        let full = map.domain().1;
        Self {
            scheme: scheme.clone(),
            map,
            inverse: Inverse::new(map),
            level,
            full_supply_v: map.points().last().map_or(0.0, |point| point.supply_v),
            full_rad: map.phase_at_rad(full).unwrap_or(0.0),
            rail: scheme.rails.len() - 1,
            supply: None,
            left: if scheme.settling_s > 0.0 {
                (-100f64.ln() / (scheme.settling_s * rate_hz)).exp()
            } else {
                0.0
            },
            wanted: Delay::new(0.0),
            angle: Delay::new(scheme.phase_path.delay_s * rate_hz),
            phase: PhaseLimiter::new(
                scheme.phase_path.order,
                scheme.phase_path.bandwidth_hz,
                rate_hz,
            ),
        }
    }

    /// The rail for the wanted part `m` of full output: up at once, down past the hysteresis.
    fn decide(&mut self, m: f64) -> f64 {
        let rails = &self.scheme.rails;
        while self.rail + 1 < rails.len() && m > rails[self.rail] {
            self.rail += 1;
        }
        while self.rail > 0 && m < rails[self.rail - 1] * (1.0 - self.scheme.hysteresis) {
            self.rail -= 1;
        }
        rails[self.rail]
    }

    pub(super) fn push(&mut self, samples: &[Complex64], track: &mut Track) {
        for &sample in samples {
            let wanted = self.wanted.push(sample);
            let angle = self.angle.push(sample);
            let m = (self.level * magnitude(wanted)).min(1.0);
            let rail = self.decide(m);
            let supply = match self.supply {
                None => rail,
                Some(last) => rail + (last - rail) * self.left,
            };
            self.supply = Some(supply);
            let width = self.inverse.width(m / rail);
            let added = self.map.output_held_v(width).0.arg() - self.full_rad;
            let phase = self.phase.push(angle) * Complex64::from_polar(1.0, -added);
            track.wanted.push(wanted);
            track.asked.push(width);
            track.control.push(width);
            track.phase.push(phase);
            track.supply_v.push(supply * self.full_supply_v);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::map::{Control, MapPoint, Origin};

    fn track(hysteresis: f64, settling_s: f64, samples: &[Complex64]) -> Track {
        let points = (1..=200).map(|at| {
            let width = 0.5 * f64::from(at) / 200.0;
            MapPoint {
                control: width,
                output_v: Complex64::from_polar(
                    8.0 * (std::f64::consts::PI * width).sin(),
                    0.2 + width,
                ),
                supply_v: 6.0,
                supply_a: None,
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
                driver_w: None,
            }
        });
        let map = Map::new(Control::Width, Origin::Stage, 1e8, 50.0, points.collect()).unwrap();
        let scheme = LevelsScheme {
            rails: vec![0.25, 0.5, 1.0],
            hysteresis,
            settling_s,
            efficiency: 1.0,
            idle_w: 0.0,
            phase_path: PhasePath::default(),
        };
        let mut track = Track::default();
        LevelsDrive::new(&scheme, &map, 1.0, 1e6).push(samples, &mut track);
        track
    }

    #[test]
    fn rails_are_used_as_often_as_the_amplitude_lies_below_them() {
        // A ramp of the magnitude: a quarter of the time each below 0.25 and 0.25 to 0.5, half above.
        let samples: Vec<_> = (0..20_000)
            .map(|n| Complex64::new(f64::from(n) / 20_000.0, 0.0))
            .collect();
        let track = track(0.0, 0.0, &samples);
        for (rail_v, share) in [(1.5, 0.25), (3.0, 0.25), (6.0, 0.5)] {
            let count = track.supply_v.iter().filter(|&&v| v == rail_v).count();
            // The interpolator's delay moves the borders by some samples of 20000.
            assert!((count as f64 / 20_000.0 - share).abs() < 0.004, "{rail_v}");
        }
    }

    #[test]
    fn hysteresis_spares_changes() {
        let samples: Vec<_> = (0..5000)
            .map(|n| Complex64::new(0.5 + 0.03 * (0.05 * f64::from(n)).sin(), 0.0))
            .collect();
        let changes = |track: &Track| {
            let pairs = track.supply_v[500..].windows(2);
            pairs.filter(|pair| pair[0] != pair[1]).count()
        };
        assert!(changes(&track(0.0, 0.0, &samples)) > 50);
        assert_eq!(changes(&track(0.1, 0.0, &samples)), 0);
    }

    #[test]
    fn a_change_settles_to_one_percent_in_the_stated_time() {
        let mut samples = vec![Complex64::new(0.9, 0.0); 500];
        samples.resize(1000, Complex64::new(0.1, 0.0));
        let track = track(0.0, 20e-6, &samples);
        let start = track.supply_v.iter().skip(400).position(|&v| v < 5.9);
        let start = start.unwrap() + 400 - 1;
        let left = |at: usize| (track.supply_v[at] - 1.5) / 4.5;
        // The step passes the middle rail for some samples of the interpolated edge.
        assert!(left(start + 20) < 0.05 && left(start + 30) < 0.01);
        assert!(left(start + 5) > 0.2);
    }
}
