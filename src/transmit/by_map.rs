//! The stage as its map: it settles at once to the orbit of the present control.

use num_complex::Complex64;

use crate::drive::{Modulator, Track};
use crate::map::{Control, Map};

/// Where the energy went, summed over samples.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Energy {
    /// Samples summed.
    pub samples: u64,
    /// Sum of output powers, W.
    pub output_w: f64,
    /// Sum of powers that the stage draws from its supply, W.
    pub stage_w: f64,
    /// Sum of powers that the modulator draws, W.
    pub modulator_w: f64,
    /// Sum of powers that the driver draws, W; zero where the map knows none.
    pub driver_w: f64,
}

impl Energy {
    /// Mean output power, W.
    pub fn mean_output_w(&self) -> f64 {
        self.output_w / self.samples as f64
    }

    /// Output over what the stage and its driver draw.
    pub fn stage_efficiency(&self) -> f64 {
        self.output_w / (self.stage_w + self.driver_w)
    }

    /// Output over what the modulator and the driver draw.
    pub fn efficiency(&self) -> f64 {
        self.output_w / (self.modulator_w + self.driver_w)
    }
}

/// A map at work on a track.
#[derive(Debug, Clone)]
pub struct MapTransmitter<'a> {
    map: &'a Map,
    modulator: Modulator,
    /// The supply while another control is moved, V.
    fixed_v: Option<f64>,
    energy: Energy,
    held: u64,
    highest_control: f64,
}

impl<'a> MapTransmitter<'a> {
    /// `map` behind `modulator`.
    pub fn new(map: &'a Map, modulator: &Modulator) -> Self {
        Self {
            map,
            modulator: *modulator,
            fixed_v: (map.control() != Control::Supply)
                .then(|| map.points().last().map_or(f64::NAN, |point| point.supply_v)),
            energy: Energy::default(),
            held: 0,
            highest_control: 0.0,
        }
    }

    /// Appends the output for every instant of `track`, peak volts across the load. Energies are summed over the
    /// instants in `counted` only: start and end of a signal are no part of it.
    pub fn push(
        &mut self,
        track: &Track,
        counted: std::ops::Range<usize>,
        output_v: &mut Vec<Complex64>,
    ) {
        let load_ohm = self.map.load_ohm();
        self.energy.samples += counted.len() as u64;
        for (at, (&control, &phase)) in track.control.iter().zip(&track.phase).enumerate() {
            let (gain_v, held) = self.map.output_held_v(control);
            // A linear stage scales with its supply.
            let scale = match (track.supply_v.get(at), self.fixed_v) {
                (Some(supply_v), Some(fixed_v)) => supply_v / fixed_v,
                _ => 1.0,
            };
            let output = match track.output_v.get(at) {
                Some(output_v) => *output_v,
                None => gain_v * phase * scale,
            };
            output_v.push(output);
            if !counted.contains(&at) {
                continue;
            }
            self.held += u64::from(held && track.drawn.is_empty());
            self.highest_control = self.highest_control.max(control);
            self.energy.output_w += output.norm_sqr() / (2.0 * load_ohm);
            if let Some(drawn) = track.drawn.get(at) {
                self.energy.stage_w += drawn.stage_w;
                self.energy.driver_w += drawn.driver_w;
                self.energy.modulator_w +=
                    drawn.stage_w / self.modulator.efficiency + self.modulator.idle_w;
                continue;
            }
            let supply_v = self
                .fixed_v
                .map_or(control, |fixed_v| fixed_v * scale * scale);
            let stage_w = supply_v * self.map.supply_held_a(control).unwrap_or(f64::NAN);
            self.energy.stage_w += stage_w;
            self.energy.driver_w += self.map.driver_held_w(control).unwrap_or(0.0);
            self.energy.modulator_w += stage_w / self.modulator.efficiency + self.modulator.idle_w;
        }
    }

    /// The sums so far. Powers drawn are not a number where the map knows no supply current.
    pub fn energy(&self) -> Energy {
        self.energy
    }

    /// Instants whose control lay outside the map and was held at its edge.
    pub fn held(&self) -> u64 {
        self.held
    }

    /// The highest control so far.
    pub fn highest_control(&self) -> f64 {
        self.highest_control
    }
}
