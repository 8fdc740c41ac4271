//! The stage as its map: it settles at once to the orbit of the present control.

use num_complex::Complex64;

use crate::drive::{Drawn, DrawnPower, Modulator, Track};
use crate::map::{Control, Map};

/// Where the energy went, summed over samples.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Energy {
    /// Samples summed.
    pub samples: u64,
    /// Sum of output powers, W.
    pub output_w: f64,
    /// Sum of powers that stages deliver into a combiner, W; the output's own without one.
    pub generated_w: f64,
    /// Sum of powers that enter a filter behind the stage, W; the output's own without one.
    pub filter_w: f64,
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
    drawn: DrawnPower,
    /// The supply while another control is moved, V.
    fixed_v: Option<f64>,
    energy: Energy,
    held: u64,
    highest_control: f64,
}

/// Output and supply current of an instant or a part of one.
#[derive(Debug, Clone, Copy)]
struct Working {
    output_v: Complex64,
    supply_v: f64,
    supply_a: f64,
    held: bool,
}

impl<'a> MapTransmitter<'a> {
    /// `map` behind `modulator`, on tracks of `rate_hz`.
    pub fn new(map: &'a Map, modulator: &Modulator, rate_hz: f64) -> Self {
        Self {
            map,
            drawn: DrawnPower::new(modulator, rate_hz),
            fixed_v: (map.control() != Control::Supply).then(|| map.own_supply_v()),
            energy: Energy::default(),
            held: 0,
            highest_control: 0.0,
        }
    }

    /// At `control`, with the supply at `moved_v` where a scheme moves it beside the control.
    fn working(&self, control: f64, phase: Complex64, moved_v: Option<f64>) -> Working {
        let map = self.map;
        let (gain_v, held, supply_v, supply_a) = match (self.fixed_v, moved_v) {
            (Some(_), Some(supply_v)) => {
                let (gain_v, held) = map.output_at_v(control, supply_v);
                (gain_v, held, supply_v, map.supply_at_a(control, supply_v))
            }
            (fixed_v, _) => {
                let (gain_v, held) = map.output_held_v(control);
                let supply_v = fixed_v.unwrap_or(control);
                (gain_v, held, supply_v, map.supply_held_a(control))
            }
        };
        Working {
            output_v: gain_v * phase,
            supply_v,
            supply_a: supply_a.unwrap_or(f64::NAN),
            held,
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
        self.energy.samples += counted.len() as u64;
        let mut parts = &track.parts[..];
        for (at, (&control, &phase)) in track.control.iter().zip(&track.phase).enumerate() {
            if let Some(&seen_v) = track.output_v.get(at) {
                let mut working = self.working(control, phase, track.supply_v.get(at).copied());
                working.output_v = seen_v;
                output_v.push(seen_v);
                match track.drawn.get(at) {
                    Some(drawn) => self.count_drawn(control, seen_v, drawn, counted.contains(&at)),
                    None => self.count(control, &working, 1.0, counted.contains(&at)),
                }
                continue;
            }
            let count = parts.iter().take_while(|part| part.at == at).count();
            let (now, later) = parts.split_at(count);
            parts = later;
            if now.is_empty() {
                let working = self.working(control, phase, track.supply_v.get(at).copied());
                output_v.push(working.output_v);
                self.count(control, &working, 1.0, counted.contains(&at));
                continue;
            }
            let mut mean_v = Complex64::ZERO;
            for part in now {
                let working = self.working(part.control, part.phase, Some(part.supply_v));
                mean_v += working.output_v * part.weight;
                self.count(part.control, &working, part.weight, counted.contains(&at));
            }
            output_v.push(mean_v);
        }
    }

    /// Of a scheme that accounts for the powers drawn itself.
    fn count_drawn(&mut self, control: f64, output_v: Complex64, drawn: &Drawn, counted: bool) {
        if !counted {
            return;
        }
        self.highest_control = self.highest_control.max(control);
        let output_w = output_v.norm_sqr() / (2.0 * self.map.load_ohm());
        let energy = &mut self.energy;
        energy.output_w += output_w;
        energy.generated_w += drawn.delivered_w;
        energy.filter_w += drawn.delivered_w;
        energy.stage_w += drawn.stage_w;
        energy.driver_w += drawn.driver_w;
        energy.modulator_w += drawn.stage_w;
    }

    fn count(&mut self, control: f64, working: &Working, weight: f64, counted: bool) {
        let modulator_w = self.drawn.push(working.supply_v, working.supply_a);
        if !counted {
            return;
        }
        self.held += u64::from(working.held);
        self.highest_control = self.highest_control.max(control);
        let output_w = working.output_v.norm_sqr() / (2.0 * self.map.load_ohm());
        let energy = &mut self.energy;
        energy.output_w += weight * output_w;
        energy.generated_w += weight * self.map.generated_w().unwrap_or(output_w);
        energy.filter_w += weight * output_w;
        energy.stage_w += weight * working.supply_v * working.supply_a;
        energy.driver_w += weight * self.map.driver_held_w(control).unwrap_or(0.0);
        energy.modulator_w += weight * modulator_w;
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
