//! The naive twin of curved stages: settled in time, step by small step.
//!
//! One step of an L-stable diagonally implicit rule of order 2 (R. Alexander, SIAM J. Numer. Anal. 14, 1977) is two
//! steps of the backward Euler rule of length `g h`, `g = 1 - 1/sqrt(2)`, the second from `y0 + (1 - g)/g (y1 - y0)`.
//! In each, every element but those at the drain becomes a conductance and a source, so that the drain sees
//! `v = v0 + z i` with the charge and the device's current in `i`: one equation in `v`, bisected after Newton's steps
//! leave its bracket.
//!
//! It settles from rest with coarse steps, then with finer ones; figures at two step sizes are extrapolated to steps of
//! no length.
//!
//! No state equations, no events, no normalisation: volts, amperes, coulombs, seconds. The first part of each segment
//! is stepped finely, where the switch has just been thrown.

use std::f64::consts::{FRAC_1_SQRT_2, TAU};

use nalgebra::DMatrix;
use num_complex::Complex64;
use quietedge::orbit::Drive;
use quietedge::stage::{DrainCurve, Element, Feed, Stage};

use super::twin::Network;

const GAMMA: f64 = 1.0 - FRAC_1_SQRT_2;

/// The part of the period behind each throw of the switch that is stepped finely.
const FINE_PART: f64 = 0.01;

/// Steps in each part of each segment: the first to settle from rest, the others to be extrapolated.
const STEPS: [usize; 3] = [50, 200, 400];

/// Phasor, supply, power and closing voltage move by less than this part of themselves in a period.
const SETTLED: f64 = 1e-8;

/// The slowest stage of the bank takes about so many to settle.
const MOST_PERIODS: usize = 1500;

/// What the twin finds. Fields as in `Orbit`.
#[derive(Debug, Clone, Copy, Default)]
pub struct CurvedTwin {
    pub output_v: Complex64,
    pub supply_a: f64,
    pub load_w: f64,
    pub switch_w: f64,
    pub diode_w: f64,
    pub switch_peak_v: f64,
    pub switch_min_v: f64,
    pub closing_v: f64,
    /// Mean drain voltage, for the condition of a choke.
    pub drain_v: f64,
}

impl CurvedTwin {
    /// From figures at one step and at half of it to none: errors in the square of the step.
    fn extrapolated(&self, fine: &Self) -> Self {
        let limit = |rough: f64, fine: f64| (4.0 * fine - rough) / 3.0;
        Self {
            output_v: (4.0 * fine.output_v - self.output_v) / 3.0,
            supply_a: limit(self.supply_a, fine.supply_a),
            load_w: limit(self.load_w, fine.load_w),
            switch_w: limit(self.switch_w, fine.switch_w),
            diode_w: limit(self.diode_w, fine.diode_w),
            switch_peak_v: limit(self.switch_peak_v, fine.switch_peak_v),
            switch_min_v: limit(self.switch_min_v, fine.switch_min_v),
            closing_v: limit(self.closing_v, fine.closing_v),
            drain_v: limit(self.drain_v, fine.drain_v),
        }
    }
}

/// What hangs on the drain beside the ladder.
struct Drain<'a> {
    stage: &'a Stage,
    /// A capacitance that stands among the conductances, so that no node floats; what the charge has beside it is
    /// the drain's own equation.
    stand_in_f: f64,
    fixed_f: f64,
    /// Voltage, charge and capacitance of a table, finely.
    table: Vec<[f64; 3]>,
}

impl<'a> Drain<'a> {
    fn new(stage: &'a Stage) -> Self {
        let mut table = Vec::new();
        if let Some(curve @ DrainCurve::Table(points)) = &stage.drain_curve {
            // The trapezoidal rule, finely, outside the points as well.
            let (low, high) = (-20.0, points[points.len() - 1].0.max(20.0) * 1.2);
            let count = 60_000;
            let width = (high - low) / f64::from(count);
            let mut charge = 0.0;
            let mut last = curve.capacitance_f(low);
            for index in 0..=count {
                let volt = low + width * f64::from(index);
                let farad = curve.capacitance_f(volt);
                if index > 0 {
                    charge += 0.5 * width * (last + farad);
                }
                last = farad;
                table.push([volt, charge, farad]);
            }
        }
        let mut drain = Self {
            stage,
            stand_in_f: 0.0,
            fixed_f: stage.drain_f + stage.gate_coupling_f,
            table,
        };
        drain.stand_in_f = drain.charge(stage.supply_v).1;
        drain
    }

    /// Charge and capacitance.
    fn charge(&self, v: f64) -> (f64, f64) {
        let (q, c) = match &self.stage.drain_curve {
            None => (0.0, 0.0),
            Some(DrainCurve::Junction(j)) => {
                let (c0, phi, m) = (j.zero_bias_f, j.potential_v, j.grading);
                let law = |v: f64| {
                    let base = 1.0 + v / phi;
                    (
                        c0 * phi * (base.powf(1.0 - m) - 1.0) / (1.0 - m),
                        c0 * base.powf(-m),
                    )
                };
                let at = -0.5 * phi;
                if v >= at {
                    law(v)
                } else {
                    let (q, c) = law(at);
                    let slope = -m * c / (0.5 * phi);
                    let d = v - at;
                    (q + d * c + 0.5 * d * d * slope, c + d * slope)
                }
            }
            Some(DrainCurve::Table(_)) => {
                let (low, high) = (self.table[0][0], self.table[self.table.len() - 1][0]);
                let share = (v - low) / (high - low) * (self.table.len() - 1) as f64;
                let at = (share.max(0.0) as usize).min(self.table.len() - 2);
                let ([from, q, c], [to, _, c_to]) = (self.table[at], self.table[at + 1]);
                // Capacitance straight between the points, its integral with it.
                let (d, slope) = (v - from, (c_to - c) / (to - from));
                (q + d * (c + 0.5 * d * slope), c + d * slope)
            }
        };
        (q + self.fixed_f * v, c + self.fixed_f)
    }

    fn switch_a(&self, closed: bool, v: f64) -> f64 {
        let switch = &self.stage.switch;
        if !closed {
            return v / switch.open_ohm;
        }
        let straight = v / switch.closed_ohm;
        switch.knee.map_or(straight, |knee| {
            let x = (straight / knee.current_a).abs();
            straight * (1.0 + x.powf(knee.sharpness)).powf(-1.0 / knee.sharpness)
        })
    }

    fn diode_a(&self, v: f64) -> f64 {
        let diode = self.stage.switch.diode;
        diode.map_or(0.0, |diode| ((v + diode.drop_v) / diode.ohm).min(0.0))
    }

    /// What flows out of the drain beside the stand-in, and how it grows with the voltage.
    fn current(&self, closed: bool, v: f64, from: &State, step_s: f64) -> (f64, f64) {
        let (q, c) = self.charge(v);
        let amps = self.switch_a(closed, v) + self.diode_a(v);
        let nudge = 1e-6 * (1.0 + v.abs());
        let more = self.switch_a(closed, v + nudge) + self.diode_a(v + nudge);
        let moved = (q - from.charge) - self.stand_in_f * (v - from.drain_v);
        (
            moved / step_s + amps,
            (c - self.stand_in_f) / step_s + (more - amps) / nudge,
        )
    }

    /// The voltage with `volt - ohm current(v) = v`.
    fn solve(&self, closed: bool, volt: f64, ohm: f64, from: &State, step_s: f64) -> f64 {
        let guess = from.drain_v;
        let gap = |v: f64| {
            let (amps, slope) = self.current(closed, v, from, step_s);
            (v - volt + ohm * amps, 1.0 + ohm * slope)
        };
        // The gap rises with v: bracket, then Newton inside it.
        let (mut low, mut high, mut width) = (guess, guess, 1.0);
        while gap(low).0 > 0.0 {
            low -= width;
            width *= 2.0;
        }
        width = 1.0;
        while gap(high).0 < 0.0 {
            high += width;
            width *= 2.0;
        }
        let mut v = guess;
        for _ in 0..200 {
            let (f, slope) = gap(v);
            if f > 0.0 {
                high = v;
            } else {
                low = v;
            }
            let newton = v - f / slope;
            let next = if newton >= low && newton <= high {
                newton
            } else {
                0.5 * (low + high)
            };
            if (next - v).abs() <= 1e-13 * (1.0 + v.abs()) {
                return next;
            }
            v = next;
        }
        v
    }
}

/// One segment of the period: from, to, whether closed, and the current that the gate pushes into the drain.
#[derive(Debug, Clone, Copy)]
struct Segment {
    length_s: f64,
    closed: bool,
    gate_a: f64,
}

fn segments(stage: &Stage, drive: &Drive) -> Vec<Segment> {
    let period_s = 1.0 / stage.frequency_hz;
    let width_s = drive.duty() * period_s;
    let segment = |length_s: f64, closed: bool, gate_a: f64| Segment {
        length_s,
        closed,
        gate_a,
    };
    let gate = stage.driver.gate.filter(|_| stage.gate_coupling_f > 0.0);
    let Some(gate) = gate else {
        return vec![
            segment(width_s, true, 0.0),
            segment(period_s - width_s, false, 0.0),
        ];
    };
    let charge = stage.gate_coupling_f * gate.swing_v;
    let (up, down) = (charge / gate.rise_s, -charge / gate.fall_s);
    let (rise, fall) = (0.5 * gate.rise_s, 0.5 * gate.fall_s);
    vec![
        segment(rise, true, up),
        segment(width_s - rise - fall, true, 0.0),
        segment(fall, true, down),
        segment(fall, false, down),
        segment(period_s - width_s - rise - fall, false, 0.0),
        segment(rise, false, up),
    ]
}

/// The conductances of a backward Euler step of `step_s`, inverted, row by row.
struct Stepping {
    inverse: Vec<f64>,
    step_s: f64,
    conductance: Vec<f64>,
}

impl Stepping {
    fn new(net: &Network, stage: &Stage, step_s: f64, stand_in_f: f64) -> Self {
        // Branch 0 is the drain's.
        let conductance: Vec<f64> = net
            .branches
            .iter()
            .enumerate()
            .map(|(index, branch)| match branch.element {
                _ if index == 0 => stand_in_f / step_s,
                Element::Resistor(ohm) => 1.0 / ohm,
                Element::Capacitor(farad) => farad / step_s,
                Element::Inductor(henry) => step_s / henry,
            })
            .collect();
        let mut matrix = DMatrix::zeros(net.nodes, net.nodes);
        let mut stamp = |from: Option<usize>, to: Option<usize>, siemens: f64| {
            for (node, other) in [(from, to), (to, from)] {
                let Some(node) = node else { continue };
                matrix[(node, node)] += siemens;
                if let Some(other) = other {
                    matrix[(node, other)] -= siemens;
                }
            }
        };
        for (branch, siemens) in net.branches.iter().zip(&conductance) {
            stamp(branch.from, branch.to, *siemens);
        }
        stamp(Some(net.load), None, 1.0 / stage.load.ohm);
        if let Some((source, _)) = net.supply {
            matrix.row_mut(source).fill(0.0);
            matrix[(source, source)] = 1.0;
        }
        Self {
            inverse: inverse(&matrix),
            step_s,
            conductance,
        }
    }
}

/// The inverse row by row, of a matrix whose conductances span many decades: scaled to ones on its diagonal, and
/// refined once.
fn inverse(matrix: &DMatrix<f64>) -> Vec<f64> {
    let count = matrix.nrows();
    let scale = |at: usize| matrix[(at, at)].abs().sqrt().recip();
    let scaled = DMatrix::from_fn(count, count, |i, j| scale(i) * matrix[(i, j)] * scale(j));
    let rough = scaled.clone().try_inverse().expect("a solution");
    let left = DMatrix::identity(count, count) - &scaled * &rough;
    let better = &rough + &rough * left;
    (0..count * count)
        .map(|k| (k / count, k % count))
        .map(|(i, j)| scale(i) * better[(i, j)] * scale(j))
        .collect()
}

/// Everything that moves.
#[derive(Debug, Clone)]
struct State {
    /// Capacitor voltages and inductor currents by branch.
    held: Vec<f64>,
    charge: f64,
    drain_v: f64,
}

struct Run<'a> {
    net: Network,
    drain: Drain<'a>,
    load_ohm: f64,
    /// Supply voltage, or the choke's current.
    input: f64,
    node_v: Vec<f64>,
    injected: Vec<f64>,
}

impl Run<'_> {
    /// A backward Euler step from `from`; the node voltages at its end stay in `node_v`.
    fn euler(&mut self, at: &Stepping, closed: bool, gate_a: f64, from: &State, to: &mut State) {
        let nodes = self.net.nodes;
        self.injected.fill(0.0);
        let parts = self
            .net
            .branches
            .iter()
            .zip(&at.conductance)
            .zip(&from.held);
        for ((branch, siemens), held) in parts.skip(1) {
            let current = match branch.element {
                Element::Resistor(_) => continue,
                Element::Capacitor(_) => siemens * held,
                Element::Inductor(_) => -held,
            };
            if let Some(node) = branch.from {
                self.injected[node] += current;
            }
            if let Some(node) = branch.to {
                self.injected[node] -= current;
            }
        }
        match self.net.supply {
            Some((source, _)) => self.injected[source] = self.input,
            None => self.injected[0] += self.input,
        }
        self.injected[0] += gate_a + at.conductance[0] * from.drain_v;
        for row in 0..nodes {
            let conductances = &at.inverse[row * nodes..(row + 1) * nodes];
            let products = conductances.iter().zip(&self.injected);
            self.node_v[row] = products.map(|(ohm, amps)| ohm * amps).sum();
        }
        let ohm = at.inverse[0];
        let open_v = self.node_v[0];
        let v = self.drain.solve(closed, open_v, ohm, from, at.step_s);
        let current = -self.drain.current(closed, v, from, at.step_s).0;
        for row in 0..nodes {
            self.node_v[row] += at.inverse[row * nodes] * current;
        }
        let parts = self.net.branches.iter().zip(&at.conductance);
        for (((branch, siemens), held), before) in parts.zip(&mut to.held).zip(&from.held) {
            let volt = branch.from.map_or(0.0, |node| self.node_v[node])
                - branch.to.map_or(0.0, |node| self.node_v[node]);
            match branch.element {
                Element::Resistor(_) => {}
                Element::Capacitor(_) => *held = volt,
                Element::Inductor(_) => *held = before + siemens * volt,
            }
        }
        to.charge = self.drain.charge(v).0;
        to.drain_v = v;
    }
}

/// The orbit at `supply_v`, settled from rest; `choke_a` is the current of an ideal choke.
pub fn curved_twin(stage: &Stage, supply_v: f64, choke_a: f64, drive: &Drive) -> CurvedTwin {
    let period_s = 1.0 / stage.frequency_hz;
    let (mut run, mut state) = at_rest(stage, supply_v, choke_a);
    // Each run starts where the one before settled.
    let [_, rough, fine] = STEPS.map(|steps| {
        let plan = plan(&run, stage, drive, steps);
        settled(&mut run, &plan, steps, drive, period_s, &mut state)
    });
    rough.extrapolated(&fine)
}

/// A stage before anything happens.
fn at_rest(stage: &Stage, supply_v: f64, choke_a: f64) -> (Run<'_>, State) {
    let net = Network::new(stage);
    let branches = net.branches.len();
    let run = Run {
        node_v: vec![0.0; net.nodes],
        injected: vec![0.0; net.nodes],
        drain: Drain::new(stage),
        load_ohm: stage.load.ohm,
        input: match stage.feed {
            Feed::Inductor { .. } | Feed::Direct => supply_v,
            Feed::Choke { .. } => choke_a,
        },
        net,
    };
    let state = State {
        held: vec![0.0; branches],
        charge: run.drain.charge(0.0).0,
        drain_v: 0.0,
    };
    (run, state)
}

/// The closing voltages of the last of `periods` periods from rest.
pub fn closings(stage: &Stage, supply_v: f64, drive: &Drive, periods: usize) -> Vec<f64> {
    let steps = STEPS[1];
    let (mut run, mut state) = at_rest(stage, supply_v, 0.0);
    let plan = plan(&run, stage, drive, steps);
    let period_s = 1.0 / stage.frequency_hz;
    let mut one = || one_period(&mut run, &plan, steps, drive, period_s, &mut state).closing_v;
    (0..periods).map(|_| one()).skip(periods - 4).collect()
}

/// Every part of the period with its steps.
fn plan(run: &Run<'_>, stage: &Stage, drive: &Drive, steps: usize) -> Vec<(Segment, Stepping)> {
    let period_s = 1.0 / stage.frequency_hz;
    segments(stage, drive)
        .into_iter()
        .flat_map(|segment| {
            // The gate's edges are short enough as they are.
            let fine_s = FINE_PART * period_s;
            let parts = if segment.length_s > 4.0 * fine_s {
                vec![fine_s, segment.length_s - fine_s]
            } else {
                vec![segment.length_s]
            };
            parts.into_iter().map(move |length_s| Segment {
                length_s,
                ..segment
            })
        })
        .map(|part| {
            let step_s = part.length_s / steps as f64;
            (
                part,
                Stepping::new(&run.net, stage, GAMMA * step_s, run.drain.stand_in_f),
            )
        })
        .collect()
}

/// The period that `state` settles to, or comes nearest to in as many periods as are worth it.
fn settled(
    run: &mut Run<'_>,
    plan: &[(Segment, Stepping)],
    steps: usize,
    drive: &Drive,
    period_s: f64,
    state: &mut State,
) -> CurvedTwin {
    let mut last = CurvedTwin::default();
    for _ in 0..MOST_PERIODS {
        let twin = one_period(run, plan, steps, drive, period_s, state);
        let moved = [
            (twin.output_v - last.output_v).norm() / twin.output_v.norm(),
            (twin.load_w - last.load_w).abs() / twin.load_w,
            (twin.supply_a - last.supply_a).abs() / twin.supply_a.abs(),
            (twin.closing_v - last.closing_v).abs() / twin.switch_peak_v,
        ];
        last = twin;
        if moved.iter().all(|moved| *moved < SETTLED) {
            break;
        }
    }
    last
}

fn one_period(
    run: &mut Run<'_>,
    plan: &[(Segment, Stepping)],
    steps: usize,
    drive: &Drive,
    period_s: f64,
    state: &mut State,
) -> CurvedTwin {
    let mut twin = CurvedTwin {
        switch_peak_v: state.drain_v,
        switch_min_v: state.drain_v,
        ..CurvedTwin::default()
    };
    let mut time_s = drive.closing_rad / TAU * period_s;
    let mut inner = state.clone();
    let mut start = state.clone();
    for (segment, stepping) in plan {
        let step_s = segment.length_s / steps as f64;
        for _ in 0..steps {
            start.clone_from(state);
            // Quadrature of the same rule: weights 1 - g at the inner stage, g at the end.
            for (stage_at, weight) in [(GAMMA, 1.0 - GAMMA), (1.0, GAMMA)] {
                if stage_at == GAMMA {
                    run.euler(stepping, segment.closed, segment.gate_a, &start, &mut inner);
                } else {
                    let push = (1.0 - GAMMA) / GAMMA;
                    for (held, moved) in start.held.iter_mut().zip(&inner.held) {
                        *held += push * (moved - *held);
                    }
                    start.charge += push * (inner.charge - start.charge);
                    start.drain_v = inner.drain_v;
                    state.held.clone_from(&start.held);
                    run.euler(stepping, segment.closed, segment.gate_a, &start, state);
                }
                let share = weight * step_s / period_s;
                let at_rad = TAU * (time_s + stage_at * step_s) / period_s;
                let load_v = run.node_v[run.net.load];
                let v = run.node_v[0];
                twin.output_v += 2.0 * share * load_v * Complex64::cis(-at_rad);
                twin.load_w += share * load_v * load_v / run.load_ohm;
                twin.drain_v += share * v;
                twin.switch_w += share * v * run.drain.switch_a(segment.closed, v);
                twin.diode_w += share * v * run.drain.diode_a(v);
                twin.supply_a += share
                    * match run.net.supply {
                        Some((_, coil)) if stage_at == GAMMA => inner.held[coil],
                        Some((_, coil)) => state.held[coil],
                        None => run.input,
                    };
            }
            twin.switch_peak_v = twin.switch_peak_v.max(state.drain_v);
            twin.switch_min_v = twin.switch_min_v.min(state.drain_v);
            time_s += step_s;
        }
    }
    twin.closing_v = state.drain_v;
    twin
}
