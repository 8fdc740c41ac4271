//! The period of a piecewise-linear stage at a size fixed at compile time: propagators, states at the switching
//! instants, integrals.

use std::f64::consts::TAU;

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::circuit::{Circuit, End, Input, Owner};
use super::linear::Position;
use super::network::{HARMONICS, OrbitError};
use super::schedule::{Closed, Interval};
use crate::math::flow::Flow;
use crate::math::small::{Column, Square, dot};

/// Grid steps for each cycle of the fastest oscillation when extrema are bracketed.
const STEPS_PER_CYCLE: f64 = 16.0;

#[derive(Debug)]
pub(super) struct SizedPosition<const N: usize> {
    pub(super) closed: Closed,
    pub(super) generator: Square<N>,
    pub(super) legs: Vec<Column<N>>,
    pub(super) load: Column<N>,
    pub(super) supply: Column<N>,
    pub(super) resistors: Vec<(Owner, f64, Column<N>)>,
    pub(super) harmonics: [[Complex64; N]; HARMONICS],
    pub(super) grid_level: usize,
}

/// States at 0..n, the inputs at n..n + m, then rows that decay by themselves and touch nothing.
#[derive(Debug)]
pub(super) struct Sized_<const N: usize> {
    pub(super) states: usize,
    pub(super) inputs: usize,
    pub(super) positions: Vec<SizedPosition<N>>,
    pub(super) contacts: Vec<SizedContact>,
    pub(super) legs: usize,
    pub(super) rungs: usize,
    /// For each choke its resistance, and its part of the supply.
    pub(super) chokes: Vec<(usize, f64, f64)>,
}

/// A contact: the voltage across it is that of its rail less that of its leg, or that of its leg.
#[derive(Debug, Clone, Copy)]
pub(super) struct SizedContact {
    pub(super) leg: usize,
    /// Part of the supply, for a contact to a rail.
    pub(super) rail: Option<f64>,
    pub(super) closed_ohm: f64,
}

impl SizedContact {
    /// Voltage across it where its leg is at `leg` and the supply at one volt.
    pub(super) fn across(&self, leg: f64) -> f64 {
        match self.rail {
            None => leg,
            Some(share) => share - leg,
        }
    }

    pub(super) fn across_slope(&self, leg_slope: f64) -> f64 {
        match self.rail {
            None => leg_slope,
            Some(_) => -leg_slope,
        }
    }
}

impl<const N: usize> SizedPosition<N> {
    pub(super) fn new(position: &Position) -> Self {
        let (states, inputs) = position.b.shape();
        let row = |dynamic: &DVector<f64>| {
            let mut row = [0.0; N];
            row[..states + inputs].copy_from_slice(dynamic.as_slice());
            row
        };
        let mut generator = Square::ZERO;
        for i in 0..states {
            for j in 0..states {
                generator.0[i][j] = position.a[(i, j)];
            }
            for j in 0..inputs {
                generator.0[i][states + j] = position.b[(i, j)];
            }
        }
        for i in states + inputs..N {
            generator.0[i][i] = -1.0;
        }
        let mut harmonics = [[Complex64::ZERO; N]; HARMONICS];
        for (target, row) in harmonics.iter_mut().zip(&position.harmonics) {
            target[..states + inputs].copy_from_slice(row);
        }
        let steps = (STEPS_PER_CYCLE * position.cycles).max(32.0);
        Self {
            closed: position.closed,
            generator,
            legs: position.legs.iter().map(row).collect(),
            load: row(&position.load),
            supply: row(&position.supply),
            resistors: position
                .resistors
                .iter()
                .map(|(owner, ohm, current)| (*owner, *ohm, row(current)))
                .collect(),
            harmonics,
            grid_level: (steps.log2().ceil() as usize).min(14),
        }
    }
}

/// The propagators of the period.
pub(super) struct Flows<'a, const N: usize> {
    pub(super) spans: Vec<(&'a SizedPosition<N>, Interval, Flow<N>)>,
}

/// The states at the switching instants.
pub(super) struct Walk<const N: usize> {
    /// At the start of each interval.
    pub(super) starts: Vec<Column<N>>,
    /// After the whole period: equal to the first up to rounding.
    pub(super) end: Column<N>,
    /// By how much not, relative to the size of the state.
    pub(super) miss: f64,
}

impl<const N: usize> Walk<N> {
    /// The state at the end of interval `index`.
    pub(super) fn after(&self, index: usize) -> &Column<N> {
        self.starts.get(index + 1).unwrap_or(&self.end)
    }

    pub(super) fn scale(&mut self, factor: f64) {
        for entry in self
            .starts
            .as_flattened_mut()
            .iter_mut()
            .chain(&mut self.end)
        {
            *entry *= factor;
        }
    }
}

/// A walk with its integrals over each interval.
pub(super) struct Cycle<const N: usize> {
    pub(super) walk: Walk<N>,
    /// Of `z z^T`.
    pub(super) moments: Vec<Square<N>>,
    /// Of `z`.
    pub(super) integrals: Vec<Column<N>>,
    /// The chokes' currents; 1 for a voltage.
    pub(super) inputs: Vec<f64>,
}

impl<const N: usize> Sized_<N> {
    pub(super) fn new(circuit: &Circuit, positions: &[Position]) -> Self {
        let (states, inputs) = positions.first().map_or((0, 0), |first| first.b.shape());
        let rungs = positions
            .first()
            .map_or(&[][..], |first| &first.resistors)
            .iter()
            .filter_map(|(owner, ..)| match owner {
                Owner::Rung(index) => Some(index + 1),
                _ => None,
            })
            .max()
            .unwrap_or(0);
        let chokes = match &circuit.input {
            Input::Voltage(_) => Vec::new(),
            Input::Current(chokes) => chokes
                .iter()
                .filter_map(|choke| {
                    let leg = circuit.legs.iter().position(|leg| *leg == choke.node)?;
                    Some((leg, choke.ohm, choke.share))
                })
                .collect(),
        };
        Self {
            states,
            inputs,
            positions: positions.iter().map(SizedPosition::new).collect(),
            contacts: circuit
                .contacts
                .iter()
                .map(|contact| SizedContact {
                    leg: contact.leg,
                    rail: match contact.end {
                        End::Ground => None,
                        End::Rail(rail) => Some(rail.share),
                    },
                    closed_ohm: contact.closed_ohm,
                })
                .collect(),
            legs: circuit.legs.len(),
            rungs,
            chokes,
        }
    }

    pub(super) fn position(&self, closed: Closed) -> Result<&SizedPosition<N>, OrbitError> {
        self.positions
            .iter()
            .find(|position| position.closed == closed)
            .ok_or(OrbitError::ShootThrough)
    }

    pub(super) fn flows(&self, schedule: &[Interval]) -> Result<Flows<'_, N>, OrbitError> {
        let mut spans = Vec::with_capacity(schedule.len());
        for interval in schedule {
            let position = self.position(interval.closed)?;
            let flow = Flow::new(
                &position.generator,
                interval.length_rad,
                position.grid_level,
            );
            spans.push((position, *interval, flow));
        }
        Ok(Flows { spans })
    }

    /// The state at the beginning of the period for each input of one.
    pub(super) fn closings(&self, flows: &Flows<'_, N>) -> Result<Vec<Column<N>>, OrbitError> {
        let n = self.states;
        let mut whole: Option<Square<N>> = None;
        for (.., flow) in &flows.spans {
            whole = Some(match whole {
                None => *flow.difference(),
                Some(before) => {
                    let mut both = flow.difference().times(&before);
                    both.add_scaled(1.0, flow.difference());
                    both.add_scaled(1.0, &before);
                    both
                }
            });
        }
        let difference = whole.ok_or(OrbitError::NeverSettles)?;
        let matrix = difference.scaled(-1.0);
        (0..self.inputs)
            .map(|input| {
                let mut forced = [0.0; N];
                for (entry, row) in forced.iter_mut().zip(&difference.0) {
                    *entry = row[n + input];
                }
                let mut closing = matrix
                    .solve_leading(n, &forced)
                    .ok_or(OrbitError::NeverSettles)?;
                for entry in &mut closing[n..] {
                    *entry = 0.0;
                }
                closing[n + input] = 1.0;
                Ok(closing)
            })
            .collect()
    }

    pub(super) fn walk(
        &self,
        flows: &Flows<'_, N>,
        closing: &Column<N>,
    ) -> Result<Walk<N>, OrbitError> {
        let n = self.states;
        let mut starts = Vec::with_capacity(flows.spans.len());
        let mut state = *closing;
        for (.., flow) in &flows.spans {
            starts.push(state);
            state = flow.end(&state);
        }
        let size = closing[..n]
            .iter()
            .fold(0.0, |size: f64, x| size.max(x.abs()));
        let miss = (0..n).fold(0.0, |miss: f64, i| miss.max((state[i] - closing[i]).abs()));
        // A state that does not return to itself has no business being called periodic.
        if miss.is_nan() || miss > 1e-8 * size.max(1e-300) || size > 1e9 {
            return Err(OrbitError::NeverSettles);
        }
        Ok(Walk {
            starts,
            end: state,
            miss: if size > 0.0 { miss / size } else { 0.0 },
        })
    }

    pub(super) fn moments(&self, flows: &Flows<'_, N>, walk: &Walk<N>) -> Vec<Square<N>> {
        flows
            .spans
            .iter()
            .zip(&walk.starts)
            .map(|((.., flow), start)| flow.second_moment(start))
            .collect()
    }

    /// The orbit at one volt of supply.
    pub(super) fn cycle(&self, flows: &Flows<'_, N>) -> Result<Cycle<N>, OrbitError> {
        let closings = self.closings(flows)?;
        let mut units = Vec::with_capacity(closings.len());
        for (input, closing) in closings.iter().enumerate() {
            let walk = self.walk(flows, closing)?;
            let moments = self.moments(flows, &walk);
            // The input is the constant one of the state: beside it stands the plain integral.
            let column = |moment: &Square<N>| -> Column<N> {
                std::array::from_fn(|i| moment.0[i][self.states + input])
            };
            units.push(Cycle {
                integrals: moments.iter().map(column).collect(),
                walk,
                moments,
                inputs: vec![1.0],
            });
        }
        if self.chokes.is_empty() {
            return units.pop().ok_or(OrbitError::NeverSettles);
        }
        let currents = self.choke_currents(flows, &units)?;
        if let ([current], Some(mut unit)) = (&currents[..], units.pop()) {
            unit.walk.scale(*current);
            for moment in &mut unit.moments {
                *moment = moment.scaled(current * current);
            }
            for entry in unit.integrals.as_flattened_mut() {
                *entry *= current;
            }
            unit.inputs = currents;
            return Ok(unit);
        }
        self.combined(flows, &closings, currents)
    }

    /// The currents at which the mean voltage of each choke's leg is what its part of the supply leaves.
    pub(super) fn choke_currents(
        &self,
        flows: &Flows<'_, N>,
        units: &[Cycle<N>],
    ) -> Result<Vec<f64>, OrbitError> {
        let mean = |leg: usize, unit: &Cycle<N>| {
            let spans = flows.spans.iter().zip(&unit.integrals);
            spans
                .map(|((position, ..), integral)| dot(&position.legs[leg], integral))
                .sum::<f64>()
                / TAU
        };
        let count = self.chokes.len();
        let matrix = DMatrix::from_fn(count, count, |i, j| {
            let (leg, ohm, _) = self.chokes[i];
            let own = if i == j { ohm } else { 0.0 };
            units.get(j).map_or(f64::NAN, |unit| mean(leg, unit)) + own
        });
        if count == 1 {
            // supply = mean drain voltage + I0 R_feed, all in proportion to I0.
            let ratio = matrix[(0, 0)];
            return if ratio > 0.0 && ratio.is_finite() {
                Ok(vec![self.chokes[0].2 / ratio])
            } else {
                Err(OrbitError::NeverSettles)
            };
        }
        let shares = DVector::from_iterator(count, self.chokes.iter().map(|choke| choke.2));
        matrix
            .lu()
            .solve(&shares)
            .filter(|currents| currents.iter().all(|current| current.is_finite()))
            .map(|currents| currents.iter().copied().collect())
            .ok_or(OrbitError::NeverSettles)
    }

    /// The orbit of several inputs at once.
    pub(super) fn combined(
        &self,
        flows: &Flows<'_, N>,
        closings: &[Column<N>],
        inputs: Vec<f64>,
    ) -> Result<Cycle<N>, OrbitError> {
        let mut closing = [0.0; N];
        for (unit, input) in closings.iter().zip(&inputs) {
            for (entry, unit) in closing.iter_mut().zip(unit) {
                *entry += input * unit;
            }
        }
        let walk = self.walk(flows, &closing)?;
        let moments = self.moments(flows, &walk);
        // A constant of one that touches nothing would cost a row; an input that is not small serves as well.
        let (at, largest) = inputs
            .iter()
            .copied()
            .enumerate()
            .max_by(|a, b| a.1.abs().total_cmp(&b.1.abs()))
            .filter(|(_, largest)| *largest != 0.0)
            .ok_or(OrbitError::NeverSettles)?;
        let column = |moment: &Square<N>| -> Column<N> {
            std::array::from_fn(|i| moment.0[i][self.states + at] / largest)
        };
        Ok(Cycle {
            integrals: moments.iter().map(column).collect(),
            walk,
            moments,
            inputs,
        })
    }
}
