//! From interval to interval through one carrier cycle.

use std::f64::consts::{PI, TAU};

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::edges::Interval;
use super::error::ReplayError;
use super::forms::SupplyIntegrals;
use super::topology::{POWERS, Topology};
use super::{Account, MAX_HARMONICS, Setup};
use crate::math::small::Column;
use crate::orbit::Reduced;

/// What one cycle gave, in normalised units.
#[derive(Debug, Clone, Copy, Default)]
pub struct Walked {
    pub outputs: [Complex64; MAX_HARMONICS],
    pub tilt: Complex64,
    pub supply: f64,
    pub powers: [f64; POWERS],
}

/// A stage of some fixed size at work.
pub trait Walk: std::fmt::Debug + Send + Sync {
    fn states(&self) -> usize;
    fn topologies(&self) -> usize;
    /// Condition numbers of the eigenvectors, where the modal form is used.
    fn conditions(&self) -> Vec<Option<f64>>;
    /// One cycle onwards, the input moving linearly.
    fn advance(&mut self, input: [f64; 2], intervals: &[Interval]) -> Walked;
    fn rest(&mut self);
    /// The orbit of a constant input of this size.
    fn settle(&mut self, input: f64, intervals: &[Interval]) -> Result<(), ReplayError>;
    /// What a cycle does to a deviation.
    fn period_map(&self, intervals: &[Interval]) -> DMatrix<f64>;
    fn stored(&self) -> f64;
    fn clone_box(&self) -> Box<dyn Walk>;
}

/// A stage of up to `M - 2` states.
#[derive(Debug, Clone)]
pub struct Walker<const M: usize> {
    states: usize,
    topologies: Vec<Topology<M>>,
    account: Account,
    harmonics: usize,
    z: Column<M>,
}

impl<const M: usize> Walker<M> {
    pub fn new(equations: &[Reduced], setup: &Setup, choke: bool) -> Result<Self, ReplayError> {
        let states = equations.first().map_or(0, |reduced| reduced.a.nrows());
        if states + 2 > M {
            return Err(ReplayError::TooLarge {
                given: states,
                allowed: M - 2,
            });
        }
        Ok(Self {
            states,
            topologies: equations
                .iter()
                .map(|reduced| Topology::new(reduced, setup, choke))
                .collect::<Result<_, _>>()?,
            account: setup.account,
            harmonics: setup.harmonics.clamp(1, MAX_HARMONICS),
            z: [0.0; M],
        })
    }

    /// The state alone.
    fn propagate(&self, z: &Column<M>, intervals: &[Interval]) -> Column<M> {
        let mut z = *z;
        for interval in intervals {
            if let Some(topology) = self.topologies.get(interval.topology) {
                z = topology.propagator.advance(&z, interval.length_rad);
            }
        }
        z
    }
}

impl<const M: usize> Walk for Walker<M> {
    fn states(&self) -> usize {
        self.states
    }

    fn topologies(&self) -> usize {
        self.topologies.len()
    }

    fn conditions(&self) -> Vec<Option<f64>> {
        let all = self.topologies.iter();
        all.map(|topology| topology.propagator.condition())
            .collect()
    }

    #[inline]
    fn advance(&mut self, input: [f64; 2], intervals: &[Interval]) -> Walked {
        let slope = (input[1] - input[0]) / TAU;
        let mut z = self.z;
        z[self.states] = input[0];
        z[self.states + 1] = slope;
        let mut walked = Walked::default();
        let mut outputs = [(0.0, 0.0); MAX_HARMONICS];
        let mut tilt = (0.0, 0.0);
        let (mut angle, mut turn) = (0.0f64, Complex64::ONE);
        let last = intervals.len().saturating_sub(1);
        for (index, interval) in intervals.iter().enumerate() {
            let Some(topology) = self.topologies.get(interval.topology) else {
                continue;
            };
            let length = interval.length_rad;
            let end = topology.propagator.advance(&z, length);
            let from = angle;
            angle += length;
            let end_turn = if index == last {
                Complex64::ONE
            } else {
                let (sin, cos) = angle.sin_cos();
                Complex64::new(cos, -sin)
            };
            let before = topology.at(&z, z[self.states], slope);
            let after = topology.at(&end, end[self.states], slope);
            for (ends, at, turn, sign) in
                [(&before, from, turn, 1.0), (&after, angle, end_turn, -1.0)]
            {
                let [re, im] = ends.output;
                let (re, im) = (
                    sign * (re * turn.re - im * turn.im),
                    sign * (re * turn.im + im * turn.re),
                );
                outputs[0].0 += re;
                outputs[0].1 += im;
                let [own_re, own_im] = ends.tilt;
                tilt.0 += at * re + sign * (own_re * turn.re - own_im * turn.im);
                tilt.1 += at * im + sign * (own_re * turn.im + own_im * turn.re);
            }
            if self.harmonics > 1 {
                let (mut from, mut to) = (turn, end_turn);
                let higher = outputs.iter_mut().take(self.harmonics).skip(1);
                for (above, output) in higher.enumerate() {
                    (from, to) = (from * turn, to * end_turn);
                    let sum =
                        topology.higher_at(above, &z) * from - topology.higher_at(above, &end) * to;
                    output.0 += sum.re;
                    output.1 += sum.im;
                }
            }
            if self.account != Account::Envelope {
                let integrals = SupplyIntegrals::new(z[self.states], slope, length);
                walked.supply += after.energy[0] - before.energy[0] + after.energy[1]
                    - before.energy[1]
                    + topology.supply_rest(&integrals)
                    + topology.powers(&z, &end, &integrals, length, &mut walked.powers);
            }
            (z, turn) = (end, end_turn);
        }
        self.z = z;
        for (to, (re, im)) in walked.outputs.iter_mut().zip(outputs) {
            *to = Complex64::new(re / PI, im / PI);
        }
        walked.tilt = Complex64::new(tilt.0, tilt.1) / (PI * TAU);
        walked
    }

    fn rest(&mut self) {
        self.z = [0.0; M];
    }

    fn settle(&mut self, input: f64, intervals: &[Interval]) -> Result<(), ReplayError> {
        let n = self.states;
        let mut forced = [0.0; M];
        forced[n] = 1.0;
        let forced = self.propagate(&forced, intervals);
        let system = DMatrix::identity(n, n) - self.period_map(intervals);
        let state = system
            .lu()
            .solve(&DVector::from_column_slice(&forced[..n]))
            .filter(|state| state.iter().all(|x| x.abs() < 1e9))
            .ok_or(ReplayError::NeverSettles)?;
        self.z = [0.0; M];
        for i in 0..n {
            self.z[i] = input * state[i];
        }
        Ok(())
    }

    fn period_map(&self, intervals: &[Interval]) -> DMatrix<f64> {
        let mut map = DMatrix::zeros(self.states, self.states);
        for column in 0..self.states {
            let mut one = [0.0; M];
            one[column] = 1.0;
            let end = self.propagate(&one, intervals);
            for row in 0..self.states {
                map[(row, column)] = end[row];
            }
        }
        map
    }

    fn stored(&self) -> f64 {
        0.5 * self.z[..self.states].iter().map(|x| x * x).sum::<f64>()
    }

    fn clone_box(&self) -> Box<dyn Walk> {
        Box::new(self.clone())
    }
}
