//! The equations of a curved stage with one drive, and everything that is kept between periods.

use std::f64::consts::TAU;
use std::sync::Arc;

use super::charge::Charge;
use super::device::{Device, Side, Throw};
use super::network::{Drive, OrbitError};
use super::period::{Scales, State};
use super::plan::{Segment, segments};
use super::port::{Port, dot};
use super::step::{Solved, Start, Step};
use crate::math::radau::{RADAU, STAGES};
use crate::stage::{DrainCurve, Stage};

/// The estimated error of a step relative to the largest voltage of the period. The estimate has order 5, the
/// method 9: the error itself is about the estimate to the power 5/3.
const TOLERANCE: f64 = 2e-6;

/// The same for a table: the third derivative of its charge jumps at every point, where the method has no higher
/// order than the estimate.
const TABLE_TOLERANCE: f64 = 5e-8;

/// The equations and everything that is kept between periods.
#[derive(Debug)]
pub struct Engine {
    pub(super) port: Arc<Port>,
    pub(super) charge: Charge,
    pub(super) device: Device,
    pub(super) straight: Device,
    pub(super) segments: Vec<Segment>,
    /// 0: the straight stand-in, 1: the stage as it is.
    pub(super) blend: f64,
    pub(super) tolerance: f64,
    pub(super) stand_in: f64,
    pub(super) work: u64,
}

impl Engine {
    /// # Errors
    /// [`OrbitError::EdgesOverlap`].
    pub fn new(stage: &Stage, port: Arc<Port>, drive: &Drive) -> Result<Self, OrbitError> {
        let scale = TAU * stage.frequency_hz * stage.load.ohm;
        let fixed = (stage.drain_f + stage.gate_coupling_f + port.ladder_farad) * scale;
        let charge = Charge::new(fixed, stage.drain_curve.as_ref(), scale);
        let device = Device::new(stage);
        let stand_in = charge.at(stage.supply_v).1;
        Ok(Self {
            straight: device.straightened(),
            device,
            charge,
            segments: segments(stage, drive)?,
            blend: 1.0,
            tolerance: match stage.drain_curve {
                Some(DrainCurve::Table(_)) => TABLE_TOLERANCE,
                _ => TOLERANCE,
            },
            stand_in,
            port,
            work: 0,
        })
    }

    /// Charge and capacitance at a drain voltage.
    pub fn charge(&self, v: f64) -> (f64, f64) {
        if self.blend == 1.0 {
            return self.charge.at(v);
        }
        let (q, c) = self.charge.at(v);
        let rest = 1.0 - self.blend;
        (
            rest * self.stand_in * v + self.blend * q,
            rest * self.stand_in + self.blend * c,
        )
    }

    /// Current and conductance of the device.
    pub fn current(&self, throw: Throw, side: Side, v: f64) -> (f64, f64) {
        if self.blend == 1.0 {
            return self.device.current(throw, side, v);
        }
        let (i, g) = self.device.current(throw, side, v);
        let (si, sg) = self.straight.current(throw, Side::Above, v);
        let rest = 1.0 - self.blend;
        (rest * si + self.blend * i, rest * sg + self.blend * g)
    }

    /// The switch and its diode.
    pub fn device(&self) -> &Device {
        &self.device
    }

    /// A state with this charge, its voltage found.
    pub fn settle_voltage(&self, state: &mut State) {
        if self.blend == 1.0 {
            state.v = self.charge.voltage(state.q, state.v);
            return;
        }
        for _ in 0..100 {
            let (q, c) = self.charge(state.v);
            let change = (q - state.q) / c;
            state.v -= change;
            if change.abs() <= 1e-15 * state.v.abs() {
                break;
            }
        }
    }

    pub(super) fn side(&self, v: f64) -> Side {
        match self.device.corner() {
            Some(corner) if v < corner => Side::Below,
            _ => Side::Above,
        }
    }

    pub(super) fn table(&mut self, segment: usize, level: u32) -> Option<Arc<Step>> {
        let slot = level as usize;
        if let Some(step) = &self.segments[segment].tables[slot] {
            return Some(Arc::clone(step));
        }
        let length = self.segments[segment].length * 0.5f64.powi(level as i32);
        let step = Arc::new(self.fresh(length)?);
        self.segments[segment].tables[slot] = Some(Arc::clone(&step));
        Some(step)
    }

    pub(super) fn fresh(&mut self, length: f64) -> Option<Step> {
        self.work += 4 + (self.port.rest * self.port.rest / 2) as u64;
        Step::new(&self.port, length)
    }

    /// Slope of the drain voltage.
    pub(super) fn slope(&self, at: &Start<'_>, throw: Throw, side: Side) -> f64 {
        let port = &self.port;
        let flow = port.alpha * at.v + dot(&port.a, at.x) + port.beta * at.u + at.source
            - self.current(throw, side, at.v).0;
        flow / self.charge(at.v).1
    }

    /// The slope of the drain voltage at the end of a period, with the switch still open.
    pub fn slope_before_closing(&self, state: &State) -> f64 {
        let start = Start {
            v: state.v,
            q: state.q,
            x: &state.x,
            u: state.u,
            source: self.segments.last().map_or(0.0, |s| s.source),
        };
        self.slope(&start, Throw::Open, self.side(state.v))
    }

    /// The estimated error over its tolerance.
    pub(super) fn error(
        &self,
        step: &Step,
        begin: &Start<'_>,
        solved: &Solved,
        throw: Throw,
        side: Side,
        scales: &Scales,
    ) -> f64 {
        let radau = &*RADAU;
        let port = &self.port;
        let weight = step.length * radau.start_weight;
        let flow =
            port.alpha * begin.v + dot(&port.a, begin.x) + port.beta * begin.u + begin.source
                - self.current(throw, side, begin.v).0;
        let mut charge = weight * flow;
        for i in 0..STAGES {
            charge += radau.error[i] * (solved.q[i] - begin.q);
        }
        let last = STAGES - 1;
        let volt = charge / (solved.c[last] + weight * (solved.g[last] - port.alpha));
        let rest = step.rest_error(begin, &solved.v);
        let error = (volt.abs() / scales.v).max(rest / scales.x) / self.tolerance;
        if error.is_finite() {
            error.max(1e-12)
        } else {
            1e6
        }
    }

    /// The end of a part of a step that was taken, to the order of the method.
    pub fn part(
        &mut self,
        begin: &Start<'_>,
        throw: Throw,
        side: Side,
        length: f64,
        guess: &[f64; STAGES],
        scales: &Scales,
    ) -> Option<f64> {
        let step = self.fresh(length)?;
        let solved = step.solve(
            begin,
            guess,
            scales.v,
            |v| self.charge(v),
            |v| self.current(throw, side, v),
        )?;
        Some(solved.v[STAGES - 1])
    }
}
