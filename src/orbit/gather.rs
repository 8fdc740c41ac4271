//! Integrals and extremes over a period, gathered from the steps as they pass.
//!
//! Integrals use the quadrature of the collocation itself (order 9), so that energy balances to the error of the
//! steps; extremes come from the dense output and are solved for again with a step of exactly their length.

use std::sync::Arc;

use num_complex::Complex64;

use super::device::{Device, Side, Throw};
use super::engine::Engine;
use super::network::HARMONICS;
use super::period::{Observe, Passed, Scales};
use super::port::Port;
use super::step::Start;
use crate::math::radau::{RADAU, STAGES, evaluate};

/// Sums over one period; powers and currents in normalised units, integrals over the angle.
#[derive(Debug, Clone)]
pub struct Gathered {
    /// Integral of `w w^T` with `w` = (drain voltage, rest, input), row by row.
    pub moment: Vec<f64>,
    /// Integral of `w`.
    pub first: Vec<f64>,
    pub closed_switch: f64,
    pub open_switch: f64,
    pub diode: f64,
    /// What the gate's edges deliver into the drain.
    pub edges: f64,
    /// Integral of the current into the drain's charge, and of its magnitude.
    pub charge: [f64; 2],
    /// Integrals of the load voltage times `exp(-jk angle)`.
    pub harmonics: [Complex64; HARMONICS],
    /// Highest and lowest drain voltage, closed and open.
    pub closed: [Extreme; 2],
    pub open: [Extreme; 2],
    /// Drain voltages where the segments begin, in order of time: (angle after closing, voltage).
    pub starts: Vec<(f64, f64)>,
    /// How many times the diode began to conduct.
    pub conductions: usize,
    closing_rad: f64,
    scratch: Vec<f64>,
    was: Side,
}

/// The largest value of `sign * v`, and the step it lies in.
#[derive(Debug, Clone)]
pub struct Extreme {
    sign: f64,
    pub v: f64,
    /// The largest at the ends of steps, which lie on the orbit itself.
    seen: f64,
    within: Option<Within>,
}

#[derive(Debug, Clone)]
struct Within {
    v: f64,
    q: f64,
    x: Vec<f64>,
    u: f64,
    source: f64,
    length: f64,
    throw: Throw,
    side: Side,
    guess: [f64; STAGES],
}

impl Gathered {
    pub fn new(port: &Port, closing_rad: f64) -> Self {
        let size = port.rest + 2;
        let pair = || {
            [1.0, -1.0].map(|sign: f64| Extreme {
                sign,
                v: -sign * f64::INFINITY,
                seen: -sign * f64::INFINITY,
                within: None,
            })
        };
        Self {
            moment: vec![0.0; size * size],
            first: vec![0.0; size],
            closed_switch: 0.0,
            open_switch: 0.0,
            diode: 0.0,
            edges: 0.0,
            charge: [0.0; 2],
            harmonics: [Complex64::ZERO; HARMONICS],
            closed: pair(),
            open: pair(),
            starts: Vec::new(),
            conductions: 0,
            closing_rad,
            scratch: vec![0.0; size],
            was: Side::Above,
        }
    }

    fn watch(&mut self, engine_device: &Device, port: &Port, passed: &Passed<'_>) {
        let radau = &*RADAU;
        let (rest, h) = (port.rest, passed.step.length);
        let size = rest + 2;
        let start = &passed.start;
        self.starts.push((passed.from, start.v));
        if passed.side == Side::Below && self.was == Side::Above {
            self.conductions += 1;
        }
        self.was = passed.side;
        for i in 0..STAGES {
            let weight = h * radau.a[STAGES - 1][i];
            let v = passed.solved.v[i];
            let w = &mut self.scratch;
            w[0] = v;
            passed
                .step
                .rest_at(i, start.x, &passed.solved.v, start.u, &mut w[1..=rest]);
            w[rest + 1] = start.u;
            for p in 0..size {
                self.first[p] += weight * w[p];
                for q in 0..size {
                    self.moment[p * size + q] += weight * w[p] * w[q];
                }
            }
            let channel = engine_device.channel(passed.throw, v).0;
            let diode = engine_device.diode(passed.side, v).0;
            let loss = weight * channel * v;
            match passed.throw {
                Throw::Closed => self.closed_switch += loss,
                Throw::Open => self.open_switch += loss,
            }
            self.diode += weight * diode * v;
            self.edges += weight * start.source * v;
            let x = &w[1..=rest];
            let flow =
                port.alpha * v + super::port::dot(&port.a, x) + port.beta * start.u + start.source
                    - channel
                    - diode;
            self.charge[0] += weight * flow;
            self.charge[1] += weight * flow.abs();
            let load = port.load.at(v, x, start.u);
            let turn = Complex64::cis(-(self.closing_rad + passed.from + radau.nodes[i] * h));
            let mut phase = turn;
            for harmonic in &mut self.harmonics {
                *harmonic += weight * load * phase;
                phase *= turn;
            }
        }
        let pair = match passed.throw {
            Throw::Closed => &mut self.closed,
            Throw::Open => &mut self.open,
        };
        let poly = radau.polynomial(start.v, &passed.solved.v);
        for extreme in pair {
            extreme.watch(passed, &poly);
        }
    }

    /// Solves again for every extreme inside a step.
    pub fn sharpen(&mut self, engine: &mut Engine, scales: &Scales) {
        for extreme in self.closed.iter_mut().chain(&mut self.open) {
            if let Some(within) = extreme.within.take() {
                let begin = Start {
                    v: within.v,
                    q: within.q,
                    x: &within.x,
                    u: within.u,
                    source: within.source,
                };
                if let Some(v) = engine.part(
                    &begin,
                    within.throw,
                    within.side,
                    within.length,
                    &within.guess,
                    scales,
                ) {
                    // Rounding must not take a flat extreme past what was met.
                    extreme.v = if extreme.sign * (v - extreme.seen) > 0.0 {
                        v
                    } else {
                        extreme.seen
                    };
                }
            }
        }
    }
}

/// Sums that follow the last period of a solution.
#[derive(Debug)]
pub struct Gatherer {
    pub sums: Gathered,
    port: Arc<Port>,
    device: Device,
}

impl Gatherer {
    pub fn new(port: &Arc<Port>, device: &Device, closing_rad: f64) -> Self {
        Self {
            sums: Gathered::new(port, closing_rad),
            port: Arc::clone(port),
            device: device.clone(),
        }
    }
}

impl Observe for Gatherer {
    fn begin(&mut self) {
        self.sums = Gathered::new(&self.port, self.sums.closing_rad);
    }

    fn step(&mut self, passed: &Passed<'_>) {
        self.sums.watch(&self.device, &self.port, passed);
    }
}

impl Extreme {
    fn watch(&mut self, passed: &Passed<'_>, poly: &[f64; STAGES]) {
        let start = passed.start.v;
        let better = |best: f64, v: f64| self.sign * (v - best) > 0.0;
        let mut best = self.v;
        for v in [start, passed.solved.v[STAGES - 1]] {
            if self.sign * (v - self.seen) > 0.0 {
                self.seen = v;
            }
            if better(best, v) {
                best = v;
                self.within = None;
            }
        }
        // Turns of the dense output between its nodes.
        let mut low = 0.0;
        let mut slope_low = self.sign * poly[0];
        for &high in &RADAU.nodes {
            let slope_high = self.sign * evaluate(start, poly, high).1;
            if slope_low > 0.0 && slope_high < 0.0 {
                let (mut a, mut b) = (low, high);
                for _ in 0..50 {
                    let middle = 0.5 * (a + b);
                    if self.sign * evaluate(start, poly, middle).1 > 0.0 {
                        a = middle;
                    } else {
                        b = middle;
                    }
                }
                let theta = 0.5 * (a + b);
                let v = evaluate(start, poly, theta).0;
                if self.sign * (v - best) > 0.0 {
                    best = v;
                    self.within = Some(Within {
                        v: start,
                        q: passed.start.q,
                        x: passed.start.x.to_vec(),
                        u: passed.start.u,
                        source: passed.start.source,
                        length: theta * passed.step.length,
                        throw: passed.throw,
                        side: passed.side,
                        guess: RADAU.nodes.map(|c| evaluate(start, poly, c * theta).0),
                    });
                }
            }
            (low, slope_low) = (high, slope_high);
        }
        self.v = best;
    }
}
