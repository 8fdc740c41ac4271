//! The network as its drain sees it.
//!
//! States are scaled so that half their squares is energy; by reciprocity a current into the drain then moves
//! them along the drain's own row `e`: `y' = A y + b u + e i`, `v = e . y`. Turned so that the first axis lies
//! along `e`, the drain keeps one state and the rest is linear:
//!
//! ```text
//! q' = alpha v + a . x + beta u + i        q = charge of everything capacitive between drain and ground
//! x' = B x + c v + d u
//! ```
//!
//! Neither equation knows the capacitance any more: the charge may be any function of `v`.

use std::f64::consts::TAU;

use nalgebra::{DMatrix, DVector};

use super::circuit::{Circuit, Input, Owner};
use super::linear;
use super::network::NetworkError;
use super::reduce::{Contacts, Subspace, without_idle};
use crate::stage::Stage;

/// A quantity as a row over drain voltage, rest and input.
#[derive(Debug, Clone, PartialEq)]
pub struct Row {
    pub v: f64,
    pub x: Vec<f64>,
    pub u: f64,
}

impl Row {
    pub fn at(&self, v: f64, x: &[f64], u: f64) -> f64 {
        self.v * v + dot(&self.x, x) + self.u * u
    }
}

/// The sum of products.
pub fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// What the network is fed with.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Source {
    /// `u` is the supply voltage.
    Voltage,
    /// `u` is the choke's current, to be found; the normalised feed resistance.
    Choke(f64),
}

/// The linear rest of a stage.
#[derive(Debug, Clone)]
pub struct Port {
    /// Number of states in the rest.
    pub rest: usize,
    pub alpha: f64,
    pub a: Vec<f64>,
    pub beta: f64,
    /// Row by row.
    pub b: Vec<f64>,
    pub c: Vec<f64>,
    pub d: Vec<f64>,
    /// Capacitance that the ladder itself has between drain and ground.
    pub ladder_farad: f64,
    pub source: Source,
    /// Voltage across the load resistance.
    pub load: Row,
    /// Current drawn from the supply.
    pub supply: Row,
    /// Every resistor but the switch: owner, resistance, current.
    pub resistors: Vec<(Owner, f64, Row)>,
}

impl Port {
    pub fn new(stage: &Stage) -> Result<Self, NetworkError> {
        // Any capacitance makes the same port; one of the right size keeps rounding small.
        let mut stand_in = stage.clone();
        let per_farad = TAU * stage.frequency_hz * stage.load.ohm;
        let charge = super::charge::Charge::new(
            stage.drain_f + stage.gate_coupling_f,
            stage.drain_curve.as_ref(),
            1.0,
        );
        stand_in.drain_f = charge.at(stage.supply_v).1;
        let circuit = Circuit::new(&stand_in);
        let subspace = Subspace::of(&circuit).ok_or(NetworkError::Undetermined)?;
        let equations = |contacts| {
            subspace
                .equations(&circuit, contacts)
                .ok_or(NetworkError::Undetermined)
        };
        let both = vec![equations(Contacts::Absent)?, equations(Contacts::At(1))?];
        let both = without_idle(both).ok_or(NetworkError::Undetermined)?;
        let bare = both.first().ok_or(NetworkError::Undetermined)?;
        let states = bare.a.nrows();
        if states > linear::MAX_STATES || states == 0 {
            return Err(NetworkError::TooLarge { given: states });
        }
        let e = bare.legs[0].rows(0, states).into_owned();
        let size = e.norm();
        if !(size > 0.0 && size.is_finite()) || bare.legs[0][states].abs() > 1e-9 {
            return Err(NetworkError::Undetermined);
        }
        let turn = turned_to(&(&e / size));
        let a = turn.transpose() * &bare.a * &turn;
        let b = turn.transpose() * &bare.b;
        let rest = states - 1;
        let row = |dynamic: &DVector<f64>| {
            let head = turn.transpose() * dynamic.rows(0, states);
            Row {
                v: head[0] / size,
                x: head.iter().skip(1).copied().collect(),
                u: dynamic[states],
            }
        };
        let mut load = None;
        let mut resistors = Vec::new();
        for (owner, ohm, current) in &bare.resistors {
            let current = row(current);
            if *owner == Owner::Load {
                load = Some(Row {
                    v: current.v * ohm,
                    x: current.x.iter().map(|x| x * ohm).collect(),
                    u: current.u * ohm,
                });
            }
            resistors.push((*owner, *ohm, current));
        }
        let source = match &circuit.input {
            Input::Voltage(_) => Source::Voltage,
            Input::Current(chokes) => Source::Choke(chokes.iter().map(|choke| choke.ohm).sum()),
        };
        let supply = row(&bare.supply);
        Ok(Self {
            rest,
            alpha: a[(0, 0)] / (size * size),
            a: (0..rest).map(|j| a[(0, j + 1)] / size).collect(),
            beta: b[0] / size,
            b: (0..rest * rest)
                .map(|k| a[(k / rest + 1, k % rest + 1)])
                .collect(),
            c: (0..rest).map(|i| a[(i + 1, 0)] / size).collect(),
            d: (0..rest).map(|i| b[i + 1]).collect(),
            ladder_farad: (1.0 / (size * size) / per_farad - stand_in.drain_f).max(0.0),
            source,
            load: load.ok_or(NetworkError::Undetermined)?,
            supply,
            resistors,
        })
    }
}

/// An orthogonal matrix whose first column is `direction`, a unit vector.
fn turned_to(direction: &DVector<f64>) -> DMatrix<f64> {
    let n = direction.len();
    let sign = if direction[0] > 0.0 { -1.0 } else { 1.0 };
    let mut mirror = direction.clone();
    mirror[0] -= sign;
    let square = mirror.norm_squared();
    let mut turn = DMatrix::identity(n, n);
    if square > 0.0 {
        turn -= 2.0 / square * &mirror * mirror.transpose();
    }
    // The mirror takes the direction to sign times the first axis.
    for i in 0..n {
        turn[(i, 0)] *= sign;
    }
    turn
}
