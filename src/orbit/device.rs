//! Current of the switch and its diode over the drain voltage, in normalised units.

use crate::stage::{Knee, Stage};

/// Which way the switch stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Throw {
    /// Driven on.
    Closed,
    /// Driven off.
    Open,
}

/// Which side of the diode's corner the drain is on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// The diode blocks.
    Above,
    /// The diode conducts.
    Below,
}

/// Switch and diode; conductances are multiplied by the load resistance.
#[derive(Debug, Clone)]
pub struct Device {
    closed: f64,
    open: f64,
    knee: Option<Knee>,
    diode: Option<Corner>,
}

#[derive(Debug, Clone, Copy)]
struct Corner {
    volt: f64,
    conductance: f64,
}

impl Device {
    pub fn new(stage: &Stage) -> Self {
        let load_ohm = stage.load.ohm;
        Self {
            closed: load_ohm / stage.switch.closed_ohm,
            open: load_ohm / stage.switch.open_ohm,
            knee: stage.switch.knee.map(|knee| Knee {
                current_a: knee.current_a * load_ohm,
                ..knee
            }),
            diode: stage.switch.diode.map(|diode| Corner {
                volt: -diode.drop_v,
                conductance: load_ohm / diode.ohm,
            }),
        }
    }

    /// The same with a straight switch and no diode.
    pub fn straightened(&self) -> Self {
        Self {
            knee: None,
            diode: None,
            ..self.clone()
        }
    }

    /// The drain voltage below which the diode conducts.
    pub fn corner(&self) -> Option<f64> {
        self.diode.map(|corner| corner.volt)
    }

    /// Current and conductance of the switch alone.
    pub fn channel(&self, throw: Throw, volt: f64) -> (f64, f64) {
        match (throw, self.knee) {
            (Throw::Open, _) => (self.open * volt, self.open),
            (Throw::Closed, None) => (self.closed * volt, self.closed),
            (Throw::Closed, Some(knee)) => {
                let k = knee.sharpness;
                let x = (self.closed * volt / knee.current_a).abs();
                // (1 + x^k)^(-1/k), from the larger of 1 and x^k so that nothing overflows.
                let (factor, share) = if x <= 1.0 {
                    let power = x.powf(k);
                    ((1.0 + power).powf(-1.0 / k), 1.0 / (1.0 + power))
                } else {
                    let power = x.powf(-k);
                    ((1.0 + power).powf(-1.0 / k) / x, power / (1.0 + power))
                };
                (self.closed * volt * factor, self.closed * factor * share)
            }
        }
    }

    /// Current and conductance of the diode on a side of its corner.
    pub fn diode(&self, side: Side, volt: f64) -> (f64, f64) {
        match (side, self.diode) {
            (Side::Below, Some(corner)) => (
                corner.conductance * (volt - corner.volt),
                corner.conductance,
            ),
            _ => (0.0, 0.0),
        }
    }

    /// Both together.
    pub fn current(&self, throw: Throw, side: Side, volt: f64) -> (f64, f64) {
        let (i, g) = self.channel(throw, volt);
        match side {
            Side::Above => (i, g),
            Side::Below => {
                let (di, dg) = self.diode(side, volt);
                (i + di, g + dg)
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_knee_limits_and_its_conductance_is_the_slope() {
        let device = Device {
            closed: 10.0,
            open: 0.0,
            knee: Some(Knee {
                current_a: 2.0,
                sharpness: 4.0,
            }),
            diode: None,
        };
        // Hand-worked: x = 10 x 0.2 / 2 = 1, i = 2 / 2^(1/4).
        assert!((device.channel(Throw::Closed, 0.2).0 - 2.0 / 2f64.powf(0.25)).abs() < 1e-14);
        assert!((device.channel(Throw::Closed, 1e9).0 - 2.0).abs() < 1e-12);
        for v in [-3.0, -0.25, -0.01, 0.0, 0.05, 0.199, 0.201, 1.0, 40.0] {
            let h = 1e-6;
            let rise =
                device.channel(Throw::Closed, v + h).0 - device.channel(Throw::Closed, v - h).0;
            let slope = device.channel(Throw::Closed, v).1;
            assert!((rise / (2.0 * h) - slope).abs() < 1e-6, "{v}");
        }
    }
}
