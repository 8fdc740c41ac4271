//! The gate of bursts over carrier cycles.
//!
//! Its edges cut pulses where they fall: a switch that is closed opens with the gate, and one that would be closed
//! closes with it. Between two levels that are not off the pulse changes its width at the edge.

use std::collections::VecDeque;
use std::f64::consts::TAU;

use super::controls::Border;
use crate::drive::{GATE_LAG, Inverse};
use crate::map::Map;
use crate::orbit::Drive;
use crate::signal::Edge;
use crate::stage::{Driver, Stage};
use crate::transmit::replay::{Cut, Cycle, Pulse};

/// Reads the gate cycle by cycle.
#[derive(Debug, Clone)]
pub struct Gates {
    driver: Driver,
    supply_v: f64,
    inverse: Inverse,
    carrier_hz: f64,
    /// Cycles from an edge's own time to the row in which it shows.
    late_cycles: f64,
    /// Edges that were not reached yet: time in cycles from the track's first instant, level.
    coming: VecDeque<(f64, f64)>,
    /// The drive at the present level; none where that is off.
    drive: Option<Drive>,
    cycle: u64,
}

impl Gates {
    /// Off, on tracks at `rate_hz`.
    pub fn new(stage: &Stage, map: &Map, rate_hz: f64) -> Self {
        Self {
            driver: stage.driver,
            supply_v: stage.supply_v,
            inverse: Inverse::new(map),
            carrier_hz: stage.frequency_hz,
            late_cycles: GATE_LAG as f64 * stage.frequency_hz / rate_hz,
            coming: VecDeque::new(),
            drive: None,
            cycle: 0,
        }
    }

    /// Takes further edges of the track.
    pub fn push(&mut self, edges: &[Edge]) {
        let cycles = |edge: &Edge| edge.time_s * self.carrier_hz + self.late_cycles;
        self.coming
            .extend(edges.iter().map(|edge| (cycles(edge), edge.level)));
    }

    /// The next cycle, number `index` of its stretch; what changes within it is appended to `cuts`.
    pub fn cycle(&mut self, index: usize, ends: [Border; 2], cuts: &mut Vec<Cut>) -> Cycle {
        let [start, end] = ends.map(|border| border.phase_rad);
        let pulse = |drive: &Option<Drive>| match drive {
            Some(drive) => Pulse::phased(drive, start, end - start),
            None => Pulse::Off,
        };
        let cycle = Cycle {
            supply_v: [self.supply_v; 2],
            pulse: pulse(&self.drive),
        };
        let begin = self.cycle as f64;
        while let Some((at, level)) = self.coming.front().copied() {
            if at >= begin + 1.0 {
                break;
            }
            self.coming.pop_front();
            self.drive = (level > 0.0).then(|| Drive::new(&self.driver, self.inverse.width(level)));
            cuts.push(Cut {
                cycle: index,
                from_rad: TAU * (at - begin).max(0.0),
                pulse: pulse(&self.drive),
            });
        }
        self.cycle += 1;
        cycle
    }
}

#[cfg(test)]
mod tests {
    use num_complex::Complex64;

    use super::*;
    use crate::map::{Control, MapPoint, Origin};

    /// Output in proportion to the width, so that half the level is half the width.
    fn map() -> Map {
        let points = (1..=100).map(|at| {
            let control = 0.005 * f64::from(at);
            MapPoint {
                control,
                output_v: Complex64::new(10.0 * control, 0.0),
                supply_v: 5.0,
                supply_a: Some(control),
                efficiency: None,
                switch_peak_v: None,
                switch_peak_a: None,
                switch_min_v: None,
                closing_v: None,
                driver_w: None,
            }
        });
        Map::new(Control::Width, Origin::Stage, 1e6, 50.0, points.collect()).expect("a map")
    }

    #[test]
    fn edges_fall_late_by_the_lag_of_the_rows_and_at_their_part_of_a_cycle() {
        let text = "frequency = \"1 MHz\"\nsupply = { voltage = \"5 V\" }\n\
             switch = { closed_resistance = \"1 ohm\" }\ndrain = { capacitance = \"1 nF\" }\n\
             feed = { inductance = \"10 uH\" }\nload = { resistance = \"50 ohm\" }\n";
        let stage = Stage::parse("gate.toml", text).expect("a stage");
        let (rate_hz, carrier_hz) = (250e3, 1e6);
        let mut gates = Gates::new(&stage, &map(), rate_hz);
        let edge = |time_s, level| Edge { time_s, level };
        gates.push(&[edge(2.25e-6, 1.0), edge(2.5e-6, 0.5), edge(6.75e-6, 0.0)]);
        let late = GATE_LAG * (carrier_hz / rate_hz) as usize;
        let mut cuts = Vec::new();
        let ends = [Border::default(); 2];
        let cycles: Vec<_> = (0..late + 9)
            .map(|index| gates.cycle(index, ends, &mut cuts))
            .collect();
        let places: Vec<_> = cuts
            .iter()
            .map(|cut| (cut.cycle, cut.from_rad / TAU))
            .collect();
        let wanted = [(late + 2, 0.25), (late + 2, 0.5), (late + 6, 0.75)];
        for (place, wanted) in places.iter().zip(wanted) {
            // Times of some 10^2 cycles in double precision.
            assert!(
                place.0 == wanted.0 && (place.1 - wanted.1).abs() < 1e-12,
                "{places:?}"
            );
        }
        assert_eq!(places.len(), 3);
        let width = |pulse: Pulse| match pulse {
            Pulse::Off => 0.0,
            Pulse::Edges {
                closing_rad: [closing, _],
                opening_rad: [opening, _],
            } => (opening - closing) / TAU,
        };
        for (at, cycle) in cycles.iter().enumerate() {
            let held = (late + 3..=late + 6).contains(&at);
            let wanted = if held { 0.25 } else { 0.0 };
            // The inverse of the map is read from a table of some 1000 rows.
            assert!((width(cycle.pulse) - wanted).abs() < 1e-4, "{at}");
        }
        assert!((width(cuts[0].pulse) - 0.5).abs() < 1e-4);
        assert_eq!(cuts[2].pulse, Pulse::Off);
    }
}
