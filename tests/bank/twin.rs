//! The naive twin of the solver: the network settled in time from rest, step by small step.
//!
//! Every element is replaced over one step by what the implicit midpoint rule makes of it, and the node
//! voltages at the middle of the step follow from Kirchhoff's current law:
//!
//! ```text
//! resistor   i = v / R
//! capacitor  i = (2 C/h) (v - v0),     v0 <- 2 v - v0
//! inductor   i = i0 + h/(2 L) v,       i0 <- 2 i - i0
//! ```
//!
//! No state equations, no exponentials, no normalisation: volts, amperes, seconds. The rule is symmetric in time, so
//! that its error is a series in h^2: figures at three step sizes are extrapolated to h = 0. Slow and obvious.

use nalgebra::DMatrix;
use num_complex::Complex64;
use quietedge::orbit::Drive;
use quietedge::stage::{Arm, Element, Feed, Part, Stage};
use std::f64::consts::TAU;

/// A node of the network; ground is no node.
type Node = Option<usize>;

/// Steps in each switch position for the three runs.
const STEPS: [usize; 3] = [1024, 2048, 4096];

/// Settled: phasor and supply current move by less than this part of themselves from one period to the next. The
/// node equations at small steps leave 1e-10 of rounding.
const SETTLED: f64 = 3e-10;

const MOST_PERIODS: usize = 2_000;

#[derive(Debug, Clone)]
pub(super) struct Branch {
    pub(super) from: Node,
    pub(super) to: Node,
    pub(super) element: Element,
}

/// What the twin finds for one orbit. Fields as in `Orbit`; the loss is that in all resistors but the load.
#[derive(Debug, Clone, Copy)]
pub struct Twin {
    pub output_v: Complex64,
    pub supply_a: f64,
    pub load_w: f64,
    pub lost_w: f64,
    pub switch_peak_v: f64,
    pub switch_min_v: f64,
    pub switch_peak_a: f64,
    pub closing_v: f64,
    /// Supply power less all others, relative to it.
    pub balance: f64,
}

/// Nodes and branches of a stage without its switch and load; branch 0 is the fixed drain capacitance at node 0.
#[derive(Debug)]
pub(super) struct Network {
    pub(super) nodes: usize,
    drain: usize,
    pub(super) load: usize,
    pub(super) branches: Vec<Branch>,
    /// The node that is held at the supply, and the branch of the feed's inductor.
    pub(super) supply: Option<(usize, usize)>,
}

impl Network {
    pub(super) fn new(stage: &Stage) -> Self {
        let mut net = Self {
            nodes: 1,
            drain: 0,
            load: 0,
            branches: Vec::new(),
            supply: None,
        };
        net.branch(Some(0), None, Element::Capacitor(stage.drain_f));
        if let Feed::Inductor { henry, ohm } = stage.feed {
            // The source is ideal: its node needs no equation once its voltage is known. It is modelled as a
            // conductance of its own below, and the inductor hangs on the node.
            let source = net.node();
            let mut at = source;
            if ohm > 0.0 {
                at = net.node();
                net.branch(Some(source), Some(at), Element::Resistor(ohm));
            }
            net.branch(Some(at), Some(0), Element::Inductor(henry));
            net.supply = Some((source, net.branches.len() - 1));
        }
        let mut at = 0;
        for rung in &stage.ladder {
            match rung.arm {
                Arm::Shunt => net.chain(at, None, &rung.parts),
                Arm::Series => {
                    let next = net.node();
                    net.chain(at, Some(next), &rung.parts);
                    at = next;
                }
                Arm::Tank => {
                    let next = net.node();
                    for part in &rung.parts {
                        net.chain(at, Some(next), std::slice::from_ref(part));
                    }
                    at = next;
                }
            }
        }
        if let Some(reactance) = stage.load.reactance {
            let next = net.node();
            net.branch(Some(at), Some(next), reactance);
            at = next;
        }
        net.load = at;
        net
    }

    fn node(&mut self) -> usize {
        self.nodes += 1;
        self.nodes - 1
    }

    fn branch(&mut self, from: Node, to: Node, element: Element) {
        self.branches.push(Branch { from, to, element });
    }

    /// Loss resistances and parts one after another.
    fn chain(&mut self, from: usize, to: Node, parts: &[Part]) {
        let mut elements = Vec::new();
        for part in parts {
            if part.loss_ohm > 0.0 {
                elements.push(Element::Resistor(part.loss_ohm));
            }
            elements.push(part.element);
        }
        let mut at = from;
        for (index, element) in elements.iter().enumerate() {
            let next = if index + 1 == elements.len() {
                to
            } else {
                Some(self.node())
            };
            self.branch(Some(at), next, *element);
            at = next.unwrap_or(0);
        }
    }
}

/// One switch position with its step: the inverse of the matrix of conductances.
struct Position {
    inverse: DMatrix<f64>,
    step_s: f64,
    conductance: Vec<f64>,
    switch_ohm: f64,
}

impl Position {
    fn new(net: &Network, stage: &Stage, step_s: f64, switch_ohm: f64) -> Self {
        let conductance: Vec<f64> = net
            .branches
            .iter()
            .map(|branch| match branch.element {
                Element::Resistor(ohm) => 1.0 / ohm,
                Element::Capacitor(farad) => 2.0 * farad / step_s,
                Element::Inductor(henry) => step_s / (2.0 * henry),
            })
            .collect();
        let mut matrix = DMatrix::zeros(net.nodes, net.nodes);
        let mut stamp = |from: Node, to: Node, siemens: f64| {
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
        stamp(Some(net.drain), None, 1.0 / switch_ohm);
        if let Some((source, _)) = net.supply {
            // The row says: this node's voltage is given.
            matrix.row_mut(source).fill(0.0);
            matrix[(source, source)] = 1.0;
        }
        Self {
            inverse: matrix.try_inverse().expect("a network with a solution"),
            step_s,
            conductance,
            switch_ohm,
        }
    }
}

/// Sums over one period, all of them means.
#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    output_v: Complex64,
    supply: f64,
    drain_v: f64,
    load_w: f64,
    lost_w: f64,
}

/// The orbit of `stage` at one volt of supply, or one ampere of choke current, with so many steps in each position.
fn settle(stage: &Stage, drive: &Drive, steps: usize, state: &mut Vec<f64>) -> (Sums, Twin) {
    let net = Network::new(stage);
    let period_s = 1.0 / stage.frequency_hz;
    let lengths = [drive.duty() * period_s, (1.0 - drive.duty()) * period_s];
    let ohms = [stage.switch.closed_ohm, stage.switch.open_ohm];
    let positions = [0, 1].map(|i| Position::new(&net, stage, lengths[i] / steps as f64, ohms[i]));
    // Capacitor voltages and inductor currents by branch; resistors hold nothing.
    state.resize(net.branches.len(), 0.0);
    let drain_at = 0;
    let mut node_v = vec![0.0; net.nodes];
    let mut injected = vec![0.0; net.nodes];
    let mut last = Sums::default();
    for _ in 0..MOST_PERIODS {
        let mut sums = Sums::default();
        let mut drain = [Vec::with_capacity(steps + 1), Vec::with_capacity(steps + 1)];
        let mut time_s = drive.closing_rad / TAU * period_s;
        for (which, position) in positions.iter().enumerate() {
            let weight = position.step_s / period_s;
            drain[which].push(state[drain_at]);
            for _ in 0..steps {
                injected.fill(0.0);
                for ((branch, siemens), held) in
                    net.branches.iter().zip(&position.conductance).zip(&*state)
                {
                    let current = match branch.element {
                        Element::Resistor(_) => continue,
                        Element::Capacitor(_) => siemens * held,
                        Element::Inductor(_) => -held,
                    };
                    if let Some(node) = branch.from {
                        injected[node] += current;
                    }
                    if let Some(node) = branch.to {
                        injected[node] -= current;
                    }
                }
                match net.supply {
                    Some((source, _)) => injected[source] = 1.0,
                    None => injected[net.drain] += 1.0,
                }
                for (row, volt) in node_v.iter_mut().enumerate() {
                    *volt = (0..net.nodes)
                        .map(|column| position.inverse[(row, column)] * injected[column])
                        .sum();
                }
                let between = |branch: &Branch| {
                    branch.from.map_or(0.0, |node| node_v[node])
                        - branch.to.map_or(0.0, |node| node_v[node])
                };
                for ((branch, siemens), held) in net
                    .branches
                    .iter()
                    .zip(&position.conductance)
                    .zip(state.iter_mut())
                {
                    let volt = between(branch);
                    match branch.element {
                        Element::Resistor(ohm) => sums.lost_w += weight * volt * volt / ohm,
                        Element::Capacitor(_) => *held = 2.0 * volt - *held,
                        Element::Inductor(_) => *held += 2.0 * siemens * volt,
                    }
                }
                let middle_rad = TAU * (time_s + position.step_s / 2.0) / period_s;
                let load_v = node_v[net.load];
                sums.output_v += 2.0 * weight * load_v * Complex64::cis(-middle_rad);
                sums.load_w += weight * load_v * load_v / stage.load.ohm;
                let drain_v = node_v[net.drain];
                sums.lost_w += weight * drain_v * drain_v / position.switch_ohm;
                sums.drain_v += weight * drain_v;
                sums.supply += match net.supply {
                    // The mean of the current over the step, known as the mean of both ends' held values.
                    Some((_, coil)) => {
                        weight
                            * (state[coil]
                                - position.conductance[coil] * between(&net.branches[coil]))
                    }
                    None => weight,
                };
                drain[which].push(state[drain_at]);
                time_s += position.step_s;
            }
        }
        let change = (sums.output_v - last.output_v).norm() / sums.output_v.norm();
        let supply_change = (sums.supply - last.supply).abs() / sums.supply;
        last = sums;
        if change.max(supply_change) < SETTLED {
            let (closed, open) = (extremes(&drain[0]), extremes(&drain[1]));
            let twin = Twin {
                output_v: sums.output_v,
                supply_a: sums.supply,
                load_w: sums.load_w,
                lost_w: sums.lost_w,
                switch_peak_v: closed.1.max(open.1),
                switch_min_v: closed.0.min(open.0),
                switch_peak_a: closed.1 / stage.switch.closed_ohm,
                closing_v: state[drain_at],
                balance: 0.0,
            };
            return (sums, twin);
        }
    }
    panic!("{}: not settled in {MOST_PERIODS} periods", stage.title);
}

/// Smallest and largest value of a smooth curve from even samples: parabolas through the outermost ones.
fn extremes(samples: &[f64]) -> (f64, f64) {
    let outermost = |sign: f64| {
        let top = (0..samples.len())
            .max_by(|&a, &b| (sign * samples[a]).total_cmp(&(sign * samples[b])))
            .expect("samples");
        if top == 0 || top + 1 == samples.len() {
            return samples[top];
        }
        let (left, middle, right) = (samples[top - 1], samples[top], samples[top + 1]);
        middle - (right - left).powi(2) / (8.0 * (left - 2.0 * middle + right))
    };
    (outermost(-1.0), outermost(1.0))
}

/// The orbit at `supply_v`, extrapolated to steps of no length.
pub fn twin(stage: &Stage, supply_v: f64, drive: &Drive) -> Twin {
    let mut state = Vec::new();
    // Each finer run starts from where the coarser one settled.
    let runs = STEPS.map(|steps| {
        let (sums, unit) = settle(stage, drive, steps, &mut state);
        // A choke's ampere becomes what its mean drain voltage allows.
        let scale = match stage.feed {
            Feed::Inductor { .. } | Feed::Direct => supply_v,
            Feed::Choke { ohm } => supply_v / (sums.drain_v + ohm),
        };
        let feed_w = match stage.feed {
            Feed::Inductor { .. } | Feed::Direct => 0.0,
            Feed::Choke { ohm } => ohm * scale * scale,
        };
        Twin {
            output_v: unit.output_v * scale,
            supply_a: unit.supply_a * scale,
            load_w: unit.load_w * scale * scale,
            lost_w: unit.lost_w * scale * scale + feed_w,
            switch_peak_v: unit.switch_peak_v * scale,
            switch_min_v: unit.switch_min_v * scale,
            switch_peak_a: unit.switch_peak_a * scale,
            closing_v: unit.closing_v * scale,
            balance: 0.0,
        }
    });
    let limit = |value: fn(&Twin) -> f64| {
        let [a, b, c] = [value(&runs[0]), value(&runs[1]), value(&runs[2])];
        // Errors in h^2 and h^4, h halved each time.
        let (ab, bc) = ((4.0 * b - a) / 3.0, (4.0 * c - b) / 3.0);
        (16.0 * bc - ab) / 15.0
    };
    let finest = runs[2];
    let supply_w = finest.supply_a * supply_v;
    Twin {
        output_v: Complex64::new(limit(|t| t.output_v.re), limit(|t| t.output_v.im)),
        supply_a: limit(|t| t.supply_a),
        load_w: limit(|t| t.load_w),
        lost_w: limit(|t| t.lost_w),
        switch_peak_v: limit(|t| t.switch_peak_v),
        switch_min_v: limit(|t| t.switch_min_v),
        switch_peak_a: limit(|t| t.switch_peak_a),
        closing_v: limit(|t| t.closing_v),
        balance: (supply_w - finest.load_w - finest.lost_w) / supply_w,
    }
}
