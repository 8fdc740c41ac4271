//! Two of a stage on one load without isolation, driven at plus and minus an angle: one circuit with all their
//! switches, solved as one orbit. Each of the two sees the other.
//!
//! H. Chireix, "High power outphasing modulation", Proc. IRE 23 (1935), for the compensating reactances; F. H. Raab,
//! "Efficiency of outphasing RF power-amplifier systems", IEEE Trans. Commun., Oct. 1985, for efficiencies (both from
//! memory).

use std::f64::consts::{PI, TAU};

use super::balance::{Orbit, Scale};
use super::circuit::{Builder, Circuit, GROUND, Owner};
use super::figures::gate_charge_w;
use super::network::{Drive, Linear, NetworkError, OrbitError, check, spans};
use super::schedule::{Span, schedule};
use super::waveform::Waveform;
use crate::stage::{Element, Load, Part, Stage};

/// How the branches meet.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum JointKind {
    /// The load stands between the ends of the branches, as the primary of a transformer or a balanced antenna does.
    /// The second branch is driven half a period later, so that angle 0 is full output.
    Floating,
    /// The ends of the branches are one node, and the load stands from there to ground.
    Tee,
}

/// Opposite reactances from both branches to ground: a capacitor in the first, which leads at positive angles, an
/// inductor in the second.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Compensation {
    /// Of both at the carrier, ohm.
    pub reactance_ohm: f64,
    /// Quality factor of both at the carrier.
    pub q: Option<f64>,
    /// After how many rungs of each branch they stand; at its end where absent.
    pub after_rungs: Option<usize>,
}

/// What joins two stages.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct Joint {
    /// How they meet.
    pub kind: JointKind,
    /// The common load, ohm. Where absent, what shows each branch its stage's own load at angle 0: twice that of the
    /// stage where it floats, half of it at a tee.
    pub load_ohm: Option<f64>,
    /// How many rungs of the stage's ladder stand in each branch; the others stand once, behind the joint. All
    /// where absent.
    pub branch_rungs: Option<usize>,
    /// Compensating reactances.
    pub compensation: Option<Compensation>,
    /// How much lower the second branch's supply is, dB.
    pub gain_mismatch_db: f64,
    /// How far the second branch's drive is ahead of where it should be, rad.
    pub phase_mismatch_rad: f64,
}

impl Joint {
    /// Two like branches that meet as `kind` says.
    pub fn new(kind: JointKind) -> Self {
        Self {
            kind,
            load_ohm: None,
            branch_rungs: None,
            compensation: None,
            gain_mismatch_db: 0.0,
            phase_mismatch_rad: 0.0,
        }
    }

    /// The common load for two of `stage`, ohm.
    pub fn load_ohm_for(&self, stage: &Stage) -> f64 {
        self.load_ohm.unwrap_or(match self.kind {
            JointKind::Floating => 2.0 * stage.load.ohm,
            JointKind::Tee => 0.5 * stage.load.ohm,
        })
    }
}

/// Why two of a stage cannot be joined.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum JointError {
    /// The two together are not linear between switching instants.
    #[error(
        "two stages are joined as linear ones: this one has a junction, a table, gate coupling, a knee or a diode"
    )]
    Curved,
    /// More rungs than there are.
    #[error("{given} rungs in {what}, but there are {available}")]
    Rungs {
        /// Which part.
        what: &'static str,
        /// As given.
        given: usize,
        /// In the stage or branch.
        available: usize,
    },
    /// Both reactances at one node.
    #[error(
        "at the common node of a tee the two compensating reactances cancel: they must stand before the last rung of the branches"
    )]
    Cancels,
    /// Two drains tied together.
    #[error(
        "a tee needs something in series in each branch: the two switches would be tied together"
    )]
    NoBranch,
    /// No state equations.
    #[error(transparent)]
    Network(#[from] NetworkError),
}

/// Two stages on one load, made ready to be solved at any angle.
#[derive(Debug)]
pub struct Joined {
    stage: Stage,
    joint: Joint,
    load_ohm: f64,
    linear: Linear,
}

impl Joined {
    /// Two of `stage`, joined as `joint` says.
    ///
    /// # Errors
    /// [`JointError`].
    pub fn new(stage: &Stage, joint: &Joint) -> Result<Self, JointError> {
        if stage.is_curved() {
            return Err(JointError::Curved);
        }
        Ok(Self {
            load_ohm: joint.load_ohm_for(stage),
            linear: Linear::new(circuit(stage, joint)?)?,
            stage: stage.clone(),
            joint: *joint,
        })
    }

    /// The stage of which there are two.
    pub fn stage(&self) -> &Stage {
        &self.stage
    }

    /// What joins them.
    pub fn joint(&self) -> &Joint {
        &self.joint
    }

    /// The common load, ohm.
    pub fn load_ohm(&self) -> f64 {
        self.load_ohm
    }

    /// Number of independent states.
    pub fn states(&self) -> usize {
        self.linear.solver.states()
    }

    /// The periodic steady state at `supply_v`, the first branch ahead by `angle_rad` and the second behind by as
    /// much, at the width of `duty`. Its output is the voltage across the common load from the first branch to the
    /// second, or to ground; its drive is that of the first branch.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn orbit(&self, supply_v: f64, duty: f64, angle_rad: f64) -> Result<Orbit, OrbitError> {
        let spans = self.spans(supply_v, duty, angle_rad)?;
        let unit = self.linear.solver.solve(&schedule(&spans))?;
        let scale = Scale {
            load_ohm: self.load_ohm,
            frequency_hz: self.stage.frequency_hz,
            driver_w: 2.0 * gate_charge_w(&self.stage),
        };
        let drive = self.drives(duty, angle_rad)[0];
        Orbit::scaled(&unit, &scale, supply_v, &drive, &self.linear.names)
    }

    /// One period of waveforms, `points` instants between every two edges.
    ///
    /// # Errors
    /// [`OrbitError`].
    pub fn waveform(
        &self,
        supply_v: f64,
        duty: f64,
        angle_rad: f64,
        points: usize,
    ) -> Result<Waveform, OrbitError> {
        let spans = self.spans(supply_v, duty, angle_rad)?;
        let samples = self
            .linear
            .solver
            .samples(&schedule(&spans), points.max(2))?;
        Ok(Waveform::scaled(
            &samples,
            self.stage.period_s(),
            self.load_ohm,
            supply_v,
            &spans,
            &self.linear.names,
        ))
    }

    /// The time in which a deviation from the orbit falls to 1/e, s, as [`super::Network::settling_s`].
    pub fn settling_s(&self, angle_rad: f64) -> f64 {
        let map = self
            .spans(self.stage.supply_v, self.stage.driver.duty, angle_rad)
            .and_then(|spans| self.linear.solver.period_map(&schedule(&spans)));
        map.map_or(f64::INFINITY, |map| {
            super::network::settling_s(&map, self.stage.period_s())
        })
    }

    fn drives(&self, duty: f64, angle_rad: f64) -> [Drive; 2] {
        let nominal = Drive::new(&self.stage.driver, duty);
        let half = match self.joint.kind {
            JointKind::Floating => PI,
            JointKind::Tee => 0.0,
        };
        let second = half + self.joint.phase_mismatch_rad - angle_rad;
        // A drive that is ahead closes earlier.
        [angle_rad, second].map(|ahead| Drive {
            closing_rad: nominal.closing_rad - ahead,
            width_rad: nominal.width_rad,
        })
    }

    fn spans(&self, supply_v: f64, duty: f64, angle_rad: f64) -> Result<Vec<Span>, OrbitError> {
        if !angle_rad.is_finite() {
            return Err(OrbitError::OutOfRange {
                what: "angle",
                given: angle_rad,
                allowed: "a finite angle",
            });
        }
        let mut all = Vec::with_capacity(4);
        for drive in self.drives(duty, angle_rad) {
            check(supply_v, &drive)?;
            all.extend(spans(&self.stage, &drive)?);
        }
        Ok(all)
    }
}

/// Both branches, the common rungs and the load.
fn circuit(stage: &Stage, joint: &Joint) -> Result<Circuit, JointError> {
    let available = stage.ladder.len();
    let own = joint.branch_rungs.unwrap_or(available);
    if own > available {
        return Err(JointError::Rungs {
            what: "each branch",
            given: own,
            available,
        });
    }
    let after = joint
        .compensation
        .and_then(|compensation| compensation.after_rungs)
        .unwrap_or(own);
    if after > own {
        return Err(JointError::Rungs {
            what: "front of the compensating reactances",
            given: after,
            available: own,
        });
    }
    if joint.compensation.is_some() && after == own && joint.kind == JointKind::Tee {
        return Err(JointError::Cancels);
    }
    let load_ohm = joint.load_ohm_for(stage);
    let ratio = load_ohm / stage.load.ohm;
    let angular_hz = TAU * stage.frequency_hz;
    let mut builder = Builder::new(angular_hz, load_ohm);
    let shares = [1.0, 10f64.powf(-joint.gain_mismatch_db / 20.0)];
    // Rungs of the branches are counted one after the other, then the common ones, then the compensation.
    let compensation = 2 * own + (available - own);
    let mut ends = [GROUND; 2];
    for (branch, end) in ends.iter_mut().enumerate() {
        let (before, behind) = stage.ladder[..own].split_at(after);
        let first = branch * own;
        let drain = builder.leg(stage, shares[branch]);
        let middle = builder.ladder(drain, GROUND, before, first);
        if let Some(Compensation {
            reactance_ohm, q, ..
        }) = joint.compensation
        {
            let element = match branch {
                0 => Element::Capacitor(1.0 / (angular_hz * reactance_ohm)),
                _ => Element::Inductor(reactance_ohm / angular_hz),
            };
            let part = Part {
                element,
                loss_ohm: q.map_or(0.0, |q| reactance_ohm / q),
            };
            builder.chain(middle, GROUND, &[part], Owner::Rung(compensation + branch));
        }
        *end = builder.ladder(middle, GROUND, behind, first + after);
    }
    if joint.kind == JointKind::Tee && ends.iter().any(|&end| builder.is_leg(end)) {
        return Err(JointError::NoBranch);
    }
    let low = match joint.kind {
        JointKind::Floating => ends[1],
        JointKind::Tee => {
            builder.merge(ends[1], ends[0]);
            GROUND
        }
    };
    let end = builder.ladder(ends[0], low, &stage.ladder[own..], 2 * own);
    let load = Load {
        ohm: load_ohm,
        reference_ohm: load_ohm,
        // The same part of the load as in the stage.
        reactance: stage.load.reactance.map(|element| match element {
            Element::Inductor(henry) => Element::Inductor(henry * ratio),
            Element::Capacitor(farad) => Element::Capacitor(farad / ratio),
            Element::Resistor(ohm) => Element::Resistor(ohm * ratio),
        }),
    };
    builder.load(end, low, &load);
    Ok(builder.finish())
}
