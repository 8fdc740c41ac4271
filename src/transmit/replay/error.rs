//! Why a stage or a track cannot be replayed.

use crate::orbit::{NetworkError, OrbitError};

/// Why a stage or a track cannot be replayed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum ReplayError {
    /// The stage has no state equations.
    #[error(transparent)]
    Network(#[from] NetworkError),
    /// The stage has no orbit.
    #[error(transparent)]
    Orbit(#[from] OrbitError),
    /// A diode, a junction or a gate coupling.
    #[error(
        "only linear stages are replayed this way: this one has a diode, a curved drain capacitance, a knee or a coupled gate"
    )]
    Curved,
    /// Several chokes.
    #[error(
        "a circuit with more than one ideal choke cannot be replayed: give its feeds an `inductance`"
    )]
    Inputs,
    /// A scheme without a stage of its own, or one that no replay knows.
    #[error(
        "the scheme {scheme} cannot be replayed: replays know supply, width, levels, burst and isolated outphase"
    )]
    Scheme {
        /// Its name.
        scheme: &'static str,
    },
    /// Too many states.
    #[error(
        "the stage has {given} independent inductors and capacitors: at most {allowed} can be replayed"
    )]
    TooLarge {
        /// Independent states.
        given: usize,
        /// The most.
        allowed: usize,
    },
    /// No periodic state to start from.
    #[error("the stage has no periodic state to start from: something in it never settles")]
    NeverSettles,
    /// An ideal choke drives its current into a switch that stays open.
    #[error(
        "carrier cycle {cycle}: the switch stays open, into which an ideal choke would force its current without end. Give the feed an `inductance` in place of `choke`"
    )]
    ChokeIntoOpen {
        /// Counted from the start.
        cycle: u64,
    },
    /// An edge that would run backwards.
    #[error(
        "carrier cycle {cycle}: an edge of the drive moves by {moved_rad:.3} rad within it; allowed: less than {allowed_rad:.3} rad, so that edges keep their order"
    )]
    EdgeTooFast {
        /// Counted from the start.
        cycle: u64,
        /// rad, later is positive.
        moved_rad: f64,
        /// rad
        allowed_rad: f64,
    },
    /// A pulse wider than the cycle or of negative width.
    #[error(
        "carrier cycle {cycle}: pulses of {:.4} and {:.4} of a cycle at its start and end; allowed: 0 to 1",
        given_rad[0] / std::f64::consts::TAU,
        given_rad[1] / std::f64::consts::TAU
    )]
    Width {
        /// Counted from the start.
        cycle: u64,
        /// At the start and at the end, rad.
        given_rad: [f64; 2],
    },
    /// Intervals that do not fill a cycle or name a topology that is not there.
    #[error(
        "carrier cycle {cycle}: its intervals last {total_rad:.6} rad; allowed: 2 pi in all, each 0 or more, of topologies 0 to {last}"
    )]
    Intervals {
        /// Counted from the start.
        cycle: u64,
        /// Their sum, rad.
        total_rad: f64,
        /// The last topology.
        last: usize,
    },
    /// A supply that is no number.
    #[error("carrier cycle {cycle}: the supply is not a finite number")]
    NotFinite {
        /// Counted from the start.
        cycle: u64,
    },
}
