//! The period cut at every instant where the equations change.

use std::f64::consts::TAU;
use std::sync::Arc;

use super::device::Throw;
use super::network::{Drive, OrbitError};
use super::step::Step;
use crate::stage::Stage;

/// The finest binary fraction of a segment.
pub const LEVELS: u32 = 40;

#[derive(Debug)]
pub struct Segment {
    /// From the closing instant, rad.
    pub from: f64,
    pub length: f64,
    pub throw: Throw,
    /// Current of the gate's edge into the drain.
    pub source: f64,
    pub tables: Vec<Option<Arc<Step>>>,
    /// The level that the first step had last time.
    pub first_level: u32,
}

/// The period from closing to closing, cut at every instant where the equations change.
pub fn segments(stage: &Stage, drive: &Drive) -> Result<Vec<Segment>, OrbitError> {
    let (width, open) = (drive.width_rad, TAU - drive.width_rad);
    let mut cuts = vec![(0.0, Throw::Closed, 0.0), (width, Throw::Open, 0.0)];
    if let Some(gate) = stage.driver.gate.filter(|_| stage.gate_coupling_f > 0.0) {
        let rad = |second: f64| TAU * stage.frequency_hz * second;
        let (rise, fall) = (rad(gate.rise_s), rad(gate.fall_s));
        if 0.5 * (rise + fall) > width.min(open) {
            return Err(OrbitError::EdgesOverlap {
                edges_s: 0.5 * (gate.rise_s + gate.fall_s),
                shortest_s: width.min(open) / rad(1.0),
            });
        }
        let coupling = rad(1.0) * stage.gate_coupling_f * stage.load.ohm * gate.swing_v;
        let (up, down) = (coupling / rise, -coupling / fall);
        cuts = vec![
            (0.0, Throw::Closed, up),
            (0.5 * rise, Throw::Closed, 0.0),
            (width - 0.5 * fall, Throw::Closed, down),
            (width, Throw::Open, down),
            (width + 0.5 * fall, Throw::Open, 0.0),
            (TAU - 0.5 * rise, Throw::Open, up),
        ];
    }
    let ends: Vec<f64> = cuts.iter().skip(1).map(|cut| cut.0).chain([TAU]).collect();
    Ok(cuts
        .into_iter()
        .zip(ends)
        .filter(|((from, ..), to)| to - from > 1e-12)
        .map(|((from, throw, source), to)| Segment {
            from,
            length: to - from,
            throw,
            source,
            tables: vec![None; LEVELS as usize + 1],
            first_level: 8,
        })
        .collect())
}
