//! A band-pass behind the replayed stage, in envelope form and with the powers of the scheme `burst` by map.

use num_complex::Complex64;

use crate::drive::{BandFilter, Inverse, StopBand};
use crate::map::Map;
use crate::math::modal::Modal;

/// The filter at work.
#[derive(Debug, Clone)]
pub struct Behind {
    filter: Modal,
    passed: f64,
    /// Not drawn for each watt that does not pass; 0 where that is burnt.
    returned: f64,
    load_ohm: f64,
}

impl Behind {
    /// On envelopes at `rate_hz`.
    pub fn new(filter: &BandFilter, map: &Map, rate_hz: f64) -> Self {
        let edge = std::f64::consts::PI * filter.bandwidth_hz / rate_hz;
        let load_ohm = map.load_ohm();
        let returned = match filter.stop_band {
            StopBand::Absorbed => 0.0,
            StopBand::Reflected => {
                let width = Inverse::new(map).width(1.0);
                let supply_w = map.own_supply_v() * map.supply_held_a(width).unwrap_or(f64::NAN);
                supply_w * 2.0 * load_ohm / map.output_held_v(width).0.norm_sqr()
            }
        };
        Self {
            filter: Modal::new(&filter.prototype(), edge),
            passed: 10f64.powf(-filter.loss_db / 20.0),
            returned,
            load_ohm,
        }
    }

    /// The output of the next instant, and the power that passes, W, the loss in the pass band aside.
    pub fn push(&mut self, stage_v: Complex64) -> (Complex64, f64) {
        let output_v = self.filter.push(stage_v);
        let through_w = output_v.norm_sqr() / (2.0 * self.load_ohm);
        (output_v * self.passed, through_w)
    }

    /// What the stage draws less for `turned_w` that do not pass.
    pub fn not_drawn_w(&self, turned_w: f64) -> f64 {
        // Without a return no power drawn need be known.
        if self.reflects() {
            self.returned * turned_w
        } else {
            0.0
        }
    }

    /// Whether what does not pass returns.
    pub fn reflects(&self) -> bool {
        self.returned != 0.0
    }
}
