//! One period in numbers, with its energy balance.

use num_complex::Complex64;

use super::linear::{UnitContact, UnitOrbit};
use super::network::{Drive, HARMONICS, OrbitError};
/// The largest accepted energy residual, relative to the supply power. The model bank stays below 1e-9; what
/// circulates in a resonator of loaded Q costs about Q^2 rounding errors: 3.4e-8 was seen at a loaded Q of 10,000.
const BALANCE_TOLERANCE: f64 = 1e-6;

/// Where the power goes that does not reach the load, W.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Losses {
    /// In the closed switch, the charge dumped at closing included.
    pub closed_switch: f64,
    /// In the open switch.
    pub open_switch: f64,
    /// In the diode, its drop included.
    pub diode: f64,
    /// In the feed's resistance.
    pub feed: f64,
    /// In all rungs of the ladder.
    pub ladder: f64,
    /// In each rung of the ladder, from the drain.
    pub rungs: Vec<f64>,
    /// Reaching the load at direct current and harmonics of the carrier.
    pub harmonics: f64,
    /// In the driver: what it draws less what it delivers into the drain.
    pub driver: f64,
}

impl Losses {
    /// Their sum, W.
    pub fn total_w(&self) -> f64 {
        self.closed_switch
            + self.open_switch
            + self.diode
            + self.feed
            + self.ladder
            + self.harmonics
            + self.driver
    }
}

/// One of several switches.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct SwitchFigures {
    /// `upper` and `lower` of a pair; `first` and `second` of two stages.
    pub name: String,
    /// Highest voltage across it, V.
    pub peak_v: f64,
    /// Lowest voltage across it, V; below zero a real device's diode would conduct.
    pub min_v: f64,
    /// Highest current, A.
    pub peak_a: f64,
    /// Lowest current, A; below zero it flows backwards.
    pub min_a: f64,
    /// Voltage across it just before it closes, V.
    pub closing_v: f64,
    /// Its slope at that instant, V/s.
    pub closing_slope_v_per_s: f64,
    /// Lost in it, closed and open, W.
    pub lost_w: f64,
}

/// What takes an orbit at one volt to the stage's own units.
#[derive(Debug, Clone, Copy)]
pub(super) struct Scale {
    pub load_ohm: f64,
    pub frequency_hz: f64,
    /// Power that the driver draws, W.
    pub driver_w: f64,
}

/// The periodic steady state of a stage at one supply and one width.
#[derive(Debug, Clone, PartialEq)]
pub struct Orbit {
    /// Supply, V.
    pub supply_v: f64,
    /// When the switch is closed.
    pub drive: Drive,
    /// Phasor of the fundamental of the voltage across the load resistance, peak volts.
    pub output_v: Complex64,
    /// Power of the fundamental in the load, W.
    pub output_w: f64,
    /// Mean supply current, A.
    pub supply_a: f64,
    /// Power from the supply, W.
    pub supply_w: f64,
    /// Power from the driver, W.
    pub driver_w: f64,
    /// Output power over supply and driver power.
    pub efficiency: f64,
    /// Where the rest goes.
    pub losses: Losses,
    /// Harmonics 2, 3, ... of the load voltage relative to the fundamental, dB.
    pub harmonics_dbc: [f64; HARMONICS - 1],
    /// Highest voltage across the switch, that of the drain, V; the highest of all where there are several.
    pub switch_peak_v: f64,
    /// Lowest voltage across the switch, of all where there are several, V; below zero a real device's diode would conduct.
    pub switch_min_v: f64,
    /// Highest switch current, A.
    pub switch_peak_a: f64,
    /// Lowest switch current, A; below zero it flows backwards.
    pub switch_min_a: f64,
    /// Voltage across the switch just before it closes, V: of several the one furthest from zero.
    pub closing_v: f64,
    /// Its slope at that instant, V/s.
    pub closing_slope_v_per_s: f64,
    /// Each switch by itself, where there are several.
    pub switches: Vec<SwitchFigures>,
    /// How many times a period the diode begins to conduct.
    pub diode_conductions: usize,
    /// Charge that one period leaves on the drain, over the charge it moves on and off.
    pub charge_residual: f64,
    /// Supply and driver power less output and losses, relative to the power that flows.
    pub energy_residual: f64,
}

impl Orbit {
    /// The orbit at `supply_v` of a stage whose orbit at one volt is `unit`.
    pub(super) fn scaled(
        unit: &UnitOrbit,
        scale: &Scale,
        supply_v: f64,
        drive: &Drive,
        names: &[String],
    ) -> Result<Self, OrbitError> {
        let Scale {
            load_ohm,
            frequency_hz,
            driver_w,
        } = *scale;
        let turns = std::f64::consts::TAU * frequency_hz;
        let switch = |(contact, name): (&UnitContact, &String)| SwitchFigures {
            name: name.clone(),
            peak_v: contact.across_max * supply_v,
            min_v: contact.across_min * supply_v,
            peak_a: contact.current_max * supply_v / load_ohm,
            min_a: contact.current_min * supply_v / load_ohm,
            closing_v: contact.closing * supply_v,
            closing_slope_v_per_s: contact.closing_slope * supply_v * turns,
            lost_w: (contact.closed_loss + contact.open_loss) * supply_v * supply_v / load_ohm,
        };
        let over = |value: fn(&UnitContact) -> f64| unit.contacts.iter().map(value);
        let highest = |value| over(value).fold(f64::MIN, f64::max);
        let lowest = |value| over(value).fold(f64::MAX, f64::min);
        let (closed_loss, open_loss) = (
            over(|contact| contact.closed_loss).sum::<f64>(),
            over(|contact| contact.open_loss).sum::<f64>(),
        );
        let hardest = unit
            .contacts
            .iter()
            .max_by(|a, b| a.closing.abs().total_cmp(&b.closing.abs()))
            .unwrap_or(&UnitContact::UNSEEN);
        // Normalised powers are volts squared; divided by the load resistance they are watts.
        let watt = |unit_power: f64| unit_power * supply_v * supply_v / load_ohm;
        let output_v = unit.harmonics[0] * supply_v;
        let output_w = output_v.norm_sqr() / (2.0 * load_ohm);
        let supply_w = watt(unit.supply);
        let rungs: Vec<f64> = unit.rungs.iter().map(|&power| watt(power)).collect();
        let losses = Losses {
            closed_switch: watt(closed_loss),
            open_switch: watt(open_loss),
            diode: 0.0,
            feed: watt(unit.feed),
            ladder: rungs.iter().fold(0.0, |sum, loss| sum + loss),
            rungs,
            harmonics: watt(unit.load) - output_w,
            driver: driver_w,
        };
        // At zero supply nothing flows and nothing is left over.
        let unit_output = unit.harmonics[0].norm_sqr() / 2.0;
        let unit_lost: f64 = closed_loss
            + open_loss
            + unit.feed
            + unit.rungs.iter().sum::<f64>()
            + (unit.load - unit_output);
        let energy_residual = (unit.supply - unit_output - unit_lost) / unit.supply;
        let fundamental = unit.harmonics[0].norm();
        let mut harmonics_dbc = [0.0; HARMONICS - 1];
        for (level, harmonic) in harmonics_dbc.iter_mut().zip(&unit.harmonics[1..]) {
            *level = 20.0 * (harmonic.norm() / fundamental).log10();
        }
        Self {
            supply_v,
            drive: *drive,
            output_v,
            output_w,
            supply_a: unit.supply * supply_v / load_ohm,
            supply_w,
            driver_w,
            // Without driver power the ratio has a limit at zero supply.
            efficiency: if driver_w > 0.0 {
                output_w / (supply_w + driver_w)
            } else {
                unit_output / unit.supply
            },
            losses,
            harmonics_dbc,
            switch_peak_v: highest(|contact| contact.across_max) * supply_v,
            switch_min_v: lowest(|contact| contact.across_min) * supply_v,
            switch_peak_a: highest(|contact| contact.current_max) * supply_v / load_ohm,
            switch_min_a: lowest(|contact| contact.current_min) * supply_v / load_ohm,
            closing_v: hardest.closing * supply_v,
            closing_slope_v_per_s: hardest.closing_slope * supply_v * turns,
            switches: match unit.contacts.len() {
                0 | 1 => Vec::new(),
                _ => unit.contacts.iter().zip(names).map(switch).collect(),
            },
            diode_conductions: 0,
            // The state was found to return to itself to rounding.
            charge_residual: unit.period_miss,
            energy_residual,
        }
        .balanced()
    }

    /// The orbit, where its energy balance closes.
    pub(super) fn balanced(self) -> Result<Self, OrbitError> {
        if self.energy_residual.abs() <= BALANCE_TOLERANCE {
            Ok(self)
        } else {
            Err(OrbitError::Unbalanced {
                residual: self.energy_residual,
                allowed: BALANCE_TOLERANCE,
            })
        }
    }
}
