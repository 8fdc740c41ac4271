//! The periodic steady state of a piecewise-linear stage, exactly.
//!
//! With `E` the product of the propagators of all intervals of the period, the state at its beginning solves
//! `(I - M) y = B u`, where `M` and `B` are the blocks of `E` that act on the state and on the constant
//! inputs. Fourier integrals are exact: from `dy/dt = A y + B u`,
//!
//! ```text
//! (jk - A) int y e^(-jkt) dt = B u int e^(-jkt) dt - [y e^(-jkt)]
//! ```
//!
//! Means and powers come from the exact second moment of the state ([`crate::math::flow::Flow::second_moment`]).

use std::fmt;

use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

use super::circuit::{Circuit, Owner};
use super::gating::GateRun;
use super::network::{HARMONICS, OrbitError};
use super::schedule::{Closed, Interval};
use super::sized::Sized_;

/// The most independent states a stage may have.
pub const MAX_STATES: usize = 23;

/// One position of the switches, sizes known at run time.
#[derive(Debug, Clone)]
pub struct Position {
    pub closed: Closed,
    pub a: DMatrix<f64>,
    pub b: DMatrix<f64>,
    pub legs: Vec<DVector<f64>>,
    pub load: DVector<f64>,
    pub supply: DVector<f64>,
    pub resistors: Vec<(Owner, f64, DVector<f64>)>,
    /// For each harmonic: the row that takes the state's boundary values, then what takes each input.
    pub harmonics: Vec<Vec<Complex64>>,
    /// Cycles of the fastest natural oscillation in one carrier period.
    pub cycles: f64,
}

/// What one contact does over the period.
#[derive(Debug, Clone, Copy)]
pub struct UnitContact {
    /// Mean of current squared times resistance.
    pub closed_loss: f64,
    pub open_loss: f64,
    /// Voltage across it, positive where current through it would come from the supply.
    pub across_max: f64,
    pub across_min: f64,
    /// Current while closed.
    pub current_max: f64,
    pub current_min: f64,
    /// Voltage across it just before it closes.
    pub closing: f64,
    /// Per radian.
    pub closing_slope: f64,
}

impl UnitContact {
    pub const UNSEEN: Self = Self {
        closed_loss: 0.0,
        open_loss: 0.0,
        across_max: f64::MIN,
        across_min: f64::MAX,
        current_max: f64::MIN,
        current_min: f64::MAX,
        closing: 0.0,
        closing_slope: 0.0,
    };
}

/// The orbit for one volt of supply, in normalised units: voltages in volts, currents times the load resistance.
#[derive(Debug, Clone)]
pub struct UnitOrbit {
    pub harmonics: [Complex64; HARMONICS],
    /// Power drawn from the supply.
    pub supply: f64,
    pub contacts: Vec<UnitContact>,
    pub feed: f64,
    pub rungs: Vec<f64>,
    pub load: f64,
    /// How far the state is from itself one period later, relative to its size.
    pub period_miss: f64,
}

/// One instant of a unit waveform.
#[derive(Debug, Clone)]
pub struct UnitSample {
    pub angle_rad: f64,
    pub legs: Vec<f64>,
    /// Current through each contact while closed, else 0.
    pub contacts: Vec<f64>,
    pub load: f64,
}

/// A network of some fixed size.
pub trait LinearSolver: fmt::Debug + Send + Sync {
    fn states(&self) -> usize;
    /// What one period does to a deviation of the state from its orbit.
    fn period_map(&self, schedule: &[Interval]) -> Result<DMatrix<f64>, OrbitError>;
    fn solve(&self, schedule: &[Interval]) -> Result<UnitOrbit, OrbitError>;
    /// What one period does to the state while every switch stays open; `None` where no such position is known.
    fn open_map(&self) -> Option<DMatrix<f64>>;
    /// From rest through `periods` of the schedule, and on with every switch open; `None` where that cannot be.
    fn gate(
        &self,
        schedule: &[Interval],
        periods: [usize; 2],
    ) -> Result<Option<GateRun>, OrbitError>;
    fn samples(&self, schedule: &[Interval], points: usize) -> Result<Vec<UnitSample>, OrbitError>;
}

/// A solver of the smallest size that holds the states and inputs of `positions`; `None` where no size does.
pub fn solver(circuit: &Circuit, positions: &[Position]) -> Option<Box<dyn LinearSolver>> {
    let (states, inputs) = positions.first()?.b.shape();
    macro_rules! smallest {
        ($($size:literal)*) => {
            $(if states + inputs <= $size {
                return Some(Box::new(Sized_::<$size>::new(circuit, positions)));
            })*
        };
    }
    smallest!(3 4 5 6 8 12 16 24);
    None
}
