//! One step of the port equations, with the rest eliminated.
//!
//! The rest is linear, so its stage values follow from those of the drain voltage:
//! `X = Phi x_0 + Psi v + chi u`. What is left is one equation in one unknown for each stage:
//!
//! ```text
//! q(v_i) - q(v_0) = (K x_0 + M v + kappa u)_i + h c_i s - h sum_j a_ij i(v_j)
//! ```
//!
//! with the current `s` of the gate's edge and the device's current `i`. All matrices depend on the step's length
//! only and are kept.

use super::factors::{Eliminated, Factors};
use super::port::{Port, dot};
use crate::math::radau::{RADAU, STAGES};

/// Everything about one length.
#[derive(Debug, Clone)]
pub struct Step {
    pub length: f64,
    /// For each stage `rest x rest`, row by row.
    phi: Vec<f64>,
    /// For each stage `rest x STAGES`.
    psi: Vec<f64>,
    /// For each stage `rest`.
    chi: Vec<f64>,
    /// `STAGES x rest`.
    k: Vec<f64>,
    m: [[f64; STAGES]; STAGES],
    kappa: [f64; STAGES],
    /// The filtered error of the rest: from `x_0`, from the start's voltage and the stages', from `u`.
    error_x: Vec<f64>,
    error_v: Vec<f64>,
    error_u: Vec<f64>,
    rest: usize,
}

/// How a step starts and what acts on it besides the port.
#[derive(Debug, Clone, Copy)]
pub struct Start<'a> {
    pub v: f64,
    pub q: f64,
    pub x: &'a [f64],
    pub u: f64,
    pub source: f64,
}

/// The solved stages.
#[derive(Debug, Clone)]
pub struct Solved {
    pub v: [f64; STAGES],
    pub q: [f64; STAGES],
    pub c: [f64; STAGES],
    pub i: [f64; STAGES],
    pub g: [f64; STAGES],
    factors: Factors,
}

/// The most iterations of one step: convergence is quadratic, more than this many means too long a step.
const MAX_ITERATIONS: usize = 12;

/// The change of the voltages, relative to their scale, after which they are exact to rounding: convergence is
/// quadratic, with a factor of the capacitance's relative slope.
const ACCEPTED: f64 = 1e-7;

impl Step {
    pub fn new(port: &Port, length: f64) -> Option<Self> {
        let n = port.rest;
        let radau = &*RADAU;
        let s = STAGES;
        let h = length;
        // Columns: x_0, the stages' v, u.
        let columns = n + s + 1;
        let mut stages = Eliminated::new(s * n, columns, |row, column| {
            let (i, p) = (row / n, row % n);
            if column < s * n {
                let (j, q) = (column / n, column % n);
                let unit = if row == column { 1.0 } else { 0.0 };
                return unit - h * radau.a[i][j] * port.b[p * n + q];
            }
            let column = column - s * n;
            if column < n {
                f64::from(u8::from(p == column))
            } else if column < n + s {
                h * radau.a[i][column - n] * port.c[p]
            } else {
                h * radau.nodes[i] * port.d[p]
            }
        });
        stages.solve()?;
        let mut phi = Vec::with_capacity(s * n * n);
        let mut psi = Vec::with_capacity(s * n * s);
        let mut chi = Vec::with_capacity(s * n);
        for row in 0..s * n {
            let row = stages.row(row);
            phi.extend_from_slice(&row[..n]);
            psi.extend_from_slice(&row[n..n + s]);
            chi.push(row[n + s]);
        }
        // a . X for every column, then h A times that.
        let mut seen = vec![0.0; s * columns];
        for j in 0..s {
            for p in 0..n {
                for (sum, x) in seen[j * columns..(j + 1) * columns]
                    .iter_mut()
                    .zip(stages.row(j * n + p))
                {
                    *sum += port.a[p] * x;
                }
            }
        }
        let gathered = |i: usize, column: usize| -> f64 {
            (0..s)
                .map(|j| h * radau.a[i][j] * seen[j * columns + column])
                .sum()
        };
        let k = (0..s * n).map(|at| gathered(at / n, at % n)).collect();
        let m = std::array::from_fn(|i| {
            std::array::from_fn(|j| h * port.alpha * radau.a[i][j] + gathered(i, n + j))
        });
        let kappa = std::array::from_fn(|i| h * port.beta * radau.nodes[i] + gathered(i, n + s));
        let mut step = Self {
            length,
            phi,
            psi,
            chi,
            k,
            m,
            kappa,
            error_x: Vec::new(),
            error_v: Vec::new(),
            error_u: Vec::new(),
            rest: n,
        };
        step.estimate(port, &stages)?;
        Some(step)
    }

    /// The filtered error of the rest as a linear function of what the step knows.
    fn estimate(&mut self, port: &Port, stages: &Eliminated) -> Option<()> {
        let (n, s, h) = (self.rest, STAGES, self.length);
        let radau = &*RADAU;
        let weight = h * radau.start_weight;
        let sum: f64 = radau.error.iter().sum();
        // Columns: x_0, v_0, the stages' v, u.
        let mut error = Eliminated::new(n, n + s + 2, |p, column| {
            if column < n {
                return f64::from(u8::from(p == column)) - weight * port.b[p * n + column];
            }
            let column = column - n;
            let folded = |column: usize| -> f64 {
                (0..s)
                    .map(|i| radau.error[i] * stages.row(i * n + p)[column])
                    .sum()
            };
            if column < n {
                let unit = if p == column { sum } else { 0.0 };
                weight * port.b[p * n + column] + folded(column) - unit
            } else if column == n {
                weight * port.c[p]
            } else if column <= n + s {
                folded(column - 1)
            } else {
                weight * port.d[p] + folded(n + s)
            }
        });
        error.solve()?;
        for p in 0..n {
            let row = error.row(p);
            self.error_x.extend_from_slice(&row[..n]);
            self.error_v.extend_from_slice(&row[n..=n + s]);
            self.error_u.push(row[n + s + 1]);
        }
        Some(())
    }

    /// Solves for the stages by Newton's method from `guess`. `None` where it does not converge.
    pub fn solve(
        &self,
        start: &Start<'_>,
        guess: &[f64; STAGES],
        scale_v: f64,
        charge: impl Fn(f64) -> (f64, f64),
        current: impl Fn(f64) -> (f64, f64),
    ) -> Option<Solved> {
        let radau = &*RADAU;
        let h = self.length;
        let mut known = [0.0; STAGES];
        for (i, known) in known.iter_mut().enumerate() {
            *known = start.q
                + dot(&self.k[i * self.rest..(i + 1) * self.rest], start.x)
                + self.kappa[i] * start.u
                + h * radau.nodes[i] * start.source;
        }
        let mut solved = Solved {
            v: *guess,
            q: [0.0; STAGES],
            c: [0.0; STAGES],
            i: [0.0; STAGES],
            g: [0.0; STAGES],
            factors: Factors::default(),
        };
        let mut last = f64::INFINITY;
        for iteration in 0..MAX_ITERATIONS {
            for j in 0..STAGES {
                (solved.q[j], solved.c[j]) = charge(solved.v[j]);
                (solved.i[j], solved.g[j]) = current(solved.v[j]);
            }
            let mut matrix = [[0.0; STAGES]; STAGES];
            let mut miss = [0.0; STAGES];
            for (i, row) in matrix.iter_mut().enumerate() {
                let mut sum = known[i] - solved.q[i];
                for (j, entry) in row.iter_mut().enumerate() {
                    let a = h * radau.a[i][j];
                    sum += self.m[i][j] * solved.v[j] - a * solved.i[j];
                    *entry = a * solved.g[j] - self.m[i][j];
                }
                row[i] += solved.c[i];
                miss[i] = sum;
            }
            solved.factors = Factors::new(matrix)?;
            solved.factors.solve(&mut miss);
            let mut change = 0.0f64;
            for (v, miss) in solved.v.iter_mut().zip(&miss) {
                *v += miss;
                change = change.max(miss.abs());
            }
            if !change.is_finite() || (iteration > 3 && change > 2.0 * last) {
                return None;
            }
            if change <= ACCEPTED * scale_v {
                for (j, change) in miss.iter().enumerate() {
                    // To first order, which is to rounding here.
                    solved.q[j] += solved.c[j] * change;
                    solved.i[j] += solved.g[j] * change;
                }
                return Some(solved);
            }
            last = change;
        }
        None
    }

    /// The rest at stage `i`.
    pub fn rest_at(&self, i: usize, x: &[f64], v: &[f64; STAGES], u: f64, out: &mut [f64]) {
        let n = self.rest;
        for (p, out) in out.iter_mut().enumerate().take(n) {
            let row = i * n + p;
            *out = dot(&self.phi[row * n..(row + 1) * n], x)
                + dot(&self.psi[row * STAGES..(row + 1) * STAGES], v)
                + self.chi[row] * u;
        }
    }

    /// The largest estimated error of the rest.
    pub fn rest_error(&self, start: &Start<'_>, v: &[f64; STAGES]) -> f64 {
        let n = self.rest;
        let mut worst = 0.0f64;
        for p in 0..n {
            let row = &self.error_v[p * (STAGES + 1)..(p + 1) * (STAGES + 1)];
            let error = dot(&self.error_x[p * n..(p + 1) * n], start.x)
                + row[0] * start.v
                + dot(&row[1..], v)
                + self.error_u[p] * start.u;
            worst = worst.max(error.abs());
        }
        worst
    }

    /// Changes of the stages' voltages for changes of the start's charge, rest and input.
    pub fn vary(&self, solved: &Solved, dq: f64, dx: &[f64], du: f64) -> [f64; STAGES] {
        let n = self.rest;
        let mut change =
            std::array::from_fn(|i| dq + dot(&self.k[i * n..(i + 1) * n], dx) + self.kappa[i] * du);
        solved.factors.solve(&mut change);
        change
    }
}
