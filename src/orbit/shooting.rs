//! The periodic state of a curved stage: Newton's method on the map of one period.
//!
//! Unknown are charge and rest at the closing instant, and the choke's current where there is a choke, whose
//! condition is that the mean drain voltage and the drop across the feed add up to the supply. Sensitivities are
//! those of the steps taken, so that convergence is quadratic once the steps no longer change: they are frozen when
//! the state is close.

use nalgebra::{DMatrix, DVector};

use super::correction::{apply, correction, relative_size, residual_parts, residual_size};
use super::engine::Engine;
use super::network::OrbitError;
use super::period::{Mesh, Observe, Period, Scales, Sensitivity, State, Stop};
use super::port::Source;

/// Newton steps before giving up.
const MAX_NEWTON: usize = 24;

/// The correction after which the state should be periodic, relative to the scales: convergence is quadratic.
const CLOSE: f64 = 1e-7;

/// How far the rest may be from itself one period later, relative to its scale.
const PERIODIC: f64 = 1e-11;

/// The same for the charge. It moves on and off by at least twice its scale, so that this keeps the promise of 1e-12.
const PERIODIC_CHARGE: f64 = 1.5e-12;

/// The correction below which steps are frozen.
const FREEZE: f64 = 1e-2;

/// The estimated error of frozen steps over the tolerance that is still accepted.
const COARSE: f64 = 8.0;

/// Periods of plain settling where Newton's method and every detour failed.
const SETTLING: usize = 60;

/// A periodic state.
#[derive(Debug, Clone)]
pub struct Found {
    pub state: State,
    pub scales: Scales,
    pub mesh: Mesh,
    /// What one period does to a deviation of charge and rest.
    pub period_map: DMatrix<f64>,
    /// The state one period later.
    pub end: State,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Fail {
    Singular,
    Diverged,
    RanOut,
}

impl From<Stop> for Fail {
    fn from(stop: Stop) -> Self {
        match stop {
            Stop::RanOut => Self::RanOut,
            Stop::NoStep => Self::Diverged,
        }
    }
}

impl From<Fail> for OrbitError {
    fn from(fail: Fail) -> Self {
        match fail {
            Fail::Singular => Self::NeverSettles,
            Fail::Diverged => Self::Diverged,
            Fail::RanOut => Self::RanOut {
                work: super::period::WORK_LIMIT,
            },
        }
    }
}

/// Finds the periodic state at `supply_v`, from `near` where that is given, else from the straight stand-in.
///
/// # Errors
/// [`OrbitError::NeverSettles`], [`OrbitError::Diverged`], [`OrbitError::RanOut`].
pub fn find(
    engine: &mut Engine,
    supply_v: f64,
    least_scale_v: f64,
    near: Option<(State, Scales)>,
    observer: &mut dyn Observe,
) -> Result<Found, OrbitError> {
    engine.work = 0;
    engine.blend = 1.0;
    if let Some((state, scales)) = near {
        match newton(engine, state, scales, supply_v, observer) {
            Ok(found) => return Ok(found),
            Err(Fail::RanOut) => return Err(Fail::RanOut.into()),
            Err(_) => {}
        }
    }
    let (state, scales) = straight(engine, supply_v, least_scale_v)?;
    let failed = match newton(engine, state.clone(), scales, supply_v, observer) {
        Ok(found) => return Ok(found),
        Err(Fail::RanOut) => return Err(Fail::RanOut.into()),
        Err(fail) => fail,
    };
    if let Some(found) = bend(engine, state.clone(), scales, supply_v, observer)? {
        return Ok(found);
    }
    engine.blend = 1.0;
    let settled = settle(engine, state, scales, SETTLING)?;
    match newton(engine, settled, scales, supply_v, observer) {
        Ok(found) => Ok(found),
        Err(Fail::RanOut) => Err(Fail::RanOut.into()),
        // The first attempt's reason says most.
        Err(_) => Err(failed.into()),
    }
}

/// The orbit near `state`, for a search of further solutions.
///
/// # Errors
/// As [`find`].
pub fn find_from(
    engine: &mut Engine,
    supply_v: f64,
    mut state: State,
    scales: Scales,
    observer: &mut dyn Observe,
) -> Result<Found, OrbitError> {
    engine.work = 0;
    engine.blend = 1.0;
    engine.settle_voltage(&mut state);
    Ok(newton(engine, state, scales, supply_v, observer)?)
}

/// The stage with a fixed capacitance, a straight switch and no diode: linear, so one Newton step from rest.
fn straight(
    engine: &mut Engine,
    supply_v: f64,
    least_scale_v: f64,
) -> Result<(State, Scales), Fail> {
    engine.blend = 0.0;
    let rest = engine.port.rest;
    let u = match engine.port.source {
        Source::Voltage => supply_v,
        Source::Choke(_) => 0.0,
    };
    let mut state = State {
        v: 0.0,
        q: 0.0,
        x: vec![0.0; rest],
        u,
    };
    let size = least_scale_v.max(supply_v);
    let mut scales = Scales {
        v: size,
        q: engine.charge(size).0.abs(),
        x: size,
    };
    let period = engine.run(&state, &scales, None, Sensitivity::Carried, &mut |_| {})?;
    let (change, _) = correction(engine, &state, &period, supply_v).ok_or(Fail::Singular)?;
    apply(engine, &mut state, &change, 1.0);
    engine.blend = 1.0;
    // The charge of the curve at the voltage that the straight one has.
    state.q = engine.charge(state.v).0;
    let x = state.x.iter().fold(0.0f64, |m, x| m.max(x.abs()));
    scales.x = scales.x.max(x);
    scales.v = scales.v.max(state.v.abs());
    Ok((state, scales))
}

/// From the straight stand-in to the stage as it is, in steps that halve where Newton's method fails.
fn bend(
    engine: &mut Engine,
    mut state: State,
    mut scales: Scales,
    supply_v: f64,
    observer: &mut dyn Observe,
) -> Result<Option<Found>, OrbitError> {
    let (mut blend, mut step) = (0.0f64, 0.25f64);
    while step > 1e-3 {
        let next = (blend + step).min(1.0);
        engine.blend = next;
        let mut start = state.clone();
        start.q = engine.charge(start.v).0;
        match newton(engine, start, scales, supply_v, observer) {
            Ok(found) if next == 1.0 => return Ok(Some(found)),
            Ok(found) => {
                state = found.state;
                scales = found.scales;
                blend = next;
                step *= 1.5;
            }
            Err(Fail::RanOut) => return Err(Fail::RanOut.into()),
            Err(_) => step *= 0.5,
        }
    }
    Ok(None)
}

/// `periods` periods one after the other: the slow way, and the twin that Newton's method is held against.
///
/// # Errors
/// As [`find`].
pub fn settle(
    engine: &mut Engine,
    mut state: State,
    scales: Scales,
    periods: usize,
) -> Result<State, OrbitError> {
    let mut scales = scales;
    for _ in 0..periods {
        let period = engine
            .run(&state, &scales, None, Sensitivity::Left, &mut |_| {})
            .map_err(Fail::from)?;
        scales = grown(&scales, &period);
        state = period.end;
    }
    Ok(state)
}

fn grown(scales: &Scales, period: &Period) -> Scales {
    // Scales follow the orbit down as well, but not to nothing.
    Scales {
        v: period.peaks.v.max(1e-3 * scales.v),
        q: period.peaks.q.max(1e-3 * scales.q),
        x: period.peaks.x.max(1e-3 * scales.x),
    }
}

fn newton(
    engine: &mut Engine,
    mut state: State,
    mut scales: Scales,
    supply_v: f64,
    observer: &mut dyn Observe,
) -> Result<Found, Fail> {
    engine.settle_voltage(&mut state);
    if engine.port.source == Source::Voltage {
        state.u = supply_v;
    }
    let mut mesh: Option<Mesh> = None;
    let mut last: Option<(State, DVector<f64>, f64, f64)> = None;
    for _ in 0..MAX_NEWTON {
        let run = engine.run(
            &state,
            &scales,
            mesh.as_ref(),
            Sensitivity::Carried,
            &mut |_| {},
        );
        let size = match &run {
            Ok(period) => residual_size(engine, &state, period, supply_v, &scales),
            Err(Stop::RanOut) => return Err(Fail::RanOut),
            Err(Stop::NoStep) => f64::INFINITY,
        };
        // A worse state than the one before: go back half of the way.
        if let Some((from, change, damping, before)) = &mut last
            && (!(size.is_finite()) || (size > 1.5 * *before && size > 1e-6))
        {
            *damping *= 0.4;
            if *damping < 0.01 {
                return Err(Fail::Diverged);
            }
            state = from.clone();
            let (change, damping) = (change.clone(), *damping);
            apply(engine, &mut state, &change, damping);
            continue;
        }
        let Ok(period) = run else {
            return Err(Fail::Diverged);
        };
        scales = grown(&scales, &period);
        let Some((change, period_map)) = correction(engine, &state, &period, supply_v) else {
            return Err(Fail::Singular);
        };
        let relative = relative_size(engine, &change, &scales);
        if !relative.is_finite() || relative > 1e9 {
            return Err(Fail::Singular);
        }
        // Frozen steps that turn out too long for this state are chosen again.
        let fine = period.error <= COARSE;
        last = Some((state.clone(), change.clone(), 1.0, size));
        apply(engine, &mut state, &change, 1.0);
        mesh = (relative < FREEZE && fine).then_some(period.mesh);
        if relative <= CLOSE && mesh.is_some() {
            observer.begin();
            let run = engine.run(
                &state,
                &scales,
                mesh.as_ref(),
                Sensitivity::Left,
                &mut |passed| observer.step(passed),
            );
            let period = match run {
                Ok(period) => period,
                Err(Stop::RanOut) => return Err(Fail::RanOut),
                Err(Stop::NoStep) => return Err(Fail::Diverged),
            };
            let parts = residual_parts(engine, &state, &period, supply_v, &scales);
            if parts[0] <= PERIODIC_CHARGE && parts[1] <= PERIODIC && parts[2] <= PERIODIC {
                return Ok(Found {
                    state,
                    scales,
                    mesh: period.mesh,
                    period_map,
                    end: period.end,
                });
            }
        }
    }
    Err(Fail::Diverged)
}
