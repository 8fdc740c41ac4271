//! From targets to a stage: carrier, output power, supply, duty and one free choice to parts, solved on the exact
//! orbit with losses and finite Q.

mod best_effort;
mod budget;
mod error;
mod ideal;
mod parts;
mod solve;
mod values;
mod zero;

pub use error::DesignError;
pub use ideal::{HIGHEST_RATIO, Ideal, highest_frequency_hz};
pub use parts::{Match, Parts};
pub use solve::{BestEffort, Design, Zero, design};
pub use values::{Series, rounded};

use crate::stage::Device;

/// What the stage must do, and what it must be made of.
#[derive(Debug, Clone, PartialEq)]
pub struct Targets {
    /// What the user calls it.
    pub title: String,
    /// Carrier, Hz.
    pub frequency_hz: f64,
    /// Power of the fundamental in the load, W.
    pub output_w: f64,
    /// Supply, V.
    pub supply_v: f64,
    /// Closed fraction of the period.
    pub duty: f64,
    /// Load resistance, ohm.
    pub load_ohm: f64,
    /// Reactance of the series capacitor over the resistance that the stage sees.
    pub loaded_q: f64,
    /// The one free choice.
    pub choice: Choice,
    /// The active device.
    pub device: Device,
    /// What the parts around it lose.
    pub losses: PartLosses,
}

/// The one free choice of a class E stage with a feed inductor.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Choice {
    /// `q = 1 / (w sqrt(L C))` of feed inductor and drain capacitance.
    FeedRatio(f64),
    /// The series resonator alone is tuned to the carrier: no excess reactance.
    NoExcess,
    /// An ideal choke.
    Choke,
    /// The feed that makes the device's own capacitance the whole drain capacitance.
    DeviceCapacitance,
}

/// What the parts around the device lose.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PartLosses {
    /// Resistance of the feed, ohm.
    pub feed_ohm: f64,
    /// Quality factor of the inductors at the carrier; may be infinite.
    pub inductor_q: f64,
    /// Quality factor of the capacitors at the carrier; may be infinite.
    pub capacitor_q: f64,
}
