//! Maps solved from a stage, point by point.

use super::{Control, Failure, Map, MapError, MapPoint, Origin};
use crate::orbit::{Drive, Network, Orbit, OrbitError, Tracker};

/// Which points of a map to solve: plain data, made before anything is solved.
#[derive(Debug, Clone, PartialEq)]
pub struct Sweep {
    /// What is moved.
    pub control: Control,
    /// Values of the control, strictly increasing.
    pub values: Vec<f64>,
    /// Supply while the width is moved, V.
    pub supply_v: f64,
    /// Closed fraction of the period while the supply is moved.
    pub duty: f64,
}

/// Why a sweep gives no map.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum SweepError {
    /// Range or number of points makes no sense.
    #[error(
        "the {control} sweep from {from} to {to} with {points} points: the end must lie above the start, within {allowed}, and at least 2 points are needed"
    )]
    Range {
        /// `supply` or `width`.
        control: &'static str,
        /// First value.
        from: f64,
        /// Last value.
        to: f64,
        /// Number of points.
        points: usize,
        /// In words.
        allowed: &'static str,
    },
    /// Fewer than two points have an orbit; the first that failed.
    #[error("the map point at {control} {value}: {cause}")]
    Point {
        /// `supply` or `width`.
        control: &'static str,
        /// Its value.
        value: f64,
        /// Why.
        cause: OrbitError,
    },
    /// The points make no map.
    #[error(transparent)]
    Map(#[from] MapError),
}

impl Sweep {
    /// `points` evenly spaced values from `from` to `to` of `control` on the stage of `network`.
    ///
    /// # Errors
    /// [`SweepError::Range`].
    pub fn even(
        network: &Network,
        control: Control,
        from: f64,
        to: f64,
        points: usize,
    ) -> Result<Self, SweepError> {
        let (lowest, highest, allowed) = match control {
            Control::Supply => (0.0, f64::MAX, "0 V or more"),
            Control::Width => (1e-3, 1.0 - 1e-3, "0.001 to 0.999"),
            Control::Drive | Control::Angle => (
                0.0,
                0.0,
                "nothing: a stage is solved over its supply or width",
            ),
        };
        if !(from < to && from >= lowest && to <= highest) || points < 2 {
            let control = control.name();
            return Err(SweepError::Range {
                control,
                from,
                to,
                points,
                allowed,
            });
        }
        let step = (to - from) / (points - 1) as f64;
        let stage = network.stage();
        Ok(Self {
            control,
            values: (0..points)
                .map(|i| {
                    if i + 1 == points {
                        to
                    } else {
                        from + i as f64 * step
                    }
                })
                .collect(),
            supply_v: stage.supply_v,
            duty: stage.driver.duty,
        })
    }

    /// The whole range of `control` on the stage of `network`: supply from zero, width from a fortieth of
    /// the full one.
    ///
    /// # Errors
    /// [`SweepError::Range`].
    pub fn full(network: &Network, control: Control, points: usize) -> Result<Self, SweepError> {
        let stage = network.stage();
        match control {
            Control::Supply | Control::Drive | Control::Angle => {
                Self::even(network, control, 0.0, stage.supply_v, points)
            }
            // The dead time of a pair takes the narrowest pulses.
            Control::Width => Self::even(
                network,
                control,
                (stage.driver.duty / 40.0).max(1.02 * stage.driver.dead_s * stage.frequency_hz),
                stage.driver.duty,
                points,
            ),
        }
    }

    /// Solves every point, each from its stronger neighbour. A point without an orbit becomes a [`Failure`] of
    /// the map.
    ///
    /// # Errors
    /// [`SweepError`] where fewer than two points have an orbit.
    pub fn solve(&self, network: &Network) -> Result<Map, SweepError> {
        let stage = network.stage();
        let mut tracker = Tracker::new(network);
        let mut points = Vec::with_capacity(self.values.len());
        let mut failures = Vec::new();
        let mut first_cause = None;
        for &value in self.values.iter().rev() {
            let (supply_v, duty) = match self.control {
                Control::Supply | Control::Drive | Control::Angle => (value, self.duty),
                Control::Width => (self.supply_v, value),
            };
            match tracker.orbit(supply_v, &Drive::new(&stage.driver, duty)) {
                Ok(orbit) => points.push(point(value, supply_v, &orbit)),
                Err(cause) => {
                    failures.push(Failure {
                        control: value,
                        reason: cause.to_string(),
                    });
                    first_cause.get_or_insert((value, cause));
                }
            }
        }
        points.reverse();
        if let Some((value, cause)) = first_cause.filter(|_| points.len() < 2) {
            return Err(SweepError::Point {
                control: self.control.name(),
                value,
                cause,
            });
        }
        let map = Map::new(
            self.control,
            Origin::Stage,
            stage.frequency_hz,
            stage.load.ohm,
            points,
        )?;
        Ok(map.with_failures(failures))
    }
}

/// The point of a map that `orbit` is at `control`.
pub(super) fn point(control: f64, supply_v: f64, orbit: &Orbit) -> MapPoint {
    MapPoint {
        control,
        output_v: orbit.output_v,
        supply_v,
        supply_a: Some(orbit.supply_a),
        efficiency: Some(orbit.efficiency),
        switch_peak_v: Some(orbit.switch_peak_v),
        switch_peak_a: Some(orbit.switch_peak_a),
        switch_min_v: Some(orbit.switch_min_v),
        closing_v: Some(orbit.closing_v),
        driver_w: Some(orbit.driver_w),
    }
}
