//! What one period of a piecewise-linear stage does, from its cycle.

use std::f64::consts::{PI, TAU};

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::circuit::Owner;
use super::gating::GateRun;
use super::linear::{LinearSolver, UnitContact, UnitOrbit, UnitSample};
use super::network::{HARMONICS, OrbitError};
use super::schedule::{Closed, Interval};
use super::sized::{Flows, Sized_, Walk};
use crate::math::flow::Flow;
use crate::math::small::{Column, Square, dot};

impl<const N: usize> LinearSolver for Sized_<N> {
    fn states(&self) -> usize {
        self.states
    }

    fn period_map(&self, schedule: &[Interval]) -> Result<DMatrix<f64>, OrbitError> {
        let mut flows = Vec::with_capacity(schedule.len());
        for interval in schedule {
            let generator = &self.position(interval.closed)?.generator;
            flows.push(Flow::new(generator, interval.length_rad, 0));
        }
        Ok(DMatrix::from_fn(self.states, self.states, |i, j| {
            let mut column = [0.0; N];
            column[j] = 1.0;
            flows.iter().fold(column, |state, flow| flow.end(&state))[i]
        }))
    }

    fn open_map(&self) -> Option<DMatrix<f64>> {
        self.gate_open_map()
    }

    fn gate(
        &self,
        schedule: &[Interval],
        periods: [usize; 2],
    ) -> Result<Option<GateRun>, OrbitError> {
        self.gate_run(schedule, periods)
    }

    fn solve(&self, schedule: &[Interval]) -> Result<UnitOrbit, OrbitError> {
        let flows = self.flows(schedule)?;
        let cycle = self.cycle(&flows)?;
        let walk = &cycle.walk;
        let mut harmonics = [Complex64::ZERO; HARMONICS];
        for (index, harmonic) in harmonics.iter_mut().enumerate() {
            let order = (index + 1) as f64;
            for (at, (position, interval, _)) in flows.spans.iter().enumerate() {
                let (from, to) = (interval.from_rad, interval.from_rad + interval.length_rad);
                let (start, end) = (&walk.starts[at], walk.after(at));
                let (at_start, at_end) =
                    (Complex64::cis(-order * from), Complex64::cis(-order * to));
                let exposure = (at_start - at_end) / Complex64::new(0.0, order);
                let row = &position.harmonics[index];
                let mut boundary = Complex64::ZERO;
                for i in 0..self.states {
                    boundary += row[i] * (at_end * end[i] - at_start * start[i]);
                }
                for i in self.states..self.states + self.inputs {
                    *harmonic += row[i] * start[i] * exposure;
                }
                *harmonic -= boundary;
            }
            *harmonic /= PI;
        }

        let power =
            |row: &Column<N>, moment: &Square<N>| dot(row, &moment.apply(row)).max(0.0) / TAU;
        let mut unit = UnitOrbit {
            harmonics,
            supply: 0.0,
            contacts: vec![UnitContact::UNSEEN; self.contacts.len()],
            feed: 0.0,
            rungs: vec![0.0; self.rungs],
            load: 0.0,
            period_miss: walk.miss,
        };
        for ((_, ohm, _), current) in self.chokes.iter().zip(&cycle.inputs) {
            unit.feed += ohm * current * current;
        }
        for (at, (position, _, flow)) in flows.spans.iter().enumerate() {
            let (moment, integral) = (&cycle.moments[at], &cycle.integrals[at]);
            unit.supply += dot(&position.supply, integral) / TAU;
            for (owner, ohm, current) in &position.resistors {
                let loss = ohm * power(current, moment);
                match *owner {
                    Owner::Contact(index) if position.closed & (1 << index) != 0 => {
                        unit.contacts[index].closed_loss += loss;
                    }
                    Owner::Contact(index) => unit.contacts[index].open_loss += loss,
                    Owner::Feed => unit.feed += loss,
                    Owner::Rung(index) => unit.rungs[index] += loss,
                    Owner::Load => unit.load += loss,
                }
            }
            for leg in 0..self.legs {
                let row = &position.legs[leg];
                let (mut highest, mut lowest) = (f64::MIN, f64::MAX);
                flow.extrema(&walk.starts[at], row, position.grid_level, |_, volt| {
                    highest = highest.max(volt);
                    lowest = lowest.min(volt);
                });
                self.stress(&mut unit.contacts, leg, position.closed, [highest, lowest]);
            }
            self.closing(&mut unit.contacts, &flows, walk, at);
        }
        Ok(unit)
    }

    fn samples(&self, schedule: &[Interval], points: usize) -> Result<Vec<UnitSample>, OrbitError> {
        let flows = self.flows(schedule)?;
        let cycle = self.cycle(&flows)?;
        let mut samples = Vec::with_capacity(flows.spans.len() * points);
        for ((position, interval, _), start) in flows.spans.iter().zip(&cycle.walk.starts) {
            let step = interval.length_rad / (points - 1) as f64;
            let flow = Flow::new(&position.generator, step, 0);
            let mut state = *start;
            for index in 0..points {
                let legs: Vec<f64> = position.legs.iter().map(|leg| dot(leg, &state)).collect();
                let contacts = self.contacts.iter().enumerate().map(|(at, contact)| {
                    if position.closed & (1 << at) != 0 {
                        contact.across(legs[contact.leg]) / contact.closed_ohm
                    } else {
                        0.0
                    }
                });
                samples.push(UnitSample {
                    angle_rad: interval.from_rad + index as f64 * step,
                    contacts: contacts.collect(),
                    legs,
                    load: dot(&position.load, &state),
                });
                state = flow.end(&state);
            }
        }
        Ok(samples)
    }
}

impl<const N: usize> Sized_<N> {
    /// Takes the extremes of a leg's voltage to its contacts.
    fn stress(&self, contacts: &mut [UnitContact], leg: usize, closed: Closed, volts: [f64; 2]) {
        let at_leg = self.contacts.iter().zip(contacts).enumerate();
        for (index, (contact, unit)) in at_leg.filter(|(_, (contact, _))| contact.leg == leg) {
            for volt in volts {
                let across = contact.across(volt);
                unit.across_max = unit.across_max.max(across);
                unit.across_min = unit.across_min.min(across);
                if closed & (1 << index) != 0 {
                    unit.current_max = unit.current_max.max(across / contact.closed_ohm);
                    unit.current_min = unit.current_min.min(across / contact.closed_ohm);
                }
            }
        }
    }

    /// Voltage and slope across the contacts that close at the end of interval `at`.
    fn closing(
        &self,
        contacts: &mut [UnitContact],
        flows: &Flows<'_, N>,
        walk: &Walk<N>,
        at: usize,
    ) {
        let (position, ..) = &flows.spans[at];
        let (next, ..) = &flows.spans[(at + 1) % flows.spans.len()];
        let end = walk.after(at);
        for (index, (contact, unit)) in self.contacts.iter().zip(contacts).enumerate() {
            if next.closed & !position.closed & (1 << index) != 0 {
                let row = &position.legs[contact.leg];
                unit.closing = contact.across(dot(row, end));
                unit.closing_slope = contact.across_slope(dot(row, &position.generator.apply(end)));
            }
        }
    }
}
