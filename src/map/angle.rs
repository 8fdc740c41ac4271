//! Maps of two joined stages over the angle between them.

use std::f64::consts::FRAC_PI_2;

use super::sweep::point;
use super::{Control, Failure, Map, Origin, SweepError};
use crate::orbit::Joined;

/// Which angles to solve: the first branch ahead by the angle, the second behind by as much.
#[derive(Debug, Clone, PartialEq)]
pub struct AngleSweep {
    /// Angles, rad, strictly increasing.
    pub angles_rad: Vec<f64>,
    /// Supply, V.
    pub supply_v: f64,
    /// Width, as a part of the period.
    pub duty: f64,
}

impl AngleSweep {
    /// `points` evenly spaced angles from `from_rad` to `to_rad` on `joined`, at its stage's supply and width.
    ///
    /// # Errors
    /// [`SweepError::Range`].
    pub fn even(
        joined: &Joined,
        from_rad: f64,
        to_rad: f64,
        points: usize,
    ) -> Result<Self, SweepError> {
        let within = from_rad >= -2.0 * FRAC_PI_2 && to_rad <= 2.0 * FRAC_PI_2;
        if !(from_rad < to_rad && within) || points < 2 {
            return Err(SweepError::Range {
                control: Control::Angle.name(),
                from: from_rad,
                to: to_rad,
                points,
                allowed: "half a turn to each side (in radians: -3.1416 to 3.1416)",
            });
        }
        let step = (to_rad - from_rad) / (points - 1) as f64;
        let stage = joined.stage();
        Ok(Self {
            angles_rad: (0..points)
                .map(|index| match index + 1 == points {
                    true => to_rad,
                    false => from_rad + index as f64 * step,
                })
                .collect(),
            supply_v: stage.supply_v,
            duty: stage.driver.duty,
        })
    }

    /// Every angle that two branches can be at, but for a common turn: a quarter turn to each side.
    ///
    /// # Errors
    /// [`SweepError::Range`].
    pub fn full(joined: &Joined, points: usize) -> Result<Self, SweepError> {
        Self::even(joined, -FRAC_PI_2, FRAC_PI_2, points)
    }

    /// Solves every angle. One without an orbit becomes a [`Failure`] of the map.
    ///
    /// # Errors
    /// [`SweepError`] where fewer than two angles have an orbit.
    pub fn solve(&self, joined: &Joined) -> Result<Map, SweepError> {
        let mut points = Vec::with_capacity(self.angles_rad.len());
        let mut failures = Vec::new();
        let mut first_cause = None;
        for &angle_rad in &self.angles_rad {
            match joined.orbit(self.supply_v, self.duty, angle_rad) {
                Ok(orbit) => points.push(point(angle_rad, self.supply_v, &orbit)),
                Err(cause) => {
                    failures.push(Failure {
                        control: angle_rad,
                        reason: cause.to_string(),
                    });
                    first_cause.get_or_insert((angle_rad, cause));
                }
            }
        }
        if let Some((value, cause)) = first_cause.filter(|_| points.len() < 2) {
            return Err(SweepError::Point {
                control: Control::Angle.name(),
                value,
                cause,
            });
        }
        let map = Map::new(
            Control::Angle,
            Origin::Stage,
            joined.stage().frequency_hz,
            joined.load_ohm(),
            points,
        )?;
        Ok(map.with_failures(failures))
    }
}
