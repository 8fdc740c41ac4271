//! The current of an ideal choke: that of the orbit at the present supply and width.
//!
//! An ideal choke never changes its current, so that a supply that moves could not move it. It stands for a choke
//! that is large against a carrier cycle and small against the signal: its current is taken to be, at every instant,
//! the one with which the mean drain voltage is the supply, less the drop across the choke's resistance. What a real
//! choke stores and how late its current follows is left out; a feed `inductance` brings both in.

use std::f64::consts::TAU;

use super::error::ReplayError;
use crate::orbit::{Drive, Network};

/// Widths at which the current is solved.
const POINTS: usize = 513;

/// The narrowest and the widest of them, parts of a cycle.
const RANGE: [f64; 2] = [0.005, 0.99];

/// Current times load resistance for one volt, over the width.
#[derive(Debug, Clone)]
pub struct Choke {
    own: (f64, f64),
    widths: Vec<f64>,
}

impl Choke {
    /// # Errors
    /// [`ReplayError::Orbit`].
    pub fn new(network: &Network, drive: &Drive) -> Result<Self, ReplayError> {
        let load_ohm = network.stage().load.ohm;
        let share = |duty: f64| {
            let drive = Drive {
                closing_rad: 0.0,
                width_rad: TAU * duty,
            };
            Ok(network.orbit(1.0, &drive)?.supply_a * load_ohm)
        };
        let step = (RANGE[1] - RANGE[0]) / (POINTS - 1) as f64;
        Ok(Self {
            own: (drive.width_rad, share(drive.duty())?),
            widths: (0..POINTS)
                .map(|at| share(RANGE[0] + at as f64 * step))
                .collect::<Result<_, ReplayError>>()?,
        })
    }

    /// At a width: exact at the drive's own, else by cubics through four points.
    #[inline]
    pub fn share(&self, width_rad: f64) -> f64 {
        if (width_rad - self.own.0).abs() < 1e-12 {
            return self.own.1;
        }
        let at = (width_rad / TAU - RANGE[0]) / (RANGE[1] - RANGE[0]) * (POINTS - 1) as f64;
        let at = at.clamp(0.0, (POINTS - 1) as f64);
        let first = (at as usize).saturating_sub(1).min(POINTS - 4);
        let x = at - first as f64;
        let weights = [
            -(x - 1.0) * (x - 2.0) * (x - 3.0) / 6.0,
            x * (x - 2.0) * (x - 3.0) / 2.0,
            -x * (x - 1.0) * (x - 3.0) / 2.0,
            x * (x - 1.0) * (x - 2.0) / 6.0,
        ];
        let points = self.widths.iter().skip(first);
        points
            .zip(weights)
            .map(|(point, weight)| point * weight)
            .sum()
    }
}
