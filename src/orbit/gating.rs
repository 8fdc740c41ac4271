//! What happens when a stage at rest is gated on, and gated off again: the envelope's own time constants, and what the
//! two transitions take from the supply beside the steady state.
//!
//! A linear stage is run exactly, period by period: from rest (switch open for ever) into its orbit, and from there with
//! the switch left open. The carrier's phasor of every period over that of the orbit, `g_n`, is then written in the
//! one or two of the network's own modes that fit it best,
//!
//! ```text
//! rise: g(t) = 1 - sum a exp(p t),   fall: g(t) = sum a exp(p t),   p = f ln(multiplier of a period)
//! ```
//!
//! where a period's phasor is the mean of `exp(p t)` over it. The energies are sums of the exact periods.

use nalgebra::DMatrix;
use num_complex::Complex64;

use super::network::{Drive, Model, Network, OrbitError, check, intervals};

/// Left of a transition when it counts as over.
const SETTLED: f64 = 1e-8;

/// Periods past which a transition is cut off.
const LONGEST: usize = 20_000;

/// Rows of the fit.
const ROWS: usize = 1000;

/// One mode is enough where it leaves less than this (RMS over the transition, of its own RMS).
const GOOD_FIT: f64 = 0.01;

/// One mode of a transition of the envelope.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Decay {
    /// Pole of the envelope about the carrier, 1/s; its real part is negative.
    pub pole_per_s: Complex64,
    /// Part of the full output, at the edge of the gate.
    pub amount: Complex64,
}

/// How a stage answers its gate.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Gating {
    /// What is missing of the output after the gate opens.
    pub rise: Vec<Decay>,
    /// What is left of the output after the gate closes.
    pub fall: Vec<Decay>,
    /// Drawn from the supply by one rise more than the steady state would draw from the edge on, J.
    pub rise_j: f64,
    /// Drawn from the supply by one fall, J.
    pub fall_j: f64,
    /// Drawn while it is off, W.
    pub off_w: f64,
    /// Until 1 % is left of a rise, s.
    pub rise_s: f64,
    /// Until 1 % is left of a fall, s.
    pub fall_s: f64,
    /// What the modes leave of the two transitions: RMS over that of the transition, the larger one.
    pub fit: f64,
}

/// Periods of a unit stage, gated.
#[derive(Debug, Clone)]
pub(super) struct GateRun {
    /// Phasor and mean supply current of every period.
    pub on: Vec<(Complex64, f64)>,
    /// The same after the gate has closed.
    pub off: Vec<(Complex64, f64)>,
    /// Supply current at rest.
    pub rest: f64,
    /// Phasor and mean supply current of the orbit.
    pub orbit: (Complex64, f64),
}

/// Integrals over a transition that begins at the gate's edge, s.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct TransitionArea {
    /// Of the real part of the modes' sum.
    pub straight_s: f64,
    /// Of its squared magnitude.
    pub squared_s: f64,
}

impl TransitionArea {
    /// Of `decays`.
    pub fn of(decays: &[Decay]) -> Self {
        let straight: Complex64 = decays.iter().map(|d| -d.amount / d.pole_per_s).sum();
        let mut squared = Complex64::ZERO;
        for a in decays {
            for b in decays {
                squared -= a.amount * b.amount.conj() / (a.pole_per_s + b.pole_per_s.conj());
            }
        }
        Self {
            straight_s: straight.re,
            squared_s: squared.re,
        }
    }
}

impl Gating {
    /// A stage of which only one time constant is known.
    pub fn of_time_constants(rise_s: f64, fall_s: f64) -> Self {
        let decay = |tau_s: f64| {
            let pole_per_s = Complex64::from(-1.0 / tau_s);
            let amount = Complex64::ONE;
            (tau_s > 0.0).then_some(Decay { pole_per_s, amount })
        };
        Self {
            rise: decay(rise_s).into_iter().collect(),
            fall: decay(fall_s).into_iter().collect(),
            rise_j: 0.0,
            fall_j: 0.0,
            off_w: 0.0,
            rise_s: 100f64.ln() * rise_s,
            fall_s: 100f64.ln() * fall_s,
            fit: 0.0,
        }
    }
}

impl Network {
    /// How the stage answers its gate at `supply_v` with `drive`. An ideal choke keeps its current, which cannot be
    /// gated, and a curved stage has no modes: for these `None`.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn gating(&self, supply_v: f64, drive: &Drive) -> Result<Option<Gating>, OrbitError> {
        check(supply_v, drive)?;
        let Model::Linear(linear) = self.model() else {
            return Ok(None);
        };
        let schedule = intervals(self.stage(), drive)?;
        let on_map = linear.solver.period_map(&schedule)?;
        let Some(off_map) = linear.solver.open_map() else {
            return Ok(None);
        };
        let periods = |map: &DMatrix<f64>| {
            let radius = map
                .complex_eigenvalues()
                .iter()
                .map(|m| m.norm())
                .fold(0.0, f64::max);
            let needed = SETTLED.ln() / radius.max(1e-9).ln();
            if needed > 0.0 && needed.is_finite() {
                (needed.ceil() as usize).clamp(16, LONGEST)
            } else {
                LONGEST
            }
        };
        let counts = [periods(&on_map), periods(&off_map)];
        let Some(run) = linear.solver.gate(&schedule, counts)? else {
            return Ok(None);
        };
        let stage = self.stage();
        let period_s = stage.period_s();
        let (full, steady) = run.orbit;
        let missing: Vec<Complex64> = run.on.iter().map(|(v, _)| 1.0 - v / full).collect();
        let left: Vec<Complex64> = run.off.iter().map(|(v, _)| v / full).collect();
        let (rise, rise_fit) = modes(&missing, &on_map, period_s);
        let (fall, fall_fit) = modes(&left, &off_map, period_s);
        // Currents of a unit stage count in volts across the load.
        let watt = supply_v * supply_v / stage.load.ohm;
        let joule = watt * period_s;
        let sum = |periods: &[(Complex64, f64)], level: f64| -> f64 {
            periods.iter().map(|(_, current)| current - level).sum()
        };
        let settled = |rest: &[Complex64]| {
            let last = rest
                .iter()
                .rposition(|r| r.norm() > 0.01)
                .map_or(0, |at| at + 1);
            last as f64 * period_s
        };
        Ok(Some(Gating {
            rise,
            fall,
            rise_j: joule * sum(&run.on, steady),
            fall_j: joule * sum(&run.off, run.rest),
            off_w: watt * run.rest,
            rise_s: settled(&missing),
            fall_s: settled(&left),
            fit: rise_fit.max(fall_fit),
        }))
    }
}

/// The one or two modes that fit `rest` best, and what they leave of it.
fn modes(rest: &[Complex64], map: &DMatrix<f64>, period_s: f64) -> (Vec<Decay>, f64) {
    let energy: f64 = rest.iter().map(|r| r.norm_sqr()).sum();
    if energy == 0.0 {
        return (Vec::new(), 0.0);
    }
    let poles: Vec<Complex64> = map
        .complex_eigenvalues()
        .iter()
        .filter(|m| m.norm() > 1e-9 && m.norm() < 1.0)
        .map(|m| m.ln())
        .collect();
    let stride = rest.len().div_ceil(ROWS);
    let rows: Vec<(f64, Complex64)> = rest
        .iter()
        .enumerate()
        .step_by(stride)
        .map(|(n, r)| (n as f64, *r))
        .collect();
    let total: f64 = rows.iter().map(|(_, r)| r.norm_sqr()).sum();
    let column = |pole: Complex64| -> Vec<Complex64> {
        // Mean of exp(p t) over the period that starts at n.
        let mean = (pole.exp() - 1.0) / pole;
        rows.iter().map(|(n, _)| (pole * n).exp() * mean).collect()
    };
    let columns: Vec<Vec<Complex64>> = poles.iter().map(|&pole| column(pole)).collect();
    let inner = |a: &[Complex64], b: &[Complex64]| -> Complex64 {
        a.iter().zip(b).map(|(a, b)| a.conj() * b).sum()
    };
    let right: Vec<Complex64> = rows.iter().map(|(_, r)| *r).collect();
    let mut best: (f64, Vec<(usize, Complex64)>) = (1.0, Vec::new());
    for (i, a) in columns.iter().enumerate() {
        let (aa, ar) = (inner(a, a).re, inner(a, &right));
        let one = 1.0 - ar.norm_sqr() / aa / total;
        if one < best.0 {
            best = (one, vec![(i, ar / aa)]);
        }
    }
    if best.0.max(0.0).sqrt() > GOOD_FIT {
        for (i, a) in columns.iter().enumerate() {
            for (j, b) in columns.iter().enumerate().skip(i + 1) {
                let (aa, bb, ab) = (inner(a, a).re, inner(b, b).re, inner(a, b));
                let (ar, br) = (inner(a, &right), inner(b, &right));
                let determinant = aa * bb - ab.norm_sqr();
                if determinant < 1e-9 * aa * bb {
                    continue;
                }
                let x = (ar * bb - ab * br) / determinant;
                let y = (br * aa - ab.conj() * ar) / determinant;
                let explained = (x.conj() * ar + y.conj() * br).re;
                let two = 1.0 - explained / total;
                if two < best.0 {
                    best = (two, vec![(i, x), (j, y)]);
                }
            }
        }
    }
    let decays = best
        .1
        .iter()
        .map(|&(at, amount)| Decay {
            pole_per_s: poles[at] / period_s,
            amount,
        })
        .collect();
    (decays, best.0.max(0.0).sqrt())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stage::Stage;

    fn network() -> Network {
        let text = include_str!("../../signals/tide-gauge.stage.toml");
        let stage = Stage::parse("stage.toml", text).unwrap();
        Network::new(&stage).unwrap()
    }

    #[test]
    fn a_gated_stage_ends_in_its_orbit_with_its_own_time_constant() {
        let network = network();
        let stage = network.stage().clone();
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let gating = network.gating(stage.supply_v, &drive).unwrap().unwrap();
        let slowest = |decays: &[Decay]| {
            decays
                .iter()
                .map(|d| -1.0 / d.pole_per_s.re)
                .fold(0.0, f64::max)
        };
        let settling_s = network.settling_s(&drive);
        assert!(slowest(&gating.rise) <= settling_s * (1.0 + 1e-9));
        assert!(gating.rise_s > settling_s && gating.rise_s < 12.0 * settling_s);
        // What the modes leave of the transitions of this stage.
        assert!(gating.fit < 0.15, "{gating:?}");
        // An open switch leaks the supply squared over its resistance (the feed's own is a millionth of it).
        let leak = stage.supply_v.powi(2) / stage.switch.open_ohm;
        assert!((gating.off_w / leak - 1.0).abs() < 1e-5, "{gating:?}");
    }

    #[test]
    fn energy_of_a_fall_is_what_the_feed_still_takes() {
        // All of it comes from the supply after the gate has closed; it cannot exceed what is stored and asked for
        // by a few periods of full power.
        let network = network();
        let stage = network.stage().clone();
        let drive = Drive::new(&stage.driver, stage.driver.duty);
        let gating = network.gating(stage.supply_v, &drive).unwrap().unwrap();
        let orbit = network.orbit(stage.supply_v, &drive).unwrap();
        let settled_j = orbit.supply_w * (gating.rise_s + gating.fall_s);
        assert!(
            gating.rise_j.abs() < settled_j && gating.fall_j.abs() < settled_j,
            "{gating:?}"
        );
    }
}
