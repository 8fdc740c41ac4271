//! Efficiency of a scheme at constant output, from full output down.

use super::result::CheckResult;
use crate::drive::Scheme;
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
