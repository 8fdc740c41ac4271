//! A stage made ready to be solved again and again at different supplies and widths.

use std::f64::consts::TAU;

use super::balance::Orbit;
use super::circuit::Circuit;
use super::curved::Curved;
use super::equations::{Equations, contact_name};
use super::linear::{self, LinearSolver};
use super::schedule::{Interval, Span, schedule};
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
        "with {position} the network rings without loss exactly at harmonic {harmonic} of the carrier: give its parts a q"
    )]
    LosslessResonance {
        /// In words, such as `the switch open`.
        position: String,
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
    /// The two switches of a pair overlap.
    #[error("both switches of a pair would be closed at once")]
    ShootThrough,
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

/// What the solver and its user need to know of a linear network.
#[derive(Debug)]
pub(super) struct Linear {
    pub solver: Box<dyn LinearSolver>,
    /// What the contacts are called, where there are several.
    pub names: Vec<String>,
}

impl Linear {
    /// Prepares `circuit`.
    ///
    /// # Errors
    /// [`NetworkError`].
    pub fn new(circuit: Circuit) -> Result<Self, NetworkError> {
        let equations = Equations::new(circuit)?;
        let too_large = NetworkError::TooLarge {
            given: equations.states(),
        };
        let circuit = &equations.circuit;
        Ok(Self {
            solver: linear::solver(circuit, &equations.prepared()?).ok_or(too_large)?,
            names: (0..circuit.contacts.len())
                .map(|index| contact_name(circuit, index))
                .collect(),
        })
    }
}

/// When each switch of `stage` is closed: that to the supply first where there are two.
///
/// # Errors
/// [`OrbitError::OutOfRange`] where the dead time leaves a switch of a pair no time to be closed.
pub(super) fn spans(stage: &Stage, drive: &Drive) -> Result<Vec<Span>, OrbitError> {
    let whole = Span {
        closing_rad: drive.closing_rad,
        width_rad: drive.width_rad,
    };
    if !stage.is_pair() {
        return Ok(vec![whole]);
    }
    let dead_rad = TAU * stage.frequency_hz * stage.driver.dead_s;
    let pair = [
        (drive.closing_rad, drive.width_rad),
        (drive.closing_rad + drive.width_rad, TAU - drive.width_rad),
    ];
    let spans = pair.map(|(from, width)| Span {
        closing_rad: from + 0.5 * dead_rad,
        width_rad: width - dead_rad,
    });
    if spans.iter().any(|span| span.width_rad <= 0.0) {
        return Err(OrbitError::OutOfRange {
            what: "width",
            given: drive.duty(),
            allowed: "more than the dead time, and less than the period without it",
        });
    }
    Ok(spans.to_vec())
}

/// The intervals of one period of a linear `stage`.
pub(super) fn intervals(stage: &Stage, drive: &Drive) -> Result<Vec<Interval>, OrbitError> {
    Ok(schedule(&spans(stage, drive)?))
}

/// A stage's state equations for every position of its switches.
#[derive(Debug)]
pub struct Network {
    stage: Stage,
    model: Model,
}

#[derive(Debug)]
pub(super) enum Model {
    /// Linear between switching instants: solved exactly.
    Linear(Linear),
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

    /// The state equations in every position of the switches; `None` where the drain is curved.
    ///
    /// # Errors
    /// [`NetworkError`], as at construction.
    pub(crate) fn linear_equations(&self) -> Result<Option<Equations>, NetworkError> {
        match &self.model {
            Model::Linear(_) => Equations::new(Circuit::new(&self.stage)).map(Some),
            Model::Curved(_) => Ok(None),
        }
    }

    pub(super) fn model(&self) -> &Model {
        &self.model
    }

    /// Number of independent states.
    pub fn states(&self) -> usize {
        match &self.model {
            Model::Linear(linear) => linear.solver.states(),
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
            Model::Linear(linear) => {
                let found = intervals(&self.stage, drive)
                    .and_then(|intervals| linear.solver.period_map(&intervals));
                match found {
                    Ok(map) => map,
                    Err(_) => return f64::INFINITY,
                }
            }
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
        settling_s(&period_map, self.stage.period_s())
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
            Model::Linear(linear) => {
                let spans = spans(&self.stage, drive)?;
                let samples = linear.solver.samples(&schedule(&spans), points)?;
                Ok(Waveform::scaled(
                    &samples,
                    self.stage.period_s(),
                    self.stage.load.ohm,
                    supply_v,
                    &spans,
                    &linear.names,
                ))
            }
            Model::Curved(curved) => curved.waveform(&self.stage, supply_v, drive, points),
        }
    }
}

fn linear_model(stage: &Stage) -> Result<Linear, NetworkError> {
    Linear::new(Circuit::new(stage))
}

/// The time in which the slowest deviation falls to 1/e under `period_map`, s.
pub(super) fn settling_s(period_map: &nalgebra::DMatrix<f64>, period_s: f64) -> f64 {
    let multipliers = period_map.complex_eigenvalues();
    let largest = multipliers.iter().map(|m| m.norm()).fold(0.0, f64::max);
    // A radius of zero settles at once; one of 1 or more never does.
    if largest >= 1.0 {
        f64::INFINITY
    } else {
        -period_s / largest.ln()
    }
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
