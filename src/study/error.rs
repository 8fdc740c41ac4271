//! Why a study could not be carried out.

use crate::drive::NoInverse;
use crate::input::Problem;
use crate::map::SweepError;
use crate::metrics::{PairError, SpectrumError, SymbolError, SyncError};
use crate::orbit::{NetworkError, OrbitError};
use crate::predistort::{FitError, TableError};
use crate::signal::SignalError;
use crate::transmit::ReplayError;

/// The step that failed, with its own words.
#[derive(Debug, thiserror::Error)]
pub enum StudyError {
    /// Something wrong in a file of settings.
    #[error(transparent)]
    Input(#[from] Problem),
    /// The signal cannot be read.
    #[error("the signal: {0}")]
    Signal(#[from] SignalError),
    /// The stage has no state equations.
    #[error("the stage: {0}")]
    Network(#[from] NetworkError),
    /// Two stages cannot be joined.
    #[error("two of the stage on one load: {0}")]
    Joint(#[from] crate::orbit::JointError),
    /// The stage has no orbit.
    #[error("the stage: {0}")]
    Orbit(#[from] OrbitError),
    /// The stage or its track cannot be replayed.
    #[error("the replay: {0}")]
    Replay(#[from] ReplayError),
    /// Only a stage can be replayed.
    #[error("a replay needs a `stage`: this study has a map, which knows no memory. Use --by map")]
    NoStage,
    /// The stage has no map.
    #[error("the stage: {0}")]
    Sweep(#[from] SweepError),
    /// No spectrum can be taken.
    #[error("the spectrum: {0}")]
    Spectrum(#[from] SpectrumError),
    /// Output and wanted signal cannot be compared.
    #[error("the comparison of output and wanted signal: {0}")]
    Pair(#[from] PairError),
    /// No table can be made.
    #[error("the table: {0}")]
    Table(#[from] TableError),
    /// No polynomial can be fitted.
    #[error(transparent)]
    Polynomial(#[from] FitError),
    /// The scheme takes no predistortion, or leaves it nothing to do.
    #[error("no predistortion: {0}")]
    NoTable(#[from] NoInverse),
    /// A table for another control.
    #[error(
        "the words of the table are of the control \"{table}\", in front of the scheme {scheme} they are of \"{given}\": make the table again for this study"
    )]
    OtherControl {
        /// The table's.
        table: &'static str,
        /// The study's.
        given: &'static str,
        /// The study's scheme.
        scheme: &'static str,
    },
    /// The modulator's output resistance and the stage's current have no single working point.
    #[error(
        "the modulator's output resistance of {ohm} ohm has no single working point with this stage from a supply of {supply_v:.4} V on, where the stage's current falls as its supply rises: lower output_resistance"
    )]
    NoWorkingPoint {
        /// V.
        supply_v: f64,
        /// ohm.
        ohm: f64,
    },
    /// No map can be made.
    #[error(transparent)]
    Map(#[from] crate::map::MapError),
    /// A table for another range of the control.
    #[error(
        "the table is for a full control of {table_v} V, the study's hardware has {given_v} V: make the table again for this study"
    )]
    OtherRange {
        /// The table's.
        table_v: f64,
        /// The study's.
        given_v: f64,
    },
    /// A capture cannot be laid against its reference.
    #[error("the comparison with the reference: {0}")]
    Sync(#[from] SyncError),
    /// The symbols of a known format cannot be read.
    #[error("the symbols: {0}")]
    Symbols(#[from] SymbolError),
    /// A capture is shorter than one spectrum.
    #[error(
        "{given} samples were captured, or follow the reference: at least {needed} are needed for a spectrum in {resolution_hz} Hz. Use a longer capture, or limits with a wider bandwidth"
    )]
    CaptureTooShort {
        /// Samples that count.
        given: u64,
        /// Samples needed.
        needed: u64,
        /// The finest resolution that is wanted.
        resolution_hz: f64,
    },
    /// Too few samples are left once the start and the end are taken off.
    #[error(
        "the signal has {given} samples: too few, at least {needed} are needed for a spectrum in {resolution_hz} Hz beside start and end. Use a longer signal, or limits with a wider bandwidth"
    )]
    SignalTooShort {
        /// Samples in the file.
        given: u64,
        /// Samples needed.
        needed: u64,
        /// The finest resolution that is wanted.
        resolution_hz: f64,
    },
    /// Every sample is zero.
    #[error("the signal is silent: every sample is zero")]
    SilentSignal,
}
