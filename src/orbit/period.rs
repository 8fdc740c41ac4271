//! One period of the curved stage, integrated event by event.
//!
//! The period is cut where the switch is thrown and where the gate's edges begin and end. Within a segment steps lie
//! on its binary fractions, so that the matrices of a length are made once and used again in every period of every
//! orbit with the same drive; where the diode's corner is crossed, a step of exactly the right length ends on it.
//! The current is continuous there, so that sensitivities pass through unchanged.

use std::f64::consts::TAU;
use std::sync::Arc;

use super::device::{Side, Throw};
use super::engine::Engine;
use super::plan::LEVELS;
use super::step::{Solved, Start, Step};
use crate::math::radau::{ESTIMATE_ORDER, RADAU, STAGES, evaluate};

/// Units of work an orbit may take: one for each step of a small stage, more for large stages and for new matrices.
/// An ordinary orbit takes some thousands; the limit is reached after about a second.
pub const WORK_LIMIT: u64 = 250_000;

/// The longest step, rad: the quadrature of the fifth harmonic stays below 1e-9 with it.
const LONGEST_RAD: f64 = TAU / 32.0;

/// What stops a period.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stop {
    /// The work limit.
    RanOut,
    /// A step that does not solve at any length.
    NoStep,
}

/// State at the closing instant; `u` is the input.
#[derive(Debug, Clone, PartialEq)]
pub struct State {
    pub v: f64,
    pub q: f64,
    pub x: Vec<f64>,
    pub u: f64,
}

/// What errors are relative to.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scales {
    pub v: f64,
    pub q: f64,
    pub x: f64,
}

/// Ends of steps in each segment, in finest fractions.
pub type Mesh = Vec<Vec<u64>>;

/// Someone who follows the last period of a solution.
pub trait Observe {
    /// A period begins; what was seen before does not count.
    fn begin(&mut self);
    /// A step was taken.
    fn step(&mut self, passed: &Passed<'_>);
}

/// Looks away.
#[derive(Debug)]
pub struct Nobody;

impl Observe for Nobody {
    fn begin(&mut self) {}
    fn step(&mut self, _: &Passed<'_>) {}
}

/// Whether sensitivities are wanted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Sensitivity {
    Carried,
    Left,
}

/// What became of a period.
#[derive(Debug, Clone)]
pub struct Period {
    pub end: State,
    /// Integral of the drain voltage.
    pub area: f64,
    /// For each column (charge, rest, input at the start): charge and rest at the end, then the area.
    pub columns: Vec<Vec<f64>>,
    pub mesh: Mesh,
    /// Largest magnitudes met.
    pub peaks: Scales,
    /// Largest estimated error over its tolerance.
    pub error: f64,
}

/// A step that was taken, for those who watch.
#[derive(Debug)]
pub struct Passed<'a> {
    pub step: &'a Step,
    pub start: Start<'a>,
    pub solved: &'a Solved,
    /// Where it starts, rad after the closing instant.
    pub from: f64,
    pub throw: Throw,
    pub side: Side,
}

#[derive(Debug, Clone, Copy)]
enum At {
    Grid(u64),
    Free(f64),
}

impl Engine {
    /// Integrates one period from `start`.
    ///
    /// # Errors
    /// [`Stop`].
    pub fn run(
        &mut self,
        start: &State,
        scales: &Scales,
        mesh: Option<&Mesh>,
        sensitivity: Sensitivity,
        watch: &mut dyn FnMut(&Passed<'_>),
    ) -> Result<Period, Stop> {
        let rest = self.port.rest;
        let mut columns = Vec::new();
        if sensitivity == Sensitivity::Carried {
            for column in 0..rest + 2 {
                let mut entries = vec![0.0; rest + 2];
                if column <= rest {
                    entries[column] = 1.0;
                }
                columns.push(entries);
            }
        }
        let mut period = Period {
            end: start.clone(),
            area: 0.0,
            columns,
            mesh: vec![Vec::new(); self.segments.len()],
            peaks: Scales {
                v: start.v.abs(),
                q: start.q.abs(),
                x: start.x.iter().fold(0.0, |m, x| m.max(x.abs())),
            },
            error: 0.0,
        };
        let mut side = self.side(start.v);
        for segment in 0..self.segments.len() {
            let given = mesh.map(|mesh| mesh[segment].as_slice());
            side = self.segment(segment, side, scales, given, &mut period, watch)?;
        }
        Ok(period)
    }

    fn segment(
        &mut self,
        index: usize,
        mut side: Side,
        scales: &Scales,
        mut given: Option<&[u64]>,
        period: &mut Period,
        watch: &mut dyn FnMut(&Passed<'_>),
    ) -> Result<Side, Stop> {
        const END: u64 = 1 << LEVELS;
        let (from, length, throw, source) = {
            let s = &self.segments[index];
            (s.from, s.length, s.throw, s.source)
        };
        let unit = length / END as f64;
        let coarsest = (length / LONGEST_RAD).log2().ceil().max(0.0) as u32;
        let mut level = self.segments[index].first_level.max(coarsest);
        let mut at = At::Grid(0);
        let mut before: Option<(f64, [f64; STAGES], f64)> = None;
        let (mut first, mut flips, mut mesh_at) = (true, 0, 0);
        loop {
            self.work += 1 + (self.port.rest / 4) as u64;
            if self.work > WORK_LIMIT {
                return Err(Stop::RanOut);
            }
            let here = match at {
                At::Grid(p) if p >= END => break,
                At::Grid(p) => p as f64 * unit,
                // The corner was crossed at the very end.
                At::Free(t) if t >= length * (1.0 - 1e-15) => break,
                At::Free(t) => t,
            };
            let target = match given {
                Some(mesh) => {
                    while mesh
                        .get(mesh_at)
                        .is_some_and(|&end| end as f64 * unit <= here)
                    {
                        mesh_at += 1;
                    }
                    mesh.get(mesh_at).copied().unwrap_or(END)
                }
                None => self.next_end(at, here, unit, &mut level),
            };
            let step = match at {
                At::Grid(p) if (target - p).is_power_of_two() => {
                    self.table(index, LEVELS - (target - p).trailing_zeros())
                }
                _ => {
                    let length = target as f64 * unit - here;
                    self.fresh(length).map(Arc::new)
                }
            }
            .ok_or(Stop::NoStep)?;
            let h = step.length;
            let begin = Start {
                v: period.end.v,
                q: period.end.q,
                x: &period.end.x,
                u: period.end.u,
                source,
            };
            let guess = self.guess(&begin, throw, side, h, before.as_ref(), scales.v);
            let solved = step.solve(
                &begin,
                &guess,
                scales.v,
                |v| self.charge(v),
                |v| self.current(throw, side, v),
            );
            let level_of = |h: f64| (length / h).log2().ceil().max(0.0) as u32;
            let Some(solved) = solved else {
                level = level_of(h) + 2;
                given = None;
                before = None;
                if level > LEVELS {
                    return Err(Stop::NoStep);
                }
                continue;
            };
            let error = self.error(&step, &begin, &solved, throw, side, scales);
            let factor = (0.9 * error.powf(-1.0 / (ESTIMATE_ORDER + 1) as f64)).clamp(0.1, 8.0);
            if given.is_none() && error > 1.0 {
                level = level_of(h * factor).max(level_of(h) + 1);
                if level > LEVELS {
                    return Err(Stop::NoStep);
                }
                continue;
            }
            let crossing = if flips < 3 {
                self.crossing(begin.v, &solved.v, side, scales.v)
            } else {
                None
            };
            if let Some(theta) = crossing {
                let other = match side {
                    Side::Above => Side::Below,
                    Side::Below => Side::Above,
                };
                before = None;
                if theta * h <= 1e-13 * TAU {
                    side = other;
                    flips += 1;
                    continue;
                }
                let (short, solved) =
                    self.locate(&begin, throw, side, theta * h, h, &solved, scales)?;
                let passed = Passed {
                    step: &short,
                    start: begin,
                    solved: &solved,
                    from: from + here,
                    throw,
                    side,
                };
                watch(&passed);
                let end = self.commit(&short, &solved, period);
                period.end = end;
                side = other;
                flips = 0;
                at = At::Free(here + short.length);
                continue;
            }
            watch(&Passed {
                step: &step,
                start: begin,
                solved: &solved,
                from: from + here,
                throw,
                side,
            });
            let poly = RADAU.polynomial(period.end.v, &solved.v);
            before = Some((period.end.v, poly, h));
            let end = self.commit(&step, &solved, period);
            period.end = end;
            period.error = period.error.max(error);
            period.mesh[index].push(target);
            at = At::Grid(target);
            flips = 0;
            if first {
                self.segments[index].first_level = level_of(h).min(LEVELS);
                first = false;
            }
            level = level_of(h * factor).max(coarsest);
        }
        Ok(side)
    }

    /// The end of the next step: on the grid of the coarsest level that is fine enough and lined up.
    fn next_end(&self, at: At, here: f64, unit: f64, level: &mut u32) -> u64 {
        *level = (*level).min(LEVELS);
        match at {
            At::Grid(p) => {
                if p > 0 {
                    *level = (*level).max(LEVELS - p.trailing_zeros());
                }
                p + (1u64 << (LEVELS - *level))
            }
            At::Free(_) => {
                let span = 1u64 << (LEVELS - *level);
                let passed = (here / (unit * span as f64)).floor();
                let mut target = (passed as u64 + 1) * span;
                // Not a sliver.
                if (target as f64 * unit - here) < 0.02 * span as f64 * unit
                    && target + span <= 1 << LEVELS
                {
                    target += span;
                }
                target.min(1 << LEVELS)
            }
        }
    }

    fn guess(
        &self,
        begin: &Start<'_>,
        throw: Throw,
        side: Side,
        h: f64,
        before: Option<&(f64, [f64; STAGES], f64)>,
        scale_v: f64,
    ) -> [f64; STAGES] {
        let nodes = &RADAU.nodes;
        if let Some((start, poly, length)) = before {
            let ratio = h / length;
            if ratio < 2.5 {
                return nodes.map(|c| evaluate(*start, poly, 1.0 + c * ratio).0);
            }
        }
        let rise = h * self.slope(begin, throw, side);
        if rise.abs() < 0.3 * scale_v {
            nodes.map(|c| begin.v + c * rise)
        } else {
            [begin.v; STAGES]
        }
    }

    /// Carries sensitivities, area and peaks over a step and returns its end.
    fn commit(&self, step: &Step, solved: &Solved, period: &mut Period) -> State {
        let radau = &*RADAU;
        let last = STAGES - 1;
        let rest = self.port.rest;
        let mut scratch = [0.0; super::linear::MAX_STATES];
        let weights = &radau.a[last];
        for (number, column) in period.columns.iter_mut().enumerate() {
            let du = if number == rest + 1 { 1.0 } else { 0.0 };
            let dv = step.vary(solved, column[0], &column[1..=rest], du);
            step.rest_at(last, &column[1..=rest], &dv, du, &mut scratch[..rest]);
            column[0] = solved.c[last] * dv[last];
            column[1..=rest].copy_from_slice(&scratch[..rest]);
            for (weight, dv) in weights.iter().zip(&dv) {
                column[rest + 1] += step.length * weight * dv;
            }
        }
        for (weight, v) in weights.iter().zip(&solved.v) {
            period.area += step.length * weight * v;
            period.peaks.v = period.peaks.v.max(v.abs());
        }
        for q in &solved.q {
            period.peaks.q = period.peaks.q.max(q.abs());
        }
        let start = &period.end;
        let mut x = vec![0.0; rest];
        step.rest_at(last, &start.x, &solved.v, start.u, &mut x);
        for x in &x {
            period.peaks.x = period.peaks.x.max(x.abs());
        }
        State {
            v: solved.v[last],
            q: solved.q[last],
            x,
            u: start.u,
        }
    }
}
