//! A piecewise-linear stage from rest into its orbit, and back with every switch left open, period by period.

use std::f64::consts::{PI, TAU};

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::gating::GateRun;
use super::network::OrbitError;
use super::schedule::Interval;
use super::sized::{Flows, Sized_};
use crate::math::small::{Column, dot};

impl<const N: usize> Sized_<N> {
    /// One period from `start`: phasor of the fundamental, power drawn at one volt, and the state at its end.
    fn period(&self, flows: &Flows<'_, N>, start: &Column<N>) -> ((Complex64, f64), Column<N>) {
        let (mut phasor, mut drawn) = (Complex64::ZERO, 0.0);
        let mut state = *start;
        let one = self.states;
        for (position, interval, flow) in &flows.spans {
            let end = flow.end(&state);
            let (from, to) = (interval.from_rad, interval.from_rad + interval.length_rad);
            let exposure = (Complex64::cis(-from) - Complex64::cis(-to)) / Complex64::I;
            let row = &position.harmonics[0];
            for i in 0..self.states {
                phasor -=
                    row[i] * (Complex64::cis(-to) * end[i] - Complex64::cis(-from) * state[i]);
            }
            phasor += row[one] * exposure;
            // The input of one stands beside the plain integral.
            let moment = flow.second_moment(&state);
            let integral: Column<N> = std::array::from_fn(|i| moment.0[i][one]);
            drawn += dot(&position.supply, &integral) / TAU;
            state = end;
        }
        ((phasor / PI, drawn), state)
    }

    /// What one period does to the state while every switch stays open; `None` where there is no such position.
    pub(super) fn gate_open_map(&self) -> Option<DMatrix<f64>> {
        let open = self.flows(&[OPEN]).ok()?;
        let (.., flow) = open.spans.first()?;
        Some(DMatrix::from_fn(self.states, self.states, |i, j| {
            let mut column = [0.0; N];
            column[j] = 1.0;
            flow.end(&column)[i]
        }))
    }

    /// `periods` of the schedule from rest, and then as many with every switch open; `None` with a choke, and where a switch
    /// is always closed.
    pub(super) fn gate_run(
        &self,
        schedule: &[Interval],
        periods: [usize; 2],
    ) -> Result<Option<GateRun>, OrbitError> {
        let Ok(position) = self.position(OPEN.closed) else {
            return Ok(None);
        };
        if !self.chokes.is_empty() || self.inputs != 1 {
            return Ok(None);
        }
        let flows = self.flows(schedule)?;
        let n = self.states;
        let mut forced = [0.0; N];
        for (entry, row) in forced.iter_mut().zip(&position.generator.0) {
            *entry = row[n];
        }
        let mut rest = position
            .generator
            .scaled(-1.0)
            .solve_leading(n, &forced)
            .ok_or(OrbitError::NeverSettles)?;
        for entry in &mut rest[n..] {
            *entry = 0.0;
        }
        rest[n] = 1.0;
        let closings = self.closings(&flows)?;
        let closing = closings.first().ok_or(OrbitError::NeverSettles)?;
        let run = |flows: &Flows<'_, N>, start: &Column<N>, count: usize| {
            let mut state = *start;
            let mut all = Vec::with_capacity(count);
            for _ in 0..count {
                let (figures, end) = self.period(flows, &state);
                all.push(figures);
                state = end;
            }
            all
        };
        let from_rad = schedule.first().map_or(0.0, |interval| interval.from_rad);
        let open = self.flows(&[Interval { from_rad, ..OPEN }])?;
        Ok(Some(GateRun {
            on: run(&flows, &rest, periods[0]),
            off: run(&open, closing, periods[1]),
            rest: dot(&position.supply, &rest),
            orbit: self.period(&flows, closing).0,
        }))
    }
}

/// A period with every switch open.
const OPEN: Interval = Interval {
    from_rad: 0.0,
    length_rad: TAU,
    closed: 0,
};
