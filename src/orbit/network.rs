//! A stage made ready to be solved again and again at different supplies and widths.

use std::f64::consts::{PI, TAU};

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::balance::Orbit;
use super::circuit::{Circuit, Input, Owner};
use super::curved::Curved;
use super::linear::{self, LinearSolver, Position};
use super::reduce::{Reduced, Subspace, without_idle};
use super::tracker::Tracker;
use super::waveform::Waveform;
use crate::stage::{Anchor, Driver, Stage};

/// How many harmonics of the load voltage are kept, the fundamental included.
pub const HARMONICS: usize = 5;

/// Why a stage has no state equations.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum NetworkError {
    /// Contradictory or undetermined connections.
    #[error(
        "the ladder leaves a voltage or current undetermined: look for parts that short or isolate a node"
    )]
    Undetermined,
    /// More states than the solver takes.
    #[error(
        "the stage has {given} inductors and capacitors after merging; at most {} are allowed",
        linear::MAX_STATES
    )]
    TooLarge {
        /// Independent states.
        given: usize,
    },
    /// A lossless resonance exactly on a harmonic, which would never settle.
    #[error(
        "with the switch {position} the network rings without loss exactly at harmonic {harmonic} of the carrier: give its parts a q"
    )]
    LosslessResonance {
        /// `closed` or `open`.
        position: &'static str,
        /// 1 is the carrier.
        harmonic: usize,
    },
}

/// Why a stage has no orbit.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum OrbitError {
    /// Supply or width out of range.
    #[error("{what} {given} is out of range: allowed {allowed}")]
    OutOfRange {
        /// Which control.
        what: &'static str,
        /// As given.
        given: f64,
        /// In words.
        allowed: &'static str,
    },
    /// One period leaves a part of the state as it was: it never settles.
    #[error(
        "the stage has no unique periodic state: something in it never settles (a lossless resonance, or a blocked direct current)"
    )]
    NeverSettles,
    /// Newton's method and every detour around it failed.
    #[error("no periodic state was found: the solution diverged from every start")]
    Diverged,
    /// The work limit was reached.
    #[error("no periodic state was found within the work limit of {work} steps")]
    RanOut {
        /// The limit.
        work: u64,
    },
    /// Periodic states were found, but a small deviation from each of them grows.
    #[error(
        "unstable: the stage would not stay in the periodic state that was found; a small deviation is multiplied by {re:.3}{im:+.3}j every period{}",
        kind_of_growth(*.re, *.im)
    )]
    Unstable {
        /// Real part of the largest multiplier of a period.
        re: f64,
        /// Its imaginary part.
        im: f64,
    },
    /// The gate's edges take longer than the switch stays in one position.
    #[error(
        "half the gate's rise and fall take {edges_s:.3e} s, but the switch stays closed or open for only {shortest_s:.3e} s"
    )]
    EdgesOverlap {
        /// Half of rise and fall, s.
        edges_s: f64,
        /// The shorter of the closed and the open interval, s.
        shortest_s: f64,
    },
    /// The energy balance does not close.
    #[error(
        "the energy balance is off by {residual:.1e} of the power that flows; at most {allowed:.0e} is accepted"
    )]
    Unbalanced {
        /// Relative to the power that flows.
        residual: f64,
        /// The tolerance.
        allowed: f64,
    },
}

/// What the multiplier of a growing deviation tells: at -1 and beyond it changes sign every period.
fn kind_of_growth(re: f64, im: f64) -> &'static str {
    if re < 0.0 && im.abs() <= 1e-6 * re.abs() {
        ", which leads to a period of two carrier cycles or longer"
    } else if im != 0.0 {
        ", which leads to a slow beat over the carrier"
    } else {
        ""
    }
}

/// When the switch is closed, as angles of the carrier. Angle 0 is the middle of the closed interval at full width.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Drive {
    /// Where the switch closes, rad.
    pub closing_rad: f64,
    /// How long it stays closed, rad, more than 0 and less than 2 pi.
    pub width_rad: f64,
}

impl Drive {
    /// The drive of `driver` with its width changed to `duty` of the period.
    pub fn new(driver: &Driver, duty: f64) -> Self {
        let (full, width) = (TAU * driver.duty, TAU * duty);
        let closing_rad = match driver.anchor {
            Anchor::Leading => -full / 2.0,
            Anchor::Centre => -width / 2.0,
            Anchor::Trailing => full / 2.0 - width,
        };
        Self {
            closing_rad,
            width_rad: width,
        }
    }

    /// Closed fraction of the period.
    pub fn duty(&self) -> f64 {
        self.width_rad / TAU
    }
}

/// A stage's state equations for both positions of its switch.
#[derive(Debug)]
pub struct Network {
    stage: Stage,
    model: Model,
}

#[derive(Debug)]
pub(super) enum Model {
    /// Linear between switching instants: solved exactly.
    Linear(Box<dyn LinearSolver>),
    /// Anything else about the drain: integrated.
    Curved(Curved),
}

impl Network {
    /// The state equations of `stage`.
    ///
    /// # Errors
    /// [`NetworkError`].
    pub fn new(stage: &Stage) -> Result<Self, NetworkError> {
        let model = if stage.is_curved() {
            Model::Curved(Curved::new(stage)?)
        } else {
            Model::Linear(linear_model(stage)?)
        };
        Ok(Self {
            stage: stage.clone(),
            model,
        })
    }

    /// The stage it was made of.
    pub fn stage(&self) -> &Stage {
        &self.stage
    }

    pub(super) fn model(&self) -> &Model {
        &self.model
    }

    /// Number of independent states.
    pub fn states(&self) -> usize {
        match &self.model {
            Model::Linear(solver) => solver.states(),
            Model::Curved(curved) => curved.states(),
        }
    }

    /// The periodic steady state at `supply_v` with `drive`. For many of them use a [`Tracker`].
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn orbit(&self, supply_v: f64, drive: &Drive) -> Result<Orbit, OrbitError> {
        Tracker::new(self).orbit(supply_v, drive)
    }

    /// Every periodic steady state that a few different starts lead to and that is stable: one where the stage is
    /// linear, and nearly always elsewhere. The first is that of [`Network::orbit`]. With them the number of further
    /// periodic states that are not stable, which no stage stays in.
    ///
    /// # Errors
    /// [`OrbitError`]; [`OrbitError::Unstable`] where none is stable.
    pub fn orbits(&self, supply_v: f64, drive: &Drive) -> Result<(Vec<Orbit>, usize), OrbitError> {
        match &self.model {
            Model::Linear(_) => Ok((vec![self.orbit(supply_v, drive)?], 0)),
            Model::Curved(curved) => {
                check(supply_v, drive)?;
                let mut engine = curved.engine(&self.stage, drive)?;
                let all = curved.solve_all(&self.stage, &mut engine, supply_v, drive)?;
                let (stable, unstable): (Vec<_>, Vec<_>) =
                    all.into_iter().partition(|solved| solved.is_stable());
                match unstable.first() {
                    Some(first) if stable.is_empty() => Err(first.unstable()),
                    _ => {
                        let orbits = stable.into_iter().map(|solved| solved.orbit).collect();
                        Ok((orbits, unstable.len()))
                    }
                }
            }
        }
    }

    /// The time in which a deviation from the orbit falls to 1/e, s: `-T / ln(rho)` with the spectral radius
    /// of one period. A map is right for controls that move slowly against it. A curved stage is taken at its
    /// own supply; one without an orbit there never settles.
    pub fn settling_s(&self, drive: &Drive) -> f64 {
        let period_map = match &self.model {
            Model::Linear(solver) => solver.period_map(drive),
            Model::Curved(curved) => {
                let found = curved.engine(&self.stage, drive).and_then(|mut engine| {
                    let supply_v = self.stage.supply_v;
                    curved.solve(&self.stage, &mut engine, supply_v, drive, None)
                });
                match found {
                    Ok(solved) => solved.found.period_map,
                    Err(_) => return f64::INFINITY,
                }
            }
        };
        let multipliers = period_map.complex_eigenvalues();
        let largest = multipliers.iter().map(|m| m.norm()).fold(0.0, f64::max);
        // A radius of zero settles at once; one of 1 or more never does.
        if largest >= 1.0 {
            f64::INFINITY
        } else {
            -self.stage.period_s() / largest.ln()
        }
    }

    /// One period of waveforms in the periodic steady state, `points` instants in each switch position.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn waveform(
        &self,
        supply_v: f64,
        drive: &Drive,
        points: usize,
    ) -> Result<Waveform, OrbitError> {
        check(supply_v, drive)?;
        let points = points.max(2);
        match &self.model {
            Model::Linear(solver) => {
                let samples = solver.samples(drive, points)?;
                Ok(Waveform::scaled(&samples, &self.stage, supply_v, drive))
            }
            Model::Curved(curved) => curved.waveform(&self.stage, supply_v, drive, points),
        }
    }
}

fn linear_model(stage: &Stage) -> Result<Box<dyn LinearSolver>, NetworkError> {
    let circuit = Circuit::new(stage);
    let subspace = Subspace::of(&circuit).ok_or(NetworkError::Undetermined)?;
    let per_load = |ohm: f64| ohm.is_finite().then_some(ohm / stage.load.ohm);
    let equations = |ohm| {
        subspace
            .equations(&circuit, ohm)
            .ok_or(NetworkError::Undetermined)
    };
    let closed = equations(per_load(stage.switch.closed_ohm))?;
    let open = equations(per_load(stage.switch.open_ohm))?;
    let [closed, open] = without_idle(closed, open)
        .filter(|[closed, _]| closed.a.nrows() > 0)
        .ok_or(NetworkError::Undetermined)?;
    let positions = [position(&closed, "closed")?, position(&open, "open")?];
    let choke_ohm = match circuit.input {
        Input::Voltage(_) => None,
        Input::Current(_) => Some(circuit.choke_ohm),
    };
    let switch_ohm = stage.switch.closed_ohm / stage.load.ohm;
    let states = closed.a.nrows();
    linear::solver(states, positions, choke_ohm, switch_ohm)
        .ok_or(NetworkError::TooLarge { given: states })
}

pub(super) fn check(supply_v: f64, drive: &Drive) -> Result<(), OrbitError> {
    if !supply_v.is_finite() || supply_v < 0.0 {
        let allowed = "0 V or more";
        return Err(OrbitError::OutOfRange {
            what: "supply",
            given: supply_v,
            allowed,
        });
    }
    let duty = drive.duty();
    if !(duty > 1e-6 && duty < 1.0 - 1e-6 && drive.closing_rad.is_finite()) {
        let allowed = "more than 0 and less than 1";
        return Err(OrbitError::OutOfRange {
            what: "width",
            given: duty,
            allowed,
        });
    }
    Ok(())
}

/// Everything about one switch position that does not depend on supply or width.
fn position(reduced: &Reduced, name: &'static str) -> Result<Position, NetworkError> {
    let load = reduced
        .resistors
        .iter()
        .find(|(owner, ..)| *owner == Owner::Load)
        .map(|(_, ohm, row)| row * *ohm)
        .ok_or(NetworkError::Undetermined)?;
    let states = reduced.a.nrows();
    let mut harmonics = Vec::with_capacity(HARMONICS);
    for harmonic in 1..=HARMONICS {
        // r (jk - A) = load row: the transpose is solved for.
        let order = Complex64::new(0.0, harmonic as f64);
        let system = DMatrix::from_fn(states, states, |i, j| {
            let diagonal = if i == j { order } else { Complex64::ZERO };
            diagonal - reduced.a[(j, i)]
        });
        let right = load.rows(0, states).map(Complex64::from);
        let size = right.amax_or_zero();
        let row = system.lu().solve(&right).filter(|row| {
            row.iter()
                .all(|x| x.is_finite() && x.norm() < 1e12 * size.max(1e-30))
        });
        let row = row.ok_or(NetworkError::LosslessResonance {
            position: name,
            harmonic,
        })?;
        let forced: Complex64 = row
            .iter()
            .zip(reduced.b.iter())
            .map(|(r, b)| r * b)
            .sum::<Complex64>()
            + load[states];
        harmonics.push((row.iter().copied().collect(), forced));
    }
    let fastest = reduced
        .a
        .complex_eigenvalues()
        .iter()
        .map(|e| e.im.abs())
        .fold(0.0, f64::max);
    Ok(Position {
        a: reduced.a.clone(),
        b: reduced.b.clone(),
        drain: reduced.drain.clone(),
        load,
        supply: reduced.supply.clone(),
        resistors: reduced.resistors.clone(),
        harmonics,
        cycles: fastest * TAU / (2.0 * PI),
    })
}

trait AmaxOrZero {
    fn amax_or_zero(&self) -> f64;
}

impl AmaxOrZero for nalgebra::DVector<Complex64> {
    fn amax_or_zero(&self) -> f64 {
        self.iter().map(|x| x.norm()).fold(0.0, f64::max)
    }
}
