//! The parts at which voltage and slope at closing are zero and the power is right.

use std::f64::consts::TAU;

use super::budget::Budget;
use super::error::DesignError;
use super::ideal::Ideal;
use super::parts::{Match, Parts};
use super::{Choice, Targets};
use crate::math::newton::{Search, Stop, search};

/// Residuals that count as zero: voltage and slope in supplies, power as a part of the wanted one.
const ZERO: f64 = 1e-9;

/// Steps of the path from an easy stage to the wanted one.
const PATH: usize = 12;

/// The loaded Q at which the path starts.
const EASY_Q: f64 = 20.0;

pub(super) fn ideal_of(targets: &Targets) -> Result<Ideal, DesignError> {
    let duty = targets.duty;
    let (ideal, choice) = match targets.choice {
        Choice::FeedRatio(ratio) => (Ideal::new(ratio, duty), format!("feed ratio {ratio}")),
        Choice::Choke => (Ideal::new(0.0, duty), "a choke".to_owned()),
        Choice::NoExcess => (Ideal::no_excess(duty), "no excess reactance".to_owned()),
        // Solved over the feed ratio; this is only its starting idea.
        Choice::DeviceCapacitance => (Ideal::new(1.0, duty), "the device's capacitance".to_owned()),
    };
    ideal.ok_or(DesignError::NoIdeal { duty, choice })
}

/// The parts of the ideal stage for `targets`.
pub(super) fn ideal_parts(targets: &Targets, ideal: &Ideal) -> Parts {
    let angular_hz = TAU * targets.frequency_hz;
    let ohm = ideal.power * targets.supply_v.powi(2) / targets.output_w;
    let (matching, taken_up_ohm) = Match::new(targets.load_ohm, ohm, angular_hz);
    let resonator_ohm = targets.loaded_q * ohm;
    let drain_f = ideal.capacitance / (angular_hz * ohm);
    Parts {
        drain_f: (drain_f - curved_f(targets)).max(0.05 * drain_f),
        feed_h: ideal
            .feed
            .is_finite()
            .then_some(ideal.feed * ohm / angular_hz),
        series_h: (resonator_ohm + ideal.excess * ohm + taken_up_ohm).max(0.1 * ohm) / angular_hz,
        series_f: 1.0 / (angular_hz * resonator_ohm),
        matching,
    }
}

/// The unknowns of the search: the fixed drain capacitance as a part of `drain_scale_f`, and logarithms of the
/// other parts that the free choice leaves open.
pub(super) fn unknowns(targets: &Targets, parts: &Parts, drain_scale_f: f64) -> Vec<f64> {
    let mut others = match targets.choice {
        Choice::NoExcess => vec![parts.feed_h.unwrap_or(1.0)],
        _ => vec![parts.series_h],
    };
    match parts.matching {
        Match::None => {}
        Match::Up { shunt_f } => others.push(shunt_f),
        Match::Down { load_h, .. } => others.push(load_h),
    }
    std::iter::once(parts.drain_f / drain_scale_f)
        .chain(others.iter().map(|value| value.ln()))
        .collect()
}

/// The parts for `unknowns`, what the free choice ties included.
pub(super) fn with_unknowns(
    targets: &Targets,
    start: &Parts,
    drain_scale_f: f64,
    unknowns: &[f64],
) -> Parts {
    let angular_hz = TAU * targets.frequency_hz;
    let value = |index: usize| unknowns.get(index).copied().unwrap_or(0.0).exp();
    let mut parts = *start;
    match &mut parts.matching {
        Match::None => {}
        Match::Up { shunt_f } => *shunt_f = value(2),
        Match::Down { load_h, .. } => *load_h = value(2),
    }
    parts.drain_f = unknowns
        .first()
        .map_or(start.drain_f, |part| part * drain_scale_f);
    match targets.choice {
        Choice::Choke | Choice::DeviceCapacitance => parts.series_h = value(1),
        Choice::FeedRatio(ratio) => {
            parts.series_h = value(1);
            // The ratio counts what the drain has at the supply voltage, curved parts included.
            let drain_f = parts.drain_f + curved_f(targets);
            parts.feed_h = Some(1.0 / ((ratio * angular_hz).powi(2) * drain_f));
        }
        Choice::NoExcess => {
            parts.feed_h = Some(value(1));
            // The series inductor resonates with the capacitor and takes up the match's reactance only.
            let taken_up_ohm = match parts.matching {
                Match::Up { shunt_f } => {
                    let susceptance = angular_hz * shunt_f;
                    let load = targets.load_ohm;
                    susceptance * load * load / (1.0 + (susceptance * load).powi(2))
                }
                Match::Down { shunt_f, load_h } => {
                    let branch = num_complex::Complex64::new(targets.load_ohm, angular_hz * load_h);
                    let shunt = num_complex::Complex64::new(0.0, angular_hz * shunt_f);
                    -(1.0 / (1.0 / branch + shunt)).im
                }
                Match::None => 0.0,
            };
            parts.series_h = (1.0 / (angular_hz * parts.series_f) + taken_up_ohm) / angular_hz;
        }
    }
    parts
}

/// What the device adds to the fixed drain capacitance at the supply voltage, F.
pub(super) fn curved_f(targets: &Targets) -> f64 {
    let curve = targets.device.drain_curve.as_ref();
    targets.device.gate_coupling_f
        + curve.map_or(0.0, |curve| curve.capacitance_f(targets.supply_v))
}

pub(super) fn residuals(targets: &Targets, parts: &Parts, budget: &Budget) -> Option<Vec<f64>> {
    if parts.drain_f < 0.0 {
        return None;
    }
    let orbit = budget.orbit_of(&parts.stage(targets))?;
    let volt = targets.supply_v;
    let mut values = vec![
        orbit.closing_v / volt,
        orbit.closing_slope_v_per_s / (TAU * targets.frequency_hz * volt),
    ];
    if parts.matching != Match::None {
        values.push(orbit.output_w / targets.output_w - 1.0);
    }
    Some(values)
}

/// The parts at which voltage, slope and power are right: from the ideal stage at once, or along a path on
/// which the losses grow and the loaded Q falls to their values.
pub(super) fn zero(
    targets: &Targets,
    ideal: &Ideal,
    budget: &Budget,
) -> Result<(Parts, usize), DesignError> {
    let stop = Stop {
        residual: ZERO,
        steps: 60,
    };
    let mut total = 0;
    let mut attempt = |targets: &Targets, start: &Parts| {
        let scale_f = start.drain_f + curved_f(targets);
        let found = search(&unknowns(targets, start, scale_f), stop, |x| {
            residuals(targets, &with_unknowns(targets, start, scale_f, x), budget)
        });
        match found {
            Search::Converged { at, evaluations } => {
                total += evaluations;
                Ok((with_unknowns(targets, start, scale_f, &at), total))
            }
            Search::Stuck { residual, .. } | Search::RanOut { residual, .. } => Err(residual),
        }
    };
    let direct = ideal_parts(targets, ideal);
    if let Ok(found) = attempt(targets, &direct) {
        return Ok(found);
    }
    // Near the load resistance the losses decide on which side of it the stage wants to be.
    let angular_hz = TAU * targets.frequency_hz;
    for ratio in [0.85, 1.15] {
        let (matching, taken_up_ohm) =
            Match::new(targets.load_ohm, ratio * targets.load_ohm, angular_hz);
        let series_h = direct.series_h + taken_up_ohm / angular_hz;
        if let Ok(found) = attempt(
            targets,
            &Parts {
                matching,
                series_h,
                ..direct
            },
        ) {
            return Ok(found);
        }
    }
    let on_path = |part: f64| {
        let mut easy = targets.clone();
        let start_q = targets.loaded_q.max(EASY_Q);
        easy.loaded_q = start_q * (targets.loaded_q / start_q).powf(part);
        easy.device.switch.closed_ohm *= 0.01f64.powf(1.0 - part);
        easy.losses.feed_ohm *= part;
        easy.losses.inductor_q /= part.max(1e-3);
        easy.losses.capacitor_q /= part.max(1e-3);
        easy
    };
    let mut parts = ideal_parts(&on_path(0.0), ideal);
    let mut found = Err(f64::INFINITY);
    for step in 0..=PATH {
        let here = on_path(step as f64 / PATH as f64);
        // The series capacitor belongs to the loaded Q; the inductor follows it.
        let wanted = ideal_parts(&here, ideal);
        let angular = TAU * here.frequency_hz;
        let change = 1.0 / wanted.series_f - 1.0 / parts.series_f;
        parts.series_h = (parts.series_h + change / angular.powi(2)).max(0.1 * parts.series_h);
        parts.series_f = wanted.series_f;
        found = attempt(&here, &parts);
        match &found {
            Ok((solved, _)) => parts = *solved,
            Err(_) => break,
        }
    }
    found.map_err(|residual| DesignError::NotFound { residual })
}
