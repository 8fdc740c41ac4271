//! Efficiency of a scheme at constant output, from full output down.

use super::result::CheckResult;
use crate::drive::{BurstScheme, Scheme, StopBand};
use crate::map::Map;
use crate::units::db;

/// Points of `levels`, which has steps.
const STEPS: usize = 400;

/// Output power at rest and what is drawn for it.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct BackoffPoint {
    /// Output against the scheme's own full output, dB, at most 0.
    pub output_db: f64,
    /// Output over all that is drawn, supply modulator and driver included.
    pub efficiency: f64,
}

/// The working points of `result`'s scheme at rest, lowest output first; empty where the map knows no current.
pub fn backoff(result: &CheckResult) -> Vec<BackoffPoint> {
    let map = &result.map;
    let modulator = result.scheme().modulator();
    let full_v = map.full_amplitude_v();
    let point = |output_v: f64, supply_v: f64, supply_a: f64, driver_w: f64| {
        let drawn_w = modulator.drawn_at_rest_w(supply_v, supply_a) + driver_w;
        BackoffPoint {
            output_db: db((output_v / full_v).powi(2)),
            efficiency: output_v * output_v / (2.0 * map.load_ohm()) / drawn_w,
        }
    };
    let mut points: Vec<BackoffPoint> = match result.scheme() {
        Scheme::Levels(levels) => levels
            .at_rest(map, STEPS)
            .iter()
            .filter_map(|rest| {
                let output_v = map.output_at_v(rest.width, rest.supply_v).0.norm();
                let supply_a = map.supply_at_a(rest.width, rest.supply_v)?;
                let driver_w = map.driver_held_w(rest.width).unwrap_or(0.0);
                Some(point(output_v, rest.supply_v, supply_a, driver_w))
            })
            .collect(),
        Scheme::Burst(burst) => bursts(burst, map),
        _ => map
            .points()
            .iter()
            .filter_map(|at| {
                let driver_w = at.driver_w.unwrap_or(0.0);
                Some(point(
                    at.output_v.norm(),
                    at.supply_v,
                    at.supply_a?,
                    driver_w,
                ))
            })
            .collect(),
    };
    points.retain(|point| point.output_db.is_finite() && point.efficiency.is_finite());
    points.sort_by(|a, b| a.output_db.total_cmp(&b.output_db));
    points
}
/// Bursts at a constant magnitude: the carrier that they leave, over what the pulses draw. Transitions of ramps are
/// counted, of all else not.
fn bursts(burst: &BurstScheme, map: &Map) -> Vec<BackoffPoint> {
    let end = map.turns_at().unwrap_or(map.domain().1);
    let Some(supply_a) = map.supply_held_a(end) else {
        return Vec::new();
    };
    let full_w = map.output_held_v(end).0.norm_sqr() / (2.0 * map.load_ohm());
    let drawn_w = map.own_supply_v() * supply_a + map.driver_held_w(end).unwrap_or(0.0);
    let gating = burst.gating(map.gating());
    let passed = burst
        .filter
        .map_or(1.0, |filter| 10f64.powf(-filter.loss_db / 10.0));
    let returned = burst
        .filter
        .is_some_and(|filter| filter.stop_band == StopBand::Reflected);
    (1..=STEPS)
        .map(|step| {
            let part = step as f64 / STEPS as f64;
            let turned_w = match part < 1.0 {
                true => burst.rate_hz * (gating.rise_j + gating.fall_j),
                false => 0.0,
            };
            let share = if returned { part * part } else { part };
            BackoffPoint {
                output_db: db(part * part),
                efficiency: passed * part * part * full_w / (share * drawn_w + turned_w),
            }
        })
        .collect()
}
