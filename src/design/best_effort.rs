//! What is left where zero voltage is out of reach.

use std::f64::consts::TAU;

use super::Targets;
use super::budget::Budget;
use super::error::DesignError;
use super::ideal::Ideal;
use super::parts::{Match, Parts};
use super::solve::{BestEffort, Design, Zero, finish};
use super::zero::ideal_parts;
use crate::math::simplex::lowest;

/// How far the power of a best effort may be from the wanted one, relative.
const POWER_MET: f64 = 1e-2;

/// The most efficient stage of the wanted power with the device's capacitance at the drain.
pub(super) fn best_effort(
    targets: &Targets,
    ideal: Option<Ideal>,
    nominal: Option<Parts>,
    budget: &Budget,
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
            match budget.orbit_of(&with(x).stage(targets)) {
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
    let design = finish(targets, ideal, with(&x), Zero::BestEffort(reason), budget)?;
    let (found_w, wanted_w) = (design.orbit.output_w, targets.output_w);
    if (found_w / wanted_w - 1.0).abs() > POWER_MET {
        return Err(DesignError::PowerMissed { wanted_w, found_w });
    }
    Ok(design)
}
