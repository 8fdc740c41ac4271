//! STEP 4: how a signal moves the stage's controls: schemes, imperfections included.

mod correct;
mod lookup;
mod modulator;
mod polynomial;
mod rate;
mod read;
mod shaping;
mod supply;

pub use correct::Correction;
pub use lookup::{Between, Lookup, LookupError, LookupSize, MAX_TABLE_RATE, Spacing, Word};
pub use modulator::{Converter, Modulator, Ripple, SupplyModulator};
pub use polynomial::{Polynomial, Term};
pub use rate::{MAX_FACTOR, RateReason, oversampling};
pub use shaping::{Shape, Shaping};
pub use supply::{PhasePath, SupplyDrive, SupplyScheme};

/// How the signal moves the stage's controls.
#[derive(Debug, Clone, PartialEq)]
pub enum Scheme {
    /// Magnitude to the supply, phase to the drive.
    Supply(SupplyScheme),
}

impl Scheme {
    /// Its name in studies.
    pub fn name(&self) -> &'static str {
        match self {
            Self::Supply(_) => "supply",
        }
    }
}

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
}

impl Track {
    /// Empties every row.
    pub fn clear(&mut self) {
        self.wanted.clear();
        self.asked.clear();
        self.control.clear();
        self.phase.clear();
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
