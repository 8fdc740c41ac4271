//! What a supply modulator draws from its own supply for the voltage and current that it delivers.
//!
//! ```text
//! switching     v i / efficiency + idle
//! linear        input i + idle
//! split band    v i_low / efficiency + input max(i - i_low, 0) + idle
//! ```
//! `v` is the voltage in front of the output resistance: what that burns is drawn too. `i_low` is the current
//! behind a low-pass of first order at the crossover: the switching part delivers it, the linear part beside it
//! sources or sinks the rest; what it sinks goes to ground.

use super::modulator::Modulator;
use crate::math::lowpass::Lowpass;

/// How a modulator turns power.
#[derive(Debug, Clone, Copy, PartialEq, Default, serde::Serialize)]
#[serde(rename_all = "snake_case", tag = "model")]
pub enum PowerModel {
    /// A switching converter: losses in proportion to what it delivers, and the idle power.
    #[default]
    Switching,
    /// A linear regulator: all of the current comes from its input.
    Linear {
        /// Supply of the regulator, V.
        input_v: f64,
    },
    /// A switching converter for the slow part of the current, a linear stage for the rest.
    SplitBand {
        /// Supply of the linear stage, V.
        input_v: f64,
        /// Where the two meet, Hz.
        crossover_hz: f64,
    },
}

impl PowerModel {
    /// The supply of the linear part, V, where there is one.
    pub fn input_v(self) -> Option<f64> {
        match self {
            Self::Switching => None,
            Self::Linear { input_v } | Self::SplitBand { input_v, .. } => Some(input_v),
        }
    }
}

impl Modulator {
    /// Power drawn for the constant voltage `v` and current `ampere`, W.
    pub fn drawn_at_rest_w(&self, v: f64, ampere: f64) -> f64 {
        let open_v = v + self.output_ohm * ampere;
        self.idle_w
            + match self.power {
                PowerModel::Linear { input_v } => input_v * ampere,
                PowerModel::Switching | PowerModel::SplitBand { .. } => {
                    open_v * ampere / self.efficiency
                }
            }
    }
}

/// The power drawn at every instant.
#[derive(Debug, Clone)]
pub struct DrawnPower {
    modulator: Modulator,
    low: Option<Lowpass<f64>>,
    started: bool,
}

impl DrawnPower {
    /// Of `modulator` at `rate_hz`.
    pub fn new(modulator: &Modulator, rate_hz: f64) -> Self {
        let low = match modulator.power {
            PowerModel::SplitBand { crossover_hz, .. } => {
                Some(Lowpass::new(1, crossover_hz, rate_hz))
            }
            PowerModel::Switching | PowerModel::Linear { .. } => None,
        };
        Self {
            modulator: modulator.clone(),
            low,
            started: false,
        }
    }

    /// W, for the voltage `v` at the stage and its current.
    pub fn push(&mut self, v: f64, ampere: f64) -> f64 {
        let (Some(low), PowerModel::SplitBand { input_v, .. }) =
            (&mut self.low, self.modulator.power)
        else {
            return self.modulator.drawn_at_rest_w(v, ampere);
        };
        if !self.started {
            low.settle(ampere);
            self.started = true;
        }
        let slow_a = low.push(ampere);
        let open_v = v + self.modulator.output_ohm * ampere;
        open_v * slow_a / self.modulator.efficiency
            + input_v * (ampere - slow_a).max(0.0)
            + self.modulator.idle_w
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::{PI, TAU};

    /// Mean power drawn for `v = 4 (1 + m cos)`, `i = v / 8 ohm`, over whole periods.
    fn mean_w(modulator: &Modulator, m: f64, hz: f64) -> f64 {
        let rate_hz = 4096.0;
        let mut drawn = DrawnPower::new(modulator, rate_hz);
        let mut sum = 0.0;
        for n in 0..8 * 4096 {
            let v = 4.0 * (1.0 + m * (TAU * hz * f64::from(n) / rate_hz).cos());
            let watt = drawn.push(v, v / 8.0);
            if n >= 4 * 4096 {
                sum += watt;
            }
        }
        sum / (4.0 * 4096.0)
    }

    fn modulator(power: PowerModel) -> Modulator {
        Modulator {
            efficiency: 0.9,
            idle_w: 0.05,
            power,
            ..Modulator::default()
        }
    }

    #[test]
    fn every_model_draws_what_its_closed_form_says() {
        let m = 0.6;
        // <v i> = 2 (1 + m^2 / 2) W, <i> = 0.5 A.
        let delivered = 2.0 * (1.0 + m * m / 2.0);
        let switching = mean_w(&modulator(PowerModel::Switching), m, 16.0);
        assert!((switching - (delivered / 0.9 + 0.05)).abs() < 1e-9);
        let linear = mean_w(&modulator(PowerModel::Linear { input_v: 7.0 }), m, 16.0);
        assert!((linear - (7.0 * 0.5 + 0.05)).abs() < 1e-9);
        for x in [0.1f64, 1.0, 5.0] {
            let split = PowerModel::SplitBand {
                input_v: 7.0,
                crossover_hz: 16.0 / x,
            };
            // The slow part is the mean and 1/(1 + jx) of the swing; the rest swings with x/sqrt(1 + x^2) of it,
            // and half a sine has the mean amplitude / pi.
            let slow = 2.0 * (1.0 + m * m / 2.0 / (1.0 + x * x));
            let rest = 0.5 * m * x / (1.0 + x * x).sqrt();
            let law = slow / 0.9 + 7.0 * rest / PI + 0.05;
            let found = mean_w(&modulator(split), m, 16.0);
            // Straight lines between samples and sampled half sines: (2 pi 16 / 4096)^2 / 12.
            assert!((found / law - 1.0).abs() < 1e-4, "{x}: {found} {law}");
        }
    }

    #[test]
    fn the_output_resistance_burns_what_is_drawn_besides() {
        let plain = modulator(PowerModel::Switching);
        let sagging = Modulator {
            output_ohm: 0.5,
            ..plain.clone()
        };
        let more = sagging.drawn_at_rest_w(4.0, 0.6) - plain.drawn_at_rest_w(4.0, 0.6);
        assert!((more - 0.5 * 0.36 / 0.9).abs() < 1e-12);
        // A linear regulator's input carries the same current either way.
        let linear = modulator(PowerModel::Linear { input_v: 7.0 });
        let sagging = Modulator {
            output_ohm: 0.5,
            ..linear.clone()
        };
        assert_eq!(
            sagging.drawn_at_rest_w(4.0, 0.6),
            linear.drawn_at_rest_w(4.0, 0.6)
        );
    }
}
