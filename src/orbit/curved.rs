//! Orbits of curved stages: from a periodic state to the figures of an [`Orbit`].

use std::f64::consts::TAU;
use std::sync::Arc;

use num_complex::Complex64;

use super::balance::Orbit;
use super::device::Throw;
use super::engine::Engine;
use super::figures::{at_rest, orbit};
use super::gather::{Gathered, Gatherer};
use super::network::{Drive, OrbitError};
#[cfg(test)]
use super::period::Observe;
use super::period::{Nobody, Passed, Scales, Sensitivity, State, WORK_LIMIT};
use super::port::Port;
#[cfg(test)]
use super::port::Source;
use super::shooting::{self, Found};
use super::waveform::Waveform;
use crate::math::radau::{RADAU, STAGES, evaluate};
use crate::stage::Stage;

/// The supply, relative to the stage's, at which the limit towards zero is taken.
const VANISHING: f64 = 1e-9;

/// How often an orbit whose energy does not balance is solved again.
const REFINEMENTS: usize = 2;

/// The tolerance of its steps over the one before.
const FINER: f64 = 0.02;

/// A deviation that one period makes larger than this, relative to what it was, grows: rounding is left out.
const GROWING: f64 = 1.0 + 1e-6;

/// The port equations of a stage, ready for any drive.
#[derive(Debug)]
pub struct Curved {
    port: Arc<Port>,
}

/// One curved orbit: figures and the state they were taken from.
#[derive(Debug)]
pub struct Solved {
    pub orbit: Orbit,
    pub found: Found,
}

impl Solved {
    /// The largest eigenvalue in magnitude of the map of one period, a choke's current held.
    pub fn multiplier(&self) -> Complex64 {
        let multipliers = self.found.period_map.complex_eigenvalues();
        multipliers
            .iter()
            .copied()
            .max_by(|a, b| a.norm().total_cmp(&b.norm()))
            .unwrap_or_default()
    }

    /// Whether every small deviation dies out.
    pub fn is_stable(&self) -> bool {
        self.multiplier().norm() <= GROWING
    }

    /// Why it is no state that a stage stays in.
    pub fn unstable(&self) -> OrbitError {
        let multiplier = self.multiplier();
        OrbitError::Unstable {
            re: multiplier.re,
            im: multiplier.im,
        }
    }
}

impl Curved {
    /// # Errors
    /// [`super::NetworkError`].
    pub fn new(stage: &Stage) -> Result<Self, super::NetworkError> {
        Ok(Self {
            port: Arc::new(Port::new(stage)?),
        })
    }

    pub fn states(&self) -> usize {
        self.port.rest + 1
    }

    /// # Errors
    /// [`OrbitError::EdgesOverlap`].
    pub fn engine(&self, stage: &Stage, drive: &Drive) -> Result<Engine, OrbitError> {
        Engine::new(stage, Arc::clone(&self.port), drive)
    }

    /// Solves at `supply_v`, from `near` where that is given: a state that a deviation does not grow away from.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn solve(
        &self,
        stage: &Stage,
        engine: &mut Engine,
        supply_v: f64,
        drive: &Drive,
        near: Option<(State, Scales)>,
    ) -> Result<Solved, OrbitError> {
        let first = self.any(stage, engine, supply_v, drive, near)?;
        if first.is_stable() {
            return Ok(first);
        }
        if engine.work > WORK_LIMIT / 10 {
            return Err(first.unstable());
        }
        // Periodic, but nothing stays there: another one may be stable.
        let others = self.further(stage, engine, supply_v, drive, &first);
        let unstable = first.unstable();
        others.into_iter().find(Solved::is_stable).ok_or(unstable)
    }

    /// Every periodic state that a few different starts lead to, stable or not; the first is that of
    /// [`Curved::solve`] where that is stable.
    ///
    /// # Errors
    /// [`OrbitError`] of the first.
    pub fn solve_all(
        &self,
        stage: &Stage,
        engine: &mut Engine,
        supply_v: f64,
        drive: &Drive,
    ) -> Result<Vec<Solved>, OrbitError> {
        let first = self.any(stage, engine, supply_v, drive, None)?;
        let costly = engine.work > WORK_LIMIT / 10;
        let others = if costly {
            Vec::new()
        } else {
            self.further(stage, engine, supply_v, drive, &first)
        };
        Ok(std::iter::once(first).chain(others).collect())
    }

    /// A periodic state, stable or not. Where its energy does not balance, it is solved again with finer steps.
    fn any(
        &self,
        stage: &Stage,
        engine: &mut Engine,
        supply_v: f64,
        drive: &Drive,
        near: Option<(State, Scales)>,
    ) -> Result<Solved, OrbitError> {
        let usual = engine.tolerance;
        let mut near = near;
        let mut left = REFINEMENTS;
        let solved = loop {
            let mut gatherer = Gatherer::new(&self.port, engine.device(), drive.closing_rad);
            let found = shooting::find(
                engine,
                effective_supply_v(stage, supply_v),
                least_scale_v(stage, engine),
                near.take(),
                &mut gatherer,
            );
            let found = match found {
                Ok(found) => found,
                Err(error) => break Err(error),
            };
            let start = (found.state.clone(), found.scales);
            match self.figures(stage, engine, supply_v, drive, found, gatherer.sums) {
                Err(OrbitError::Unbalanced { .. }) if left > 0 => {
                    left -= 1;
                    engine.tolerance *= FINER;
                    near = Some(start);
                }
                solved => break solved,
            }
        };
        engine.tolerance = usual;
        solved
    }

    /// Periodic states apart from `first` that other starts lead to.
    fn further(
        &self,
        stage: &Stage,
        engine: &mut Engine,
        supply_v: f64,
        drive: &Drive,
        first: &Solved,
    ) -> Vec<Solved> {
        let scales = first.found.scales;
        let nominal = first.found.state.clone();
        let scaled = |factor: f64| State {
            v: nominal.v * factor,
            q: nominal.q * factor,
            x: nominal.x.iter().map(|x| x * factor).collect(),
            u: nominal.u * factor,
        };
        let mut starts: Vec<State> = [0.0, 0.3, 3.0, -1.0].map(scaled).to_vec();
        // The orbits of a quarter and of four times the supply.
        for factor in [0.25, 4.0] {
            let supply = effective_supply_v(stage, supply_v * factor);
            let least = least_scale_v(stage, engine);
            if let Ok(found) = shooting::find(engine, supply, least, None, &mut Nobody) {
                starts.push(found.state);
            }
        }
        let supply = effective_supply_v(stage, supply_v);
        let mut all: Vec<Solved> = Vec::new();
        for state in starts {
            let mut gatherer = Gatherer::new(&self.port, engine.device(), drive.closing_rad);
            let found = shooting::find_from(engine, supply, state, scales, &mut gatherer);
            let Ok(found) = found else {
                continue;
            };
            let known = std::iter::once(first).chain(&all).any(|solved| {
                let (a, b) = (&solved.found.state, &found.state);
                let apart =
                    a.x.iter()
                        .zip(&b.x)
                        .map(|(a, b)| (a - b).abs() / scales.x)
                        .fold((a.q - b.q).abs() / scales.q, f64::max);
                apart < 1e-5
            });
            if known {
                continue;
            }
            if let Ok(solved) = self.figures(stage, engine, supply_v, drive, found, gatherer.sums) {
                all.push(solved);
            }
        }
        all
    }

    fn figures(
        &self,
        stage: &Stage,
        engine: &mut Engine,
        supply_v: f64,
        drive: &Drive,
        found: Found,
        mut sums: Gathered,
    ) -> Result<Solved, OrbitError> {
        sums.sharpen(engine, &found.scales);
        let slope = engine.slope_before_closing(&found.end);
        let orbit = orbit(
            stage,
            &self.port,
            engine,
            &sums,
            &found.end,
            slope,
            effective_supply_v(stage, supply_v),
            drive,
        )?;
        let orbit = if supply_v == 0.0 && stage.gate_coupling_f == 0.0 {
            at_rest(orbit)
        } else {
            orbit
        };
        Ok(Solved { orbit, found })
    }

    /// One period of waveforms, `points` instants in each position of the switch.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn waveform(
        &self,
        stage: &Stage,
        supply_v: f64,
        drive: &Drive,
        points: usize,
    ) -> Result<Waveform, OrbitError> {
        let mut engine = self.engine(stage, drive)?;
        let supply = effective_supply_v(stage, supply_v);
        let least = least_scale_v(stage, &engine);
        let found = shooting::find(&mut engine, supply, least, None, &mut Nobody)?;
        let port = Arc::clone(&self.port);
        let device = engine.device().clone();
        let spans = [
            (0.0, drive.width_rad),
            (drive.width_rad, TAU - drive.width_rad),
        ];
        let instant = |index: usize| {
            let (from, length) = spans[index / points];
            from + length * (index % points) as f64 / (points - 1) as f64
        };
        let mut next = 0;
        let mut samples: Vec<[f64; 4]> = Vec::with_capacity(2 * points);
        engine
            .run(
                &found.state,
                &found.scales,
                Some(&found.mesh),
                Sensitivity::Left,
                &mut |passed: &Passed<'_>| {
                    let throw_of = |index: usize| {
                        if index < points {
                            Throw::Closed
                        } else {
                            Throw::Open
                        }
                    };
                    let h = passed.step.length;
                    let start = &passed.start;
                    let mut loads = [0.0; STAGES];
                    let mut x = vec![0.0; port.rest];
                    for (i, load) in loads.iter_mut().enumerate() {
                        passed
                            .step
                            .rest_at(i, start.x, &passed.solved.v, start.u, &mut x);
                        *load = port.load.at(passed.solved.v[i], &x, start.u);
                    }
                    let load_start = port.load.at(start.v, start.x, start.u);
                    let v_poly = RADAU.polynomial(start.v, &passed.solved.v);
                    let load_poly = RADAU.polynomial(load_start, &loads);
                    while next < 2 * points
                        && throw_of(next) == passed.throw
                        && instant(next) <= passed.from + h * (1.0 + 1e-9) + 1e-12
                    {
                        let theta = ((instant(next) - passed.from) / h).clamp(0.0, 1.0);
                        let v = evaluate(start.v, &v_poly, theta).0;
                        samples.push([
                            instant(next),
                            v,
                            device.current(passed.throw, passed.side, v).0,
                            evaluate(load_start, &load_poly, theta).0,
                        ]);
                        next += 1;
                    }
                },
            )
            .map_err(|_| OrbitError::Diverged)?;
        let size = if supply_v == 0.0 && stage.gate_coupling_f == 0.0 {
            0.0
        } else {
            1.0
        };
        let period_s = stage.period_s();
        let time = |angle_rad: f64| angle_rad / TAU * period_s;
        let column = |at: usize, scale: f64| samples.iter().map(|s| s[at] * scale).collect();
        Ok(Waveform {
            period_s,
            closed_s: (
                time(drive.closing_rad),
                time(drive.closing_rad + drive.width_rad),
            ),
            time_s: samples
                .iter()
                .map(|s| time(drive.closing_rad + s[0]))
                .collect(),
            drain_v: column(1, size),
            switch_a: column(2, size / stage.load.ohm),
            load_v: column(3, size),
            others: Vec::new(),
        })
    }

    /// The brute-force twin: `periods` periods from rest, then the figures. A choke's current is set beforehand.
    #[cfg(test)]
    pub fn settled(
        &self,
        stage: &Stage,
        supply_v: f64,
        drive: &Drive,
        periods: usize,
    ) -> Result<Orbit, OrbitError> {
        let mut engine = self.engine(stage, drive)?;
        let least = least_scale_v(stage, &engine);
        let u = match self.port.source {
            Source::Voltage => supply_v,
            Source::Choke(_) => {
                let found = shooting::find(&mut engine, supply_v, least, None, &mut Nobody)?;
                found.state.u
            }
        };
        engine.work = 0;
        let rest = State {
            v: 0.0,
            q: 0.0,
            x: vec![0.0; self.port.rest],
            u,
        };
        let size = least.max(supply_v);
        let scales = Scales {
            v: size,
            q: engine.charge(size).0,
            x: size,
        };
        let state = shooting::settle(&mut engine, rest, scales, periods)?;
        let mut gatherer = Gatherer::new(&self.port, engine.device(), drive.closing_rad);
        let period = engine
            .run(&state, &scales, None, Sensitivity::Left, &mut |passed| {
                gatherer.step(passed);
            })
            .map_err(|_| OrbitError::Diverged)?;
        let found = Found {
            state,
            scales: period.peaks,
            mesh: period.mesh,
            period_map: nalgebra::DMatrix::zeros(0, 0),
            end: period.end,
        };
        Ok(self
            .figures(stage, &mut engine, supply_v, drive, found, gatherer.sums)?
            .orbit)
    }
}

/// Without gate coupling everything vanishes with the supply, and ratios have a limit.
fn effective_supply_v(stage: &Stage, supply_v: f64) -> f64 {
    if stage.gate_coupling_f > 0.0 {
        supply_v
    } else {
        supply_v.max(VANISHING * stage.supply_v)
    }
}

/// A voltage that the drain reaches without any supply.
fn least_scale_v(stage: &Stage, engine: &Engine) -> f64 {
    let Some(gate) = stage.driver.gate else {
        return 0.0;
    };
    let coupling = TAU * stage.frequency_hz * stage.gate_coupling_f * stage.load.ohm;
    0.3 * gate.swing_v * coupling / engine.charge(0.0).1
}
