//! STEP 1: what the hardware is. A stage file becomes a [`Stage`].

mod device;
mod ladder;
mod load;
mod read;
mod read_device;
mod write;

pub use device::{Device, Diode, DrainCurve, Gate, Junction, Knee};
pub use ladder::{Arm, Element, Part, Rung};
pub use load::{Load, magnitude_of_vswr};
pub use write::TABLE_NAME;

/// Which edge of the closed interval stays when its width changes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Anchor {
    /// The switch always closes at the same instant.
    Leading,
    /// The middle of the closed interval stays.
    Centre,
    /// The switch always opens at the same instant.
    Trailing,
}

/// A switching power stage, in SI units.
#[derive(Debug, Clone, PartialEq)]
pub struct Stage {
    /// What the user calls it.
    pub title: String,
    /// Carrier, Hz.
    pub frequency_hz: f64,
    /// Full range of the supply control, V.
    pub supply_v: f64,
    /// The active device.
    pub switch: Switch,
    /// Fixed capacitance from the drain to ground, F.
    pub drain_f: f64,
    /// What the drain has in addition that depends on its voltage.
    pub drain_curve: Option<DrainCurve>,
    /// Capacitance between gate and drain, F; more than 0 only with a gate that swings.
    pub gate_coupling_f: f64,
    /// When the switch is closed.
    pub driver: Driver,
    /// From the supply to the drain.
    pub feed: Feed,
    /// From the drain to the load.
    pub ladder: Vec<Rung>,
    /// What the power is for.
    pub load: Load,
}

/// A switch from the drain to ground.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Switch {
    /// Resistance while closed, ohm.
    pub closed_ohm: f64,
    /// Resistance while open, ohm; infinite where the file gives none.
    pub open_ohm: f64,
    /// The limit of its current, where there is one.
    pub knee: Option<Knee>,
    /// Conducts from ground to the drain.
    pub diode: Option<Diode>,
    /// Alone, or with a second one to the supply.
    pub arrangement: Arrangement,
}

/// How many switches stand at the drain.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Arrangement {
    /// One switch to ground: class E.
    Single,
    /// A second switch to the supply, closed while the pulse is high; the other is closed while it is low: class D,
    /// voltage switching.
    Pair {
        /// Resistance of the closed switch to the supply, ohm.
        upper_ohm: f64,
    },
}

/// When the switch is closed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Driver {
    /// Closed fraction of the period at full width, more than 0 and less than 1.
    pub duty: f64,
    /// Which edge stays when the width is modulated.
    pub anchor: Anchor,
    /// What the driver does to the gate, where it is told.
    pub gate: Option<Gate>,
    /// How long both switches of a pair are open at each edge, centred on it, s; 0 elsewhere.
    pub dead_s: f64,
}

/// From the supply to the drain.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Feed {
    /// An inductor, H, with series resistance, ohm.
    Inductor {
        /// H
        henry: f64,
        /// ohm
        ohm: f64,
    },
    /// An ideal choke: its current is constant, its mean voltage is that across its resistance, ohm.
    Choke {
        /// ohm
        ohm: f64,
    },
    /// Nothing: the upper switch of a pair stands at the supply.
    Direct,
}

impl Stage {
    /// One period of the carrier, s.
    pub fn period_s(&self) -> f64 {
        1.0 / self.frequency_hz
    }

    /// Whether it has a switch to ground and one to the supply.
    pub fn is_pair(&self) -> bool {
        matches!(self.switch.arrangement, Arrangement::Pair { .. })
    }

    /// Whether anything makes it more than linear between switching instants.
    pub fn is_curved(&self) -> bool {
        self.drain_curve.is_some()
            || self.gate_coupling_f > 0.0
            || self.switch.knee.is_some()
            || self.switch.diode.is_some()
    }
}
