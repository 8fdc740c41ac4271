//! The parts of a class E stage and the stage that they make.

use std::f64::consts::TAU;

use super::values::{Series, rounded};
use super::{PartLosses, Targets};
use crate::stage::{Anchor, Arm, Driver, Element, Feed, Load, Part, Rung, Stage};

/// Everything that is chosen.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Parts {
    /// Fixed capacitance from the drain to ground, the device's own fixed part included, F.
    pub drain_f: f64,
    /// H; none for a choke.
    pub feed_h: Option<f64>,
    /// Series inductor, H.
    pub series_h: f64,
    /// Series capacitor, F.
    pub series_f: f64,
    /// Between the resonator and the load.
    pub matching: Match,
}

/// How the load resistance is brought to what the stage must see.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Match {
    /// Not at all: it is that already, within a few percent.
    None,
    /// A capacitor across the load, F; the series inductor takes up its reactance. For loads above.
    Up {
        /// F
        shunt_f: f64,
    },
    /// A capacitor across the resonator's output, F, and an inductor in series with the load, H. For
    /// loads below.
    Down {
        /// F
        shunt_f: f64,
        /// H
        load_h: f64,
    },
}

impl Match {
    /// The matching network that shows `wanted_ohm` with a load of `load_ohm`, and the series reactance that
    /// remains to be taken up, ohm.
    pub fn new(load_ohm: f64, wanted_ohm: f64, angular_hz: f64) -> (Self, f64) {
        let ratio = wanted_ohm / load_ohm;
        if (ratio - 1.0).abs() < 0.02 {
            (Self::None, 0.0)
        } else if ratio < 1.0 {
            let step = (1.0 / ratio - 1.0).sqrt();
            (
                Self::Up {
                    shunt_f: step / load_ohm / angular_hz,
                },
                step * wanted_ohm,
            )
        } else {
            let step = (ratio - 1.0).sqrt();
            let shunt_f = step / wanted_ohm / angular_hz;
            (
                Self::Down {
                    shunt_f,
                    load_h: step * load_ohm / angular_hz,
                },
                0.0,
            )
        }
    }
}

impl Parts {
    /// The stage that these parts make.
    pub fn stage(&self, targets: &Targets) -> Stage {
        let angular_hz = TAU * targets.frequency_hz;
        let PartLosses {
            feed_ohm,
            inductor_q,
            capacitor_q,
        } = targets.losses;
        let device = &targets.device;
        let inductor = |henry: f64| Part {
            element: Element::Inductor(henry),
            loss_ohm: angular_hz * henry / inductor_q,
        };
        let capacitor = |farad: f64| Part {
            element: Element::Capacitor(farad),
            loss_ohm: 1.0 / (angular_hz * farad * capacitor_q),
        };
        let rung = |arm: Arm, part: Part| Rung {
            arm,
            parts: vec![part],
        };
        let mut ladder = vec![
            rung(Arm::Series, inductor(self.series_h)),
            rung(Arm::Series, capacitor(self.series_f)),
        ];
        match self.matching {
            Match::None => {}
            Match::Up { shunt_f } => ladder.push(rung(Arm::Shunt, capacitor(shunt_f))),
            Match::Down { shunt_f, load_h } => {
                ladder.push(rung(Arm::Shunt, capacitor(shunt_f)));
                ladder.push(rung(Arm::Series, inductor(load_h)));
            }
        }
        Stage {
            title: targets.title.clone(),
            frequency_hz: targets.frequency_hz,
            supply_v: targets.supply_v,
            switch: device.switch,
            drain_f: self.drain_f,
            drain_curve: device.drain_curve.clone(),
            gate_coupling_f: device.gate_coupling_f,
            driver: Driver {
                duty: targets.duty,
                anchor: Anchor::Centre,
                gate: device.gate,
                dead_s: 0.0,
            },
            feed: match self.feed_h {
                Some(henry) => Feed::Inductor {
                    henry,
                    ohm: feed_ohm,
                },
                None => Feed::Choke { ohm: feed_ohm },
            },
            ladder,
            load: Load::matched(targets.load_ohm),
        }
    }

    /// Every part at the nearest value of `series`; of the drain capacitance only what stands beside the device's
    /// own `device_f`.
    #[must_use]
    pub fn rounded(&self, series: Series, device_f: f64) -> Self {
        let near = |value: f64| rounded(value, series);
        let beside = self.drain_f - device_f;
        // Less than a hundredth of the device's own is left out rather than bought.
        let beside = if beside > 0.01 * device_f {
            near(beside)
        } else {
            0.0
        };
        Self {
            drain_f: device_f + beside,
            feed_h: self.feed_h.map(near),
            series_h: near(self.series_h),
            series_f: near(self.series_f),
            matching: match self.matching {
                Match::None => Match::None,
                Match::Up { shunt_f } => Match::Up {
                    shunt_f: near(shunt_f),
                },
                Match::Down { shunt_f, load_h } => Match::Down {
                    shunt_f: near(shunt_f),
                    load_h: near(load_h),
                },
            },
        }
    }
}
