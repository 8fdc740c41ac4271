//! From the wanted magnitude to the angle of two joined stages.

use std::f64::consts::FRAC_PI_2;

use num_complex::Complex64;

use crate::map::Map;
use crate::orbit::Joint;

/// From the wanted magnitude to the angle.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum AngleLaw {
    /// The angle whose output has the wanted amplitude; both branches are turned by the phase that they add together.
    Inverse,
    /// The angle whose output has the wanted amplitude; the phase stays as the branches bend it.
    Amplitude,
    /// `acos(m)`: exact for stiff branches, uncorrected for all else.
    Cosine,
}

/// Two stages on one load.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct JoinedScheme {
    /// What joins them.
    pub joint: Joint,
    /// From the wanted magnitude to the angle.
    pub law: AngleLaw,
}

/// The stretch of an angle map that amplitudes are taken from: from a quarter turn towards 0, as far as the output
/// rises.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AngleReach {
    /// The angle of full output, rad: 0 where the output rises all the way.
    pub full_rad: f64,
    /// Full output, V.
    pub full_v: f64,
    /// The lowest output, that at a quarter turn, as a part of the full one.
    pub lowest: f64,
}

impl AngleReach {
    /// That of `map`.
    pub fn of(map: &Map) -> Self {
        let mut full_rad = FRAC_PI_2;
        let mut full_v = 0.0;
        let mut lowest_v = f64::INFINITY;
        for point in map.points().iter().rev() {
            let volt = point.output_v.norm();
            if point.control > FRAC_PI_2 + 1e-9 {
                continue;
            }
            if point.control < -1e-9 || volt <= full_v {
                break;
            }
            (full_rad, full_v) = (point.control.max(0.0), volt);
            lowest_v = lowest_v.min(volt);
        }
        Self {
            full_rad,
            full_v,
            lowest: lowest_v / full_v,
        }
    }
}

/// Steps of the table.
const STEPS: usize = 4096;

/// Angles and turns over equal steps of amplitude.
#[derive(Debug, Clone)]
pub(super) struct AngleTable {
    angle_rad: Vec<f64>,
    turn_rad: Vec<f64>,
}

impl AngleTable {
    /// By `law` on `map`, as the front end knows it.
    pub(super) fn new(map: &Map, law: AngleLaw) -> Self {
        let reach = AngleReach::of(map);
        let output = |angle_rad: f64| map.output_held_v(angle_rad).0;
        let full = output(reach.full_rad);
        let angle_rad: Vec<f64> = (0..=STEPS)
            .map(|step| {
                let part = step as f64 / STEPS as f64;
                if law == AngleLaw::Cosine {
                    return part.acos();
                }
                // Bisection: the output falls with the angle, and 60 halvings reach the last digit.
                let (mut low, mut high) = (reach.full_rad, FRAC_PI_2);
                for _ in 0..60 {
                    let middle = 0.5 * (low + high);
                    if output(middle).norm() > part * reach.full_v {
                        low = middle;
                    } else {
                        high = middle;
                    }
                }
                0.5 * (low + high)
            })
            .collect();
        let mut last = 0.0;
        let mut turn_rad: Vec<f64> = angle_rad
            .iter()
            .rev()
            .map(|&angle| {
                if law != AngleLaw::Inverse {
                    return 0.0;
                }
                // Without jumps of a turn, so that lines between steps stay short; without output the last one.
                let volt = output(angle);
                if volt.norm() > 1e-9 * reach.full_v {
                    let raw = (volt * full.conj()).arg();
                    last += Complex64::cis(raw - last).arg();
                }
                last
            })
            .collect();
        turn_rad.reverse();
        Self {
            angle_rad,
            turn_rad,
        }
    }

    /// Angle and turn for the part `m` of full output, rad; lines between steps, but for the cosine itself.
    pub(super) fn at(&self, m: f64, law: AngleLaw) -> (f64, f64) {
        let m = m.clamp(0.0, 1.0);
        if law == AngleLaw::Cosine {
            return (m.acos(), 0.0);
        }
        // Near full output the angle goes with the root of what is missing: steps there are lines of its square.
        let at = m * STEPS as f64;
        let step = (at as usize).min(STEPS - 1);
        let rest = at - step as f64;
        let (left, right) = (self.angle_rad[step], self.angle_rad[step + 1]);
        let end = self.angle_rad[STEPS];
        let square = |angle: f64| (angle - end) * (angle - end);
        let angle = end + (square(left) * (1.0 - rest) + square(right) * rest).sqrt();
        let turn = self.turn_rad[step] * (1.0 - rest) + self.turn_rad[step + 1] * rest;
        (angle, turn)
    }
}
