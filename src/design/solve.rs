//! The exact search: zero voltage and zero slope at closing, and the wanted power, on the exact orbit.

use std::f64::consts::TAU;

use super::ideal::{HIGHEST_RATIO, Ideal, highest_frequency_hz};
use super::parts::{Match, Parts};
use super::{Choice, Targets};
use crate::math::newton::{Search, Stop, search};
use crate::math::simplex::lowest;
use crate::orbit::{Drive, Network, Orbit};
use crate::stage::Stage;
use crate::units::show;

/// A designed stage with what it does.
#[derive(Debug, Clone)]
pub struct Design {
    /// What was asked.
    pub targets: Targets,
    /// The lossless stage with sinusoidal current that the search started from; none for a best effort
    /// where no such stage exists.
    pub ideal: Option<Ideal>,
    /// What was found.
    pub parts: Parts,
    /// The stage that these parts make.
    pub stage: Stage,
    /// Its orbit.
    pub orbit: Orbit,
    /// Whether voltage and slope are zero at closing.
    pub zero: Zero,
    /// The highest carrier at which the device's capacitance still fits an ideal stage of this duty, power
    /// and supply, Hz; none without a device capacitance.
    pub highest_frequency_hz: Option<f64>,
}

/// How the search for zero voltage and zero slope ended.
#[derive(Debug, Clone, PartialEq)]
pub enum Zero {
    /// Both are zero, and the power is as wanted.
    Reached {
        /// Orbits solved on the way.
        evaluations: usize,
    },
    /// Not possible with this device: the most efficient stage of the wanted power instead.
    BestEffort(BestEffort),
}

/// Why there is no zero.
#[derive(Debug, Clone, PartialEq)]
pub enum BestEffort {
    /// The device brings more capacitance than the stage may have, F.
    TooMuchCapacitance {
        /// The most that the stage may have, F; none where no ideal stage exists at all.
        needed_f: Option<f64>,
        /// What the device has, F.
        device_f: f64,
    },
}

/// Why there is no design.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum DesignError {
    /// No ideal stage for the free choice and duty.
    #[error(
        "no class E stage exists for duty {duty} and {choice}: change the duty or the free choice"
    )]
    NoIdeal {
        /// As given.
        duty: f64,
        /// In words.
        choice: String,
    },
    /// The device has less capacitance than even a choke needs.
    #[error(
        "the device's {} are too little to be the whole drain capacitance: even a choke needs {}; use another free choice, which adds a capacitor",
        show(*.given_f, "F", 4),
        show(*.least_f, "F", 4)
    )]
    TooLittleCapacitance {
        /// What the device has, F.
        given_f: f64,
        /// What a choke needs, F.
        least_f: f64,
    },
    /// The search did not come to an end.
    #[error(
        "no stage with zero voltage and slope was found (residual {residual:.1e}): a higher loaded Q, lower losses or another free choice may help"
    )]
    NotFound {
        /// Largest residual, in supplies and parts of the power.
        residual: f64,
    },
    /// The device's capacitance leaves no zero voltage, and the search for the next best missed the power.
    #[error(
        "with the device's capacitance no stage of {} was found; the nearest delivers {}: a lower frequency, another power or a smaller device may help",
        show(*.wanted_w, "W", 4),
        show(*.found_w, "W", 4)
    )]
    PowerMissed {
        /// W
        wanted_w: f64,
        /// W
        found_w: f64,
    },
}

/// How far the power of a best effort may be from the wanted one, relative.
const POWER_MET: f64 = 1e-2;

/// Residuals that count as zero: voltage and slope in supplies, power as a part of the wanted one.
const ZERO: f64 = 1e-9;

/// Steps of the path from an easy stage to the wanted one.
const PATH: usize = 12;

/// The loaded Q at which the path starts.
const EASY_Q: f64 = 20.0;

/// Designs a stage for `targets`.
///
/// # Errors
/// [`DesignError`].
pub fn design(targets: &Targets) -> Result<Design, DesignError> {
    if targets.choice == Choice::DeviceCapacitance {
        return around_device(targets);
    }
    let (ideal, parts, evaluations) = match nominal(targets) {
        // A curved device may leave no room for any fixed capacitance at all.
        Err(DesignError::NotFound { .. }) if targets.device.drain_curve.is_some() => {
            return best_effort(targets, None, None);
        }
        other => other?,
    };
    if parts.drain_f < targets.device.drain_f * (1.0 - 1e-9) {
        return best_effort(targets, Some(ideal), Some(parts));
    }
    finish(targets, Some(ideal), parts, Zero::Reached { evaluations })
}

/// The ideal stage, and the parts of the real one.
fn nominal(targets: &Targets) -> Result<(Ideal, Parts, usize), DesignError> {
    let ideal = ideal_of(targets)?;
    let (parts, evaluations) = zero(targets, &ideal)?;
    Ok((ideal, parts, evaluations))
}

/// The feed ratio at which the drain capacitance is the device's own: it rises with the ratio.
fn around_device(targets: &Targets) -> Result<Design, DesignError> {
    let device_f = targets.device.drain_f;
    let mut evaluations = 0;
    let mut at = |ratio: f64| {
        let choice = if ratio > 0.0 {
            Choice::FeedRatio(ratio)
        } else {
            Choice::Choke
        };
        let (ideal, parts, solved) = nominal(&Targets {
            choice,
            ..targets.clone()
        })?;
        evaluations += solved;
        Ok((ideal, parts))
    };
    let (_, choke): (Ideal, Parts) = at(0.0)?;
    let whole_f = choke.drain_f + curved_f(targets);
    if device_f < choke.drain_f {
        return Err(DesignError::TooLittleCapacitance {
            given_f: device_f,
            least_f: choke.drain_f,
        });
    }
    // The highest ratio that still has a stage.
    let mut low = 0.3;
    let mut high = HIGHEST_RATIO;
    let mut largest = None;
    while high > low {
        if let Ok(found) = at(high) {
            largest = Some(found);
            break;
        }
        high -= 0.1;
    }
    let Some((mut ideal, mut parts)) = largest else {
        return Err(DesignError::NotFound {
            residual: f64::INFINITY,
        });
    };
    if parts.drain_f < device_f {
        return best_effort(targets, Some(ideal), Some(parts));
    }
    for _ in 0..50 {
        let middle = 0.5 * (low + high);
        let Ok(found) = at(middle) else { break };
        (ideal, parts) = found;
        if parts.drain_f > device_f {
            high = middle;
        } else {
            low = middle;
        }
        if (parts.drain_f - device_f).abs() < 1e-12 * whole_f {
            break;
        }
    }
    let residual = (parts.drain_f - device_f).abs() / whole_f;
    if residual > 1e-9 {
        return Err(DesignError::NotFound { residual });
    }
    parts.drain_f = device_f;
    finish(targets, Some(ideal), parts, Zero::Reached { evaluations })
}

fn finish(
    targets: &Targets,
    ideal: Option<Ideal>,
    parts: Parts,
    zero: Zero,
) -> Result<Design, DesignError> {
    let stage = parts.stage(targets);
    let orbit = orbit_of(&stage).ok_or(DesignError::NotFound {
        residual: f64::INFINITY,
    })?;
    let device_f = targets.device.drain_f;
    let whole_f = device_f + curved_f(targets);
    let highest_frequency_hz = (whole_f > 0.0)
        .then(|| highest_frequency_hz(targets.output_w, targets.supply_v, targets.duty, whole_f))
        .flatten();
    Ok(Design {
        targets: targets.clone(),
        ideal,
        parts,
        stage,
        orbit,
        zero,
        highest_frequency_hz,
    })
}

/// The orbit of `stage` at its own supply and duty.
pub(super) fn orbit_of(stage: &Stage) -> Option<Orbit> {
    let network = Network::new(stage).ok()?;
    network
        .orbit(
            stage.supply_v,
            &Drive::new(&stage.driver, stage.driver.duty),
        )
        .ok()
}

fn ideal_of(targets: &Targets) -> Result<Ideal, DesignError> {
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
fn ideal_parts(targets: &Targets, ideal: &Ideal) -> Parts {
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
fn unknowns(targets: &Targets, parts: &Parts, drain_scale_f: f64) -> Vec<f64> {
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
fn with_unknowns(targets: &Targets, start: &Parts, drain_scale_f: f64, unknowns: &[f64]) -> Parts {
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
fn curved_f(targets: &Targets) -> f64 {
    let curve = targets.device.drain_curve.as_ref();
    targets.device.gate_coupling_f
        + curve.map_or(0.0, |curve| curve.capacitance_f(targets.supply_v))
}

fn residuals(targets: &Targets, parts: &Parts) -> Option<Vec<f64>> {
    if parts.drain_f < 0.0 {
        return None;
    }
    let orbit = orbit_of(&parts.stage(targets))?;
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
fn zero(targets: &Targets, ideal: &Ideal) -> Result<(Parts, usize), DesignError> {
    let stop = Stop {
        residual: ZERO,
        steps: 60,
    };
    let mut total = 0;
    let mut attempt = |targets: &Targets, start: &Parts| {
        let scale_f = start.drain_f + curved_f(targets);
        let found = search(&unknowns(targets, start, scale_f), stop, |x| {
            residuals(targets, &with_unknowns(targets, start, scale_f, x))
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

/// The most efficient stage of the wanted power with the device's capacitance at the drain.
fn best_effort(
    targets: &Targets,
    ideal: Option<Ideal>,
    nominal: Option<Parts>,
) -> Result<Design, DesignError> {
    let device_f = targets.device.drain_f;
    let start = match (nominal, Ideal::no_excess(targets.duty)) {
        (Some(parts), _) => parts,
        (None, Some(ideal)) => ideal_parts(targets, &ideal),
        (None, None) => {
            let choice = "no excess reactance".to_owned();
            return Err(DesignError::NoIdeal {
                duty: targets.duty,
                choice,
            });
        }
    };
    let mut start = Parts {
        drain_f: device_f,
        ..start
    };
    if start.matching == Match::None {
        // Power must be adjustable: a small shunt capacitor will do.
        start.matching = Match::Up {
            shunt_f: 0.1 / targets.load_ohm / TAU / targets.frequency_hz,
        };
    }
    let with = |x: &[f64]| {
        let value = |index: usize| x[index].exp();
        let mut parts = start;
        parts.series_h = value(0);
        match &mut parts.matching {
            Match::None => {}
            Match::Up { shunt_f } => *shunt_f = value(1),
            Match::Down { load_h, .. } => *load_h = value(1),
        }
        if let Some(feed_h) = &mut parts.feed_h {
            *feed_h = value(2);
        }
        parts
    };
    let matching = match start.matching {
        Match::Up { shunt_f } => shunt_f,
        Match::Down { load_h, .. } => load_h,
        Match::None => 1.0,
    };
    let mut x: Vec<f64> = [Some(start.series_h), Some(matching), start.feed_h]
        .into_iter()
        .flatten()
        .map(f64::ln)
        .collect();
    // The weight of the power grows: efficiency first finds its valley, then the power is met.
    for weight in [1.0, 100.0, 1e4] {
        x = lowest(&x, 0.2, 1e-7, 4000, |x| {
            match orbit_of(&with(x).stage(targets)) {
                Some(orbit) => {
                    let power = (orbit.output_w / targets.output_w).ln();
                    (1.0 - orbit.efficiency) + weight * power * power
                }
                None => f64::INFINITY,
            }
        });
    }
    let needed_f = nominal.map(|parts| parts.drain_f);
    let reason = BestEffort::TooMuchCapacitance { needed_f, device_f };
    let design = finish(targets, ideal, with(&x), Zero::BestEffort(reason))?;
    let (found_w, wanted_w) = (design.orbit.output_w, targets.output_w);
    if (found_w / wanted_w - 1.0).abs() > POWER_MET {
        return Err(DesignError::PowerMissed { wanted_w, found_w });
    }
    Ok(design)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::design::PartLosses;
    use crate::stage::{Arrangement, Device, Switch};

    fn targets(choice: Choice) -> Targets {
        Targets {
            title: "a test".into(),
            frequency_hz: 100e6,
            output_w: 5.0,
            supply_v: 6.0,
            duty: 0.5,
            load_ohm: 50.0,
            loaded_q: 5.0,
            choice,
            device: Device {
                switch: Switch {
                    closed_ohm: 0.1,
                    open_ohm: f64::INFINITY,
                    knee: None,
                    diode: None,
                    arrangement: Arrangement::Single,
                },
                drain_f: 20e-12,
                drain_curve: None,
                gate_coupling_f: 0.0,
                gate: None,
            },
            losses: PartLosses {
                feed_ohm: 0.03,
                inductor_q: 100.0,
                capacitor_q: 400.0,
            },
        }
    }

    #[test]
    fn every_choice_reaches_zero_and_its_power() {
        for choice in [
            Choice::FeedRatio(1.2),
            Choice::NoExcess,
            Choice::Choke,
            Choice::FeedRatio(1.6),
        ] {
            let mut targets = targets(choice);
            for (load_ohm, loaded_q) in [(50.0, 5.0), (4.0, 5.0), (50.0, 2.5)] {
                (targets.load_ohm, targets.loaded_q) = (load_ohm, loaded_q);
                let design =
                    design(&targets).unwrap_or_else(|e| panic!("{choice:?} {load_ohm}: {e}"));
                assert!(matches!(design.zero, Zero::Reached { .. }));
                assert!(design.orbit.closing_v.abs() < 1e-8 * 6.0);
                assert!((design.orbit.output_w - 5.0).abs() < 1e-8);
                assert!(design.orbit.efficiency > 0.8, "{}", design.orbit.efficiency);
            }
        }
    }

    #[test]
    fn the_device_can_be_the_whole_drain_capacitance() {
        let mut targets = targets(Choice::DeviceCapacitance);
        targets.device.drain_f = 140e-12;
        let found = design(&targets).unwrap();
        assert!(matches!(found.zero, Zero::Reached { .. }));
        assert_eq!(found.parts.drain_f, 140e-12);
        assert!(found.orbit.closing_v.abs() < 1e-8 * 6.0);
        targets.device.drain_f = 1e-12;
        assert!(matches!(
            design(&targets),
            Err(DesignError::TooLittleCapacitance { .. })
        ));
        targets.device.drain_f = 500e-12;
        let found = design(&targets).unwrap();
        assert!(matches!(found.zero, Zero::BestEffort(_)));
    }

    #[test]
    fn too_large_a_device_gets_the_best_that_is_left() {
        let mut targets = targets(Choice::Choke);
        targets.device.drain_f = 150e-12;
        let design = design(&targets).unwrap();
        let Zero::BestEffort(BestEffort::TooMuchCapacitance {
            needed_f: Some(needed_f),
            ..
        }) = design.zero
        else {
            panic!("{:?}", design.zero)
        };
        assert!(needed_f < 150e-12);
        assert!(
            (design.orbit.output_w / 5.0 - 1.0).abs() < 0.01,
            "{}",
            design.orbit.output_w
        );
        // Off nominal, but not hopeless: closing loses charge, yet most power reaches the load.
        assert!(design.orbit.efficiency > 0.5, "{}", design.orbit.efficiency);
    }
}
