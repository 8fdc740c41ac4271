//! How far a state is from itself after a period, and the Newton step that mends it.

use std::f64::consts::TAU;

use nalgebra::{DMatrix, DVector};

use super::engine::Engine;
use super::period::{Period, Scales, State};
use super::port::Source;

pub fn residual(engine: &Engine, state: &State, period: &Period, supply_v: f64) -> DVector<f64> {
    let rest = engine.port.rest;
    let choke = matches!(engine.port.source, Source::Choke(_));
    let mut residual = DVector::zeros(rest + 1 + usize::from(choke));
    residual[0] = period.end.q - state.q;
    for i in 0..rest {
        residual[i + 1] = period.end.x[i] - state.x[i];
    }
    if let Source::Choke(ohm) = engine.port.source {
        residual[rest + 1] = period.area / TAU + ohm * state.u - supply_v;
    }
    residual
}

/// The largest residual of charge, of the rest and of the choke's condition, each over its scale.
pub fn residual_parts(
    engine: &Engine,
    state: &State,
    period: &Period,
    supply_v: f64,
    scales: &Scales,
) -> [f64; 3] {
    let rest = engine.port.rest;
    let mut parts = [0.0f64; 3];
    for (i, r) in residual(engine, state, period, supply_v).iter().enumerate() {
        let (part, scale) = match i {
            0 => (0, scales.q),
            _ if i <= rest => (1, scales.x),
            _ => (2, scales.v),
        };
        let size = r.abs() / scale;
        if size > parts[part] || size.is_nan() {
            parts[part] = size;
        }
    }
    parts
}

pub fn residual_size(
    engine: &Engine,
    state: &State,
    period: &Period,
    supply_v: f64,
    scales: &Scales,
) -> f64 {
    residual_parts(engine, state, period, supply_v, scales)
        .iter()
        .fold(
            0.0,
            |worst: f64, &r| if r > worst || r.is_nan() { r } else { worst },
        )
}

/// The Newton step, and the map of one period without the choke's condition.
pub fn correction(
    engine: &Engine,
    state: &State,
    period: &Period,
    supply_v: f64,
) -> Option<(DVector<f64>, DMatrix<f64>)> {
    let rest = engine.port.rest;
    let residual = residual(engine, state, period, supply_v);
    let period_map = DMatrix::from_fn(rest + 1, rest + 1, |i, j| period.columns[j][i]);
    let size = residual.len();
    let matrix = DMatrix::from_fn(size, size, |i, j| {
        let derivative = period.columns[j][i];
        if i == rest + 1 {
            let feed = match engine.port.source {
                Source::Choke(ohm) if j == rest + 1 => ohm,
                _ => 0.0,
            };
            derivative / TAU + feed
        } else if i == j {
            derivative - 1.0
        } else {
            derivative
        }
    });
    let change = matrix.lu().solve(&(-residual))?;
    change
        .iter()
        .all(|x| x.is_finite())
        .then_some((change, period_map))
}

pub fn relative_size(engine: &Engine, change: &DVector<f64>, scales: &Scales) -> f64 {
    let rest = engine.port.rest;
    (0..=rest)
        .map(|i| change[i].abs() / if i == 0 { scales.q } else { scales.x })
        .fold(0.0, f64::max)
}

pub fn apply(engine: &Engine, state: &mut State, change: &DVector<f64>, damping: f64) {
    let rest = engine.port.rest;
    state.q += damping * change[0];
    for i in 0..rest {
        state.x[i] += damping * change[i + 1];
    }
    if change.len() > rest + 1 {
        state.u += damping * change[rest + 1];
    }
    engine.settle_voltage(state);
}
