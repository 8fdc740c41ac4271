//! The periodic steady state of a piecewise-linear stage, exactly.
//!
//! With `E = E_open E_closed` over one period, the state at the closing instant solves
//! `(I - M) y = b`, where `M` and `b` are the blocks of `E` that act on the state and on the constant
//! input. Fourier integrals are exact: from `dy/dt = A y + b`,
//!
//! ```text
//! (jk - A) int y e^(-jkt) dt = b int e^(-jkt) dt - [y e^(-jkt)]
//! ```
//!
//! Means and powers come from the exact second moment of the state ([`Flow::second_moment`]).

use std::f64::consts::{PI, TAU};
use std::fmt;

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::circuit::Owner;
use super::gating::GateRun;
use super::network::{Drive, HARMONICS, OrbitError};
use crate::math::flow::Flow;
use crate::math::small::{Column, Square, dot};

/// The most independent states a stage may have.
pub const MAX_STATES: usize = 23;

/// Grid steps for each cycle of the fastest oscillation when extrema are bracketed.
const STEPS_PER_CYCLE: f64 = 16.0;

/// One switch position, sizes known at run time.
#[derive(Debug, Clone)]
pub struct Position {
    pub a: DMatrix<f64>,
    pub b: DVector<f64>,
    pub drain: DVector<f64>,
    pub load: DVector<f64>,
    pub supply: DVector<f64>,
    pub resistors: Vec<(Owner, f64, DVector<f64>)>,
    /// For each harmonic: the row that takes the state's boundary values, and the forced part.
    pub harmonics: Vec<(Vec<Complex64>, Complex64)>,
    /// Cycles of the fastest natural oscillation in one carrier period.
    pub cycles: f64,
}

/// The orbit for an input of one volt (or of one volt's worth of choke current, scaled to one volt of supply),
/// in normalised units: voltages in volts, currents times the load resistance.
#[derive(Debug, Clone)]
pub struct UnitOrbit {
    pub harmonics: [Complex64; HARMONICS],
    pub supply: f64,
    /// Mean of current squared times resistance.
    pub closed_switch: f64,
    pub open_switch: f64,
    pub feed: f64,
    pub rungs: Vec<f64>,
    pub load: f64,
    pub drain_max: f64,
    pub drain_min: f64,
    pub switch_max: f64,
    pub switch_min: f64,
    pub closing: f64,
    /// Per radian.
    pub closing_slope: f64,
    /// How far the state is from itself one period later, relative to its size.
    pub period_miss: f64,
}

/// One instant of a unit waveform.
#[derive(Debug, Clone, Copy)]
pub struct UnitSample {
    pub angle_rad: f64,
    pub drain: f64,
    pub switch: f64,
    pub load: f64,
}

/// A network of some fixed size.
pub trait LinearSolver: fmt::Debug + Send + Sync {
    fn states(&self) -> usize;
    /// What one period does to a deviation of the state from its orbit.
    fn period_map(&self, drive: &Drive) -> DMatrix<f64>;
    fn solve(&self, drive: &Drive) -> Result<UnitOrbit, OrbitError>;
    /// What one period does to the state while the switch stays open.
    fn open_map(&self) -> DMatrix<f64>;
    /// From rest through `periods` of the drive, and on with the switch open; `None` with an ideal choke.
    fn gate(&self, drive: &Drive, periods: [usize; 2]) -> Result<Option<GateRun>, OrbitError>;
    fn samples(&self, drive: &Drive, points: usize) -> Result<Vec<UnitSample>, OrbitError>;
}

/// A solver of the smallest size that holds `states`; `None` where no size does.
pub fn solver(
    states: usize,
    positions: [Position; 2],
    choke_ohm: Option<f64>,
    switch_ohm: f64,
) -> Option<Box<dyn LinearSolver>> {
    macro_rules! smallest {
        ($($size:literal)*) => {
            $(if states < $size {
                return Some(Box::new(Sized_::<$size>::new(states, &positions, choke_ohm, switch_ohm)));
            })*
        };
    }
    smallest!(3 4 5 6 8 12 16 24);
    None
}

#[derive(Debug)]
struct SizedPosition<const N: usize> {
    generator: Square<N>,
    drain: Column<N>,
    load: Column<N>,
    supply: Column<N>,
    resistors: Vec<(Owner, f64, Column<N>)>,
    harmonics: [([Complex64; N], Complex64); HARMONICS],
    grid_level: usize,
}

/// States at 0..n, the constant 1 at n, then rows that decay by themselves and touch nothing.
#[derive(Debug)]
struct Sized_<const N: usize> {
    states: usize,
    closed: SizedPosition<N>,
    open: SizedPosition<N>,
    rungs: usize,
    choke_ohm: Option<f64>,
    switch_ohm: f64,
}

impl<const N: usize> SizedPosition<N> {
    fn new(states: usize, position: &Position) -> Self {
        let row = |dynamic: &DVector<f64>| {
            let mut row = [0.0; N];
            row[..=states].copy_from_slice(dynamic.as_slice());
            row
        };
        let mut generator = Square::ZERO;
        for i in 0..states {
            for j in 0..states {
                generator.0[i][j] = position.a[(i, j)];
            }
            generator.0[i][states] = position.b[i];
        }
        for i in states + 1..N {
            generator.0[i][i] = -1.0;
        }
        let mut harmonics = [([Complex64::ZERO; N], Complex64::ZERO); HARMONICS];
        for (target, (row, forced)) in harmonics.iter_mut().zip(&position.harmonics) {
            target.0[..states].copy_from_slice(row);
            target.1 = *forced;
        }
        let steps = (STEPS_PER_CYCLE * position.cycles).max(32.0);
        Self {
            generator,
            drain: row(&position.drain),
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

/// The states at the two switching instants, with the propagators between them.
struct Cycle<const N: usize> {
    closed: Flow<N>,
    open: Flow<N>,
    closing: Column<N>,
    opening: Column<N>,
    /// After the whole period: equal to `closing` up to rounding.
    end: Column<N>,
    /// By how much not, relative to the size of the state.
    miss: f64,
}

impl<const N: usize> Sized_<N> {
    fn new(
        states: usize,
        positions: &[Position; 2],
        choke_ohm: Option<f64>,
        switch_ohm: f64,
    ) -> Self {
        let [closed, open] = positions;
        let rungs = closed
            .resistors
            .iter()
            .filter_map(|(owner, ..)| match owner {
                Owner::Rung(index) => Some(index + 1),
                _ => None,
            })
            .max()
            .unwrap_or(0);
        Self {
            states,
            closed: SizedPosition::new(states, closed),
            open: SizedPosition::new(states, open),
            rungs,
            choke_ohm,
            switch_ohm,
        }
    }

    fn cycle(&self, drive: &Drive) -> Result<Cycle<N>, OrbitError> {
        let n = self.states;
        let closed = Flow::new(
            &self.closed.generator,
            drive.width_rad,
            self.closed.grid_level,
        );
        let open = Flow::new(
            &self.open.generator,
            TAU - drive.width_rad,
            self.open.grid_level,
        );
        // E - I = D_open + D_closed + D_open D_closed
        let mut difference = open.difference().times(closed.difference());
        difference.add_scaled(1.0, open.difference());
        difference.add_scaled(1.0, closed.difference());
        let mut forced = [0.0; N];
        for (entry, row) in forced.iter_mut().zip(&difference.0) {
            *entry = row[n];
        }
        let matrix = difference.scaled(-1.0);
        let mut closing = matrix
            .solve_leading(n, &forced)
            .ok_or(OrbitError::NeverSettles)?;
        for entry in &mut closing[n..] {
            *entry = 0.0;
        }
        closing[n] = 1.0;
        let opening = closed.end(&closing);
        let end = open.end(&opening);
        let size = closing[..n]
            .iter()
            .fold(0.0, |size: f64, x| size.max(x.abs()));
        let miss = (0..n).fold(0.0, |miss: f64, i| miss.max((end[i] - closing[i]).abs()));
        // A state that does not return to itself has no business being called periodic.
        if miss.is_nan() || miss > 1e-8 * size.max(1e-300) || size > 1e9 {
            return Err(OrbitError::NeverSettles);
        }
        Ok(Cycle {
            closed,
            open,
            closing,
            opening,
            end,
            miss: if size > 0.0 { miss / size } else { 0.0 },
        })
    }

    /// What an interval that starts from `start` adds to the fundamental's phasor, and to the mean supply current.
    fn exposed(
        &self,
        position: &SizedPosition<N>,
        flow: &Flow<N>,
        from: f64,
        start: &Column<N>,
        end: &Column<N>,
    ) -> (Complex64, f64) {
        let to = from + flow.length();
        let exposure = (Complex64::cis(-from) - Complex64::cis(-to)) / Complex64::I;
        let (row, forced) = &position.harmonics[0];
        let mut boundary = Complex64::ZERO;
        for i in 0..self.states {
            boundary += row[i] * (Complex64::cis(-to) * end[i] - Complex64::cis(-from) * start[i]);
        }
        let moment = flow.second_moment(start);
        let current: f64 = (0..N)
            .map(|i| position.supply[i] * moment.0[i][self.states])
            .sum();
        ((forced * exposure - boundary) / PI, current / TAU)
    }

    /// Mean drain voltage over the period for a unit input.
    fn choke_scale(&self, moments: [&Square<N>; 2]) -> Result<f64, OrbitError> {
        let Some(ohm) = self.choke_ohm else {
            return Ok(1.0);
        };
        let mean = |row: &Column<N>, moment: &Square<N>| {
            (0..N)
                .map(|i| row[i] * moment.0[i][self.states])
                .sum::<f64>()
                / TAU
        };
        // supply = mean drain voltage + I0 R_feed, all in proportion to I0.
        let ratio = mean(&self.closed.drain, moments[0]) + mean(&self.open.drain, moments[1]) + ohm;
        if ratio > 0.0 && ratio.is_finite() {
            Ok(1.0 / ratio)
        } else {
            Err(OrbitError::NeverSettles)
        }
    }
}

impl<const N: usize> LinearSolver for Sized_<N> {
    fn states(&self) -> usize {
        self.states
    }

    fn period_map(&self, drive: &Drive) -> DMatrix<f64> {
        let closed = Flow::new(&self.closed.generator, drive.width_rad, 0);
        let open = Flow::new(&self.open.generator, TAU - drive.width_rad, 0);
        DMatrix::from_fn(self.states, self.states, |i, j| {
            let mut column = [0.0; N];
            column[j] = 1.0;
            open.end(&closed.end(&column))[i]
        })
    }

    fn open_map(&self) -> DMatrix<f64> {
        let open = Flow::new(&self.open.generator, TAU, 0);
        DMatrix::from_fn(self.states, self.states, |i, j| {
            let mut column = [0.0; N];
            column[j] = 1.0;
            open.end(&column)[i]
        })
    }

    fn gate(&self, drive: &Drive, periods: [usize; 2]) -> Result<Option<GateRun>, OrbitError> {
        if self.choke_ohm.is_some() {
            return Ok(None);
        }
        let cycle = self.cycle(drive)?;
        let n = self.states;
        let mut forced = [0.0; N];
        for (entry, row) in forced.iter_mut().zip(&self.open.generator.0) {
            *entry = row[n];
        }
        let mut rest = self
            .open
            .generator
            .scaled(-1.0)
            .solve_leading(n, &forced)
            .ok_or(OrbitError::NeverSettles)?;
        for entry in &mut rest[n..] {
            *entry = 0.0;
        }
        rest[n] = 1.0;
        let closing = drive.closing_rad;
        let opening = closing + drive.width_rad;
        let period = |start: &Column<N>| {
            let middle = cycle.closed.end(start);
            let end = cycle.open.end(&middle);
            let first = self.exposed(&self.closed, &cycle.closed, closing, start, &middle);
            let second = self.exposed(&self.open, &cycle.open, opening, &middle, &end);
            ((first.0 + second.0, first.1 + second.1), end)
        };
        let mut state = rest;
        let mut on = Vec::with_capacity(periods[0]);
        for _ in 0..periods[0] {
            let (figures, end) = period(&state);
            on.push(figures);
            state = end;
        }
        let open = Flow::new(&self.open.generator, TAU, 0);
        let mut state = cycle.closing;
        let mut off = Vec::with_capacity(periods[1]);
        for _ in 0..periods[1] {
            let end = open.end(&state);
            off.push(self.exposed(&self.open, &open, closing, &state, &end));
            state = end;
        }
        Ok(Some(GateRun {
            on,
            off,
            rest: dot(&self.open.supply, &rest),
            orbit: period(&cycle.closing).0,
        }))
    }

    fn solve(&self, drive: &Drive) -> Result<UnitOrbit, OrbitError> {
        let cycle = self.cycle(drive)?;
        let moments = [
            cycle.closed.second_moment(&cycle.closing),
            cycle.open.second_moment(&cycle.opening),
        ];
        let scale = self.choke_scale([&moments[0], &moments[1]])?;
        let opening_rad = drive.closing_rad + drive.width_rad;
        let spans = [
            (
                &self.closed,
                drive.closing_rad,
                opening_rad,
                &cycle.closing,
                &cycle.opening,
            ),
            (
                &self.open,
                opening_rad,
                drive.closing_rad + TAU,
                &cycle.opening,
                &cycle.end,
            ),
        ];

        let mut harmonics = [Complex64::ZERO; HARMONICS];
        for (index, harmonic) in harmonics.iter_mut().enumerate() {
            let order = (index + 1) as f64;
            for (position, from, to, start, end) in &spans {
                let (at_start, at_end) =
                    (Complex64::cis(-order * from), Complex64::cis(-order * to));
                let exposure = (at_start - at_end) / Complex64::new(0.0, order);
                let (row, forced) = &position.harmonics[index];
                let mut boundary = Complex64::ZERO;
                for i in 0..self.states {
                    boundary += row[i] * (at_end * end[i] - at_start * start[i]);
                }
                *harmonic += forced * exposure - boundary;
            }
            *harmonic *= scale / PI;
        }

        let power = |row: &Column<N>, moment: &Square<N>| {
            dot(row, &moment.apply(row)).max(0.0) * scale * scale / TAU
        };
        let mean = |row: &Column<N>, moment: &Square<N>| {
            (0..N)
                .map(|i| row[i] * moment.0[i][self.states])
                .sum::<f64>()
                * scale
                / TAU
        };
        let mut unit = UnitOrbit {
            harmonics,
            supply: mean(&self.closed.supply, &moments[0]) + mean(&self.open.supply, &moments[1]),
            closed_switch: 0.0,
            open_switch: 0.0,
            feed: self.choke_ohm.map_or(0.0, |ohm| ohm * scale * scale),
            rungs: vec![0.0; self.rungs],
            load: 0.0,
            drain_max: f64::MIN,
            drain_min: f64::MAX,
            switch_max: f64::MIN,
            switch_min: f64::MAX,
            closing: scale * dot(&self.open.drain, &cycle.end),
            closing_slope: scale * dot(&self.open.drain, &self.open.generator.apply(&cycle.end)),
            period_miss: cycle.miss,
        };
        for (at, (position, moment)) in [&self.closed, &self.open]
            .into_iter()
            .zip(&moments)
            .enumerate()
        {
            for (owner, ohm, current) in &position.resistors {
                let loss = ohm * power(current, moment);
                match owner {
                    Owner::Switch if at == 0 => unit.closed_switch += loss,
                    Owner::Switch => unit.open_switch += loss,
                    Owner::Feed => unit.feed += loss,
                    Owner::Rung(index) => unit.rungs[*index] += loss,
                    Owner::Load => unit.load += loss,
                }
            }
        }
        cycle.closed.extrema(
            &cycle.closing,
            &self.closed.drain,
            self.closed.grid_level,
            |_, v| {
                unit.switch_max = unit.switch_max.max(scale * v / self.switch_ohm);
                unit.switch_min = unit.switch_min.min(scale * v / self.switch_ohm);
                unit.drain_max = unit.drain_max.max(scale * v);
                unit.drain_min = unit.drain_min.min(scale * v);
            },
        );
        cycle.open.extrema(
            &cycle.opening,
            &self.open.drain,
            self.open.grid_level,
            |_, v| {
                unit.drain_max = unit.drain_max.max(scale * v);
                unit.drain_min = unit.drain_min.min(scale * v);
            },
        );
        Ok(unit)
    }

    fn samples(&self, drive: &Drive, points: usize) -> Result<Vec<UnitSample>, OrbitError> {
        let cycle = self.cycle(drive)?;
        let moments = [
            cycle.closed.second_moment(&cycle.closing),
            cycle.open.second_moment(&cycle.opening),
        ];
        let scale = self.choke_scale([&moments[0], &moments[1]])?;
        let mut samples = Vec::with_capacity(2 * points);
        let spans = [
            (
                &self.closed,
                drive.closing_rad,
                drive.width_rad,
                cycle.closing,
                1.0 / self.switch_ohm,
            ),
            (
                &self.open,
                drive.closing_rad + drive.width_rad,
                TAU - drive.width_rad,
                cycle.opening,
                0.0,
            ),
        ];
        for (position, from, length, start, conductance) in spans {
            let step = length / (points - 1) as f64;
            let flow = Flow::new(&position.generator, step, 0);
            let mut state = start;
            for index in 0..points {
                let drain = scale * dot(&position.drain, &state);
                samples.push(UnitSample {
                    angle_rad: from + index as f64 * step,
                    drain,
                    switch: drain * conductance,
                    load: scale * dot(&position.load, &state),
                });
                state = flow.end(&state);
            }
        }
        Ok(samples)
    }
}
