//! What a real switch has beside its resistance.

use super::Switch;

/// A diode from ground to the drain: `i = (-v - drop) / resistance` where the drain is below `-drop`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Diode {
    /// V
    pub drop_v: f64,
    /// ohm
    pub ohm: f64,
}

/// A limit of the closed switch's current: `i = (v/R) / (1 + |v/(R I)|^k)^(1/k)`. The resistance is constant well
/// below the limiting current `I` and rises towards it; the form of velocity saturation in D. M. Caughey,
/// R. E. Thomas, Proc. IEEE 55 (1967) (recalled from memory).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Knee {
    /// The limiting current, A.
    pub current_a: f64,
    /// The exponent `k`: the larger, the sharper the knee.
    pub sharpness: f64,
}

/// Capacitance that depends on the drain voltage, in addition to the fixed part.
#[derive(Debug, Clone, PartialEq)]
pub enum DrainCurve {
    /// A junction.
    Junction(Junction),
    /// Points of voltage, V, strictly increasing, and capacitance, F, positive.
    Table(Vec<(f64, f64)>),
}

/// `C(v) = C0 / (1 + v/phi)^m`; below `-phi/2` continued along its tangent.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Junction {
    /// `C0`, F.
    pub zero_bias_f: f64,
    /// `phi`, V.
    pub potential_v: f64,
    /// `m`.
    pub grading: f64,
}

/// The gate's voltage: a trapezoid from 0 to the swing. The switch closes and opens half-way up its edges.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Gate {
    /// V
    pub swing_v: f64,
    /// From 0 to the swing, s.
    pub rise_s: f64,
    /// From the swing to 0, s.
    pub fall_s: f64,
    /// Charge that the gate itself takes at the swing, that of the coupling to the drain not included, C.
    pub charge_c: f64,
}

/// Everything that the active device brings to a stage.
#[derive(Debug, Clone, PartialEq)]
pub struct Device {
    /// Its switch.
    pub switch: Switch,
    /// Fixed capacitance from its drain to ground, F.
    pub drain_f: f64,
    /// Capacitance in addition that depends on the drain voltage.
    pub drain_curve: Option<DrainCurve>,
    /// Capacitance between gate and drain, F.
    pub gate_coupling_f: f64,
    /// What the driver does to its gate, where it is told.
    pub gate: Option<Gate>,
}

impl DrainCurve {
    /// Capacitance at `volt`, 0 or more, F; a table holds its last value beyond its end.
    pub fn capacitance_f(&self, volt: f64) -> f64 {
        match self {
            Self::Junction(Junction {
                zero_bias_f,
                potential_v,
                grading,
            }) => zero_bias_f * (1.0 + volt / potential_v).powf(-grading),
            Self::Table(points) => {
                let (volts, farads) = points.iter().copied().unzip();
                crate::math::monotone::Curve::new(volts, farads)
                    .map_or(0.0, |curve| curve.at_held(volt).0)
            }
        }
    }
}
