//! STEP 4: how a signal moves the stage's controls: schemes, imperfections included.

mod angle;
mod burst;
mod class_b;
mod correct;
mod forward;
mod levels;
mod lookup;
mod modulator;
mod outphase;
mod phase;
mod polynomial;
mod power;
mod rails;
mod rate;
mod read;
mod read_modulator;
mod sag;
mod scheme;
mod shaping;
mod staircase;
mod supply;
mod width;

pub use angle::{AngleLaw, AngleReach, JoinedScheme};
pub use burst::{
    BandFilter, BandShape, BurstScheme, GateFigures, MovedEdges, PulseFile, PulseSequence,
    Sampling, StopBand, Updates,
};
pub(crate) use burst::{FILTER_LAG, GATE_LAG};
pub use class_b::{CLASS_B_PEAK_EFFICIENCY, ClassBScheme};
pub use correct::Correction;
pub use forward::{NoCorrection, NoInverse, TablePlace};
pub use levels::{LevelsScheme, RestPoint};
pub use lookup::{Between, Lookup, LookupError, LookupSize, MAX_TABLE_RATE, Spacing, Word};
pub use modulator::{Converter, Modulator, PoleZero, Ripple, SupplyModulator};
pub use outphase::{Combining, OutphaseScheme};
pub use polynomial::{Polynomial, Term};
pub use power::{DrawnPower, PowerModel};
pub use rails::Rails;
pub use rate::{MAX_FACTOR, RateReason, oversampling};
pub use scheme::{Inversion, Scheme, SchemeDrive};
pub use shaping::{Shape, Shaping};
pub use supply::{PhasePath, SupplyDrive, SupplyScheme};
pub(crate) use width::Inverse;
pub use width::{WidthLaw, WidthScheme};

/// The controls over a block of time, sample by sample, with the wanted signal at the same instants.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Track {
    /// The wanted baseband, full scale 1.0, at the same instants.
    pub wanted: Vec<num_complex::Complex64>,
    /// The control that the scheme asked for, imperfections aside: V for supply.
    pub asked: Vec<f64>,
    /// The control that reaches the stage.
    pub control: Vec<f64>,
    /// The drive's phase as a phasor of magnitude one.
    pub phase: Vec<num_complex::Complex64>,
    /// The supply, V, of schemes that move it beside the control; empty for all others.
    pub supply_v: Vec<f64>,
    /// The output, peak volts, of schemes whose edges fall between instants: what a band-limited observer sees
    /// (`math::edges`). Empty for all others, whose output follows from the control.
    pub output_v: Vec<num_complex::Complex64>,
    /// Powers drawn, of schemes that account for them themselves; empty for all others.
    pub drawn: Vec<Drawn>,
    /// The gate's edges that fell into this block, times from the signal's first sample; empty where none is gated.
    pub gate: Vec<crate::signal::Edge>,
    /// The drive phasors of two branches, of schemes that have them; empty for all others.
    pub branches: Vec<[num_complex::Complex64; 2]>,
    /// Instants within which the controls change at once: their output is the mean over these parts in place of
    /// the rows' own values, which are those of the instant's middle. By instant; the weights of one add up to 1.
    pub parts: Vec<TrackPart>,
}

/// Mean powers drawn over an instant, W.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Drawn {
    /// By the stage from its supply.
    pub stage_w: f64,
    /// By the driver.
    pub driver_w: f64,
    /// Not drawn, but delivered: what the stage's filter takes in, or the output itself without one.
    pub delivered_w: f64,
}

impl Drawn {
    /// Adds `power`, drawn for the part `share` of the instant.
    pub(crate) fn add(&mut self, power: Self, share: f64) {
        self.stage_w += power.stage_w * share;
        self.driver_w += power.driver_w * share;
    }
}

/// A part of an instant of a [`Track`].
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TrackPart {
    /// Which instant of the track.
    pub at: usize,
    /// The part of the instant's time that it takes, 0 to 1.
    pub weight: f64,
    /// As [`Track::control`].
    pub control: f64,
    /// As [`Track::phase`].
    pub phase: num_complex::Complex64,
    /// As [`Track::supply_v`], its mean.
    pub supply_v: f64,
}

impl Track {
    /// Empties every row.
    pub fn clear(&mut self) {
        self.wanted.clear();
        self.asked.clear();
        self.control.clear();
        self.phase.clear();
        self.supply_v.clear();
        self.output_v.clear();
        self.drawn.clear();
        self.gate.clear();
        self.branches.clear();
        self.parts.clear();
    }

    /// Instants held.
    pub fn len(&self) -> usize {
        self.control.len()
    }

    /// True where it holds none.
    pub fn is_empty(&self) -> bool {
        self.control.is_empty()
    }
}
