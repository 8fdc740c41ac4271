//! The stage over the angle of its load's reflection coefficient: what an antenna near a hand or a wall does to it.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::Failure;
use crate::orbit::{Drive, Network, NetworkError, Orbit, OrbitError, Tracker};
use crate::stage::{Load, Stage, magnitude_of_vswr};

/// Which loads to solve: plain data, made before anything is solved.
#[derive(Debug, Clone, PartialEq)]
pub struct LoadSweep {
    /// Standing-wave ratio, more than 1.
    pub vswr: f64,
    /// Angles of the reflection coefficient, rad, strictly increasing.
    pub angles_rad: Vec<f64>,
}

/// Why a sweep of the load gives no map.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum LoadSweepError {
    /// No such standing-wave ratio.
    #[error("a standing-wave ratio of {given}: allowed 1 to 199")]
    Vswr {
        /// As given.
        given: f64,
    },
    /// Range or number of points makes no sense.
    #[error(
        "the load sweep from {from_rad} rad to {to_rad} rad with {points} points: the end must lie above the start, at most one turn away, and at least 2 points are needed"
    )]
    Range {
        /// First angle, rad.
        from_rad: f64,
        /// Last angle, rad.
        to_rad: f64,
        /// Number of points.
        points: usize,
    },
    /// No point has an orbit; the first that failed.
    #[error("no load of the sweep has an orbit; the first, at {angle_deg:.2} deg: {reason}")]
    NoPoint {
        /// Angle of the first, deg.
        angle_deg: f64,
        /// Why.
        reason: String,
    },
}

/// The stage at one load.
#[derive(Debug, Clone, PartialEq)]
pub struct LoadPoint {
    /// Angle of the reflection coefficient, rad.
    pub angle_rad: f64,
    /// The reflection coefficient.
    pub reflection: Complex64,
    /// The load at the carrier, ohm.
    pub impedance_ohm: Complex64,
    /// What the stage does with it; its output is the voltage across the real part, which takes the power.
    pub orbit: Orbit,
}

impl LoadPoint {
    /// Phasor of the voltage across the whole load, peak volts.
    pub fn plane_v(&self) -> Complex64 {
        self.orbit.output_v * self.impedance_ohm / self.impedance_ohm.re
    }
}

/// The stage over the angle of its load.
#[derive(Debug, Clone, PartialEq)]
pub struct LoadMap {
    /// Standing-wave ratio.
    pub vswr: f64,
    /// Carrier, Hz.
    pub frequency_hz: f64,
    /// What the reflection refers to, ohm.
    pub reference_ohm: f64,
    /// Loads with an orbit, by angle.
    pub points: Vec<LoadPoint>,
    /// Loads without one; their control is the angle, rad. Nothing is interpolated over them.
    pub failures: Vec<Failure>,
    /// The stage at the matched load, where it has an orbit there.
    pub matched: Result<Orbit, String>,
}

impl LoadSweep {
    /// `points` angles evenly over a whole turn from 0, its end left out.
    ///
    /// # Errors
    /// [`LoadSweepError`].
    pub fn turn(vswr: f64, points: usize) -> Result<Self, LoadSweepError> {
        let to_rad = TAU * (1.0 - 1.0 / points.max(1) as f64);
        let mut sweep = Self::between(vswr, 0.0, to_rad, points)?;
        // Whole fractions of a turn, so that half a turn is half a turn.
        for (index, angle) in sweep.angles_rad.iter_mut().enumerate() {
            *angle = TAU * (index as f64 / points as f64);
        }
        Ok(sweep)
    }

    /// `points` angles evenly from `from_rad` to `to_rad`, both included.
    ///
    /// # Errors
    /// [`LoadSweepError`].
    pub fn between(
        vswr: f64,
        from_rad: f64,
        to_rad: f64,
        points: usize,
    ) -> Result<Self, LoadSweepError> {
        if !(1.0..=199.0).contains(&vswr) {
            return Err(LoadSweepError::Vswr { given: vswr });
        }
        if !(from_rad < to_rad && to_rad - from_rad <= TAU * (1.0 + 1e-12)) || points < 2 {
            return Err(LoadSweepError::Range {
                from_rad,
                to_rad,
                points,
            });
        }
        let step = (to_rad - from_rad) / (points - 1) as f64;
        Ok(Self {
            vswr,
            angles_rad: (0..points)
                .map(|index| from_rad + index as f64 * step)
                .collect(),
        })
    }

    /// Solves `stage`, at its own supply and width, with every load; `tick` is called after each. A load without an
    /// orbit becomes a [`Failure`]. Every load is solved from its own start, so that a point does not depend on the
    /// order; one that fails is tried again from its neighbour's state where both have the same elements.
    ///
    /// # Errors
    /// [`LoadSweepError::NoPoint`].
    pub fn solve(&self, stage: &Stage, mut tick: impl FnMut()) -> Result<LoadMap, LoadSweepError> {
        let reference_ohm = stage.load.reference_ohm;
        let magnitude = magnitude_of_vswr(self.vswr);
        let mut points: Vec<LoadPoint> = Vec::with_capacity(self.angles_rad.len());
        let mut failures: Vec<Failure> = Vec::new();
        let mut neighbour: Option<Start> = None;
        for &angle_rad in &self.angles_rad {
            let reflection = Complex64::from_polar(magnitude, angle_rad);
            let load = Load::reflecting(reflection, reference_ohm, stage.frequency_hz);
            let here = Stage {
                load,
                ..stage.clone()
            };
            match solved(&here, neighbour.as_ref()) {
                Ok((orbit, start)) => {
                    neighbour = Some(start);
                    points.push(LoadPoint {
                        angle_rad,
                        reflection,
                        impedance_ohm: load.impedance_ohm(stage.frequency_hz),
                        orbit,
                    });
                }
                Err(error) => failures.push(Failure {
                    control: angle_rad,
                    reason: error.to_string(),
                }),
            }
            tick();
        }
        if let (true, Some(first)) = (points.is_empty(), failures.first()) {
            return Err(LoadSweepError::NoPoint {
                angle_deg: first.control.to_degrees(),
                reason: first.reason.clone(),
            });
        }
        let matched = Stage {
            load: Load::matched(reference_ohm),
            ..stage.clone()
        };
        Ok(LoadMap {
            vswr: self.vswr,
            frequency_hz: stage.frequency_hz,
            reference_ohm,
            points,
            failures,
            matched: solved(&matched, None)
                .map(|(orbit, _)| orbit)
                .map_err(|error| error.to_string()),
        })
    }
}

/// A solved load that the next one can start from.
struct Start {
    network: Network,
    drive: Drive,
    supply_v: f64,
}

#[derive(Debug, thiserror::Error)]
enum PointError {
    #[error(transparent)]
    Network(#[from] NetworkError),
    #[error(transparent)]
    Orbit(#[from] OrbitError),
}

fn solved(stage: &Stage, neighbour: Option<&Start>) -> Result<(Orbit, Start), PointError> {
    let network = Network::new(stage)?;
    let drive = Drive::new(&stage.driver, stage.driver.duty);
    let supply_v = stage.supply_v;
    let orbit = match (network.orbit(supply_v, &drive), neighbour) {
        (Ok(orbit), _) => orbit,
        (Err(OrbitError::Diverged | OrbitError::NeverSettles), Some(start))
            if start.network.states() == network.states() =>
        {
            let mut before = Tracker::new(&start.network);
            before.orbit(start.supply_v, &start.drive)?;
            Tracker::beside(&network, &before).orbit(supply_v, &drive)?
        }
        (Err(error), _) => return Err(error.into()),
    };
    let start = Start {
        network,
        drive,
        supply_v,
    };
    Ok((orbit, start))
}
