//! Why a capture cannot be laid against its reference.

use crate::signal::SignalError;

/// Why a capture cannot be laid against its reference.
#[derive(Debug, thiserror::Error)]
pub enum SyncError {
    /// One of the streams cannot be read.
    #[error(transparent)]
    Signal(#[from] SignalError),
    /// One of the streams holds no power.
    #[error("the {stream} is silent: every sample is zero")]
    Silent {
        /// `capture` or `reference`.
        stream: &'static str,
    },
    /// Too few samples to be compared.
    #[error(
        "the {stream} holds {given} samples: at least {needed} are needed to be found in the other"
    )]
    TooShort {
        /// `capture` or `reference`.
        stream: &'static str,
        /// Samples that are there.
        given: u64,
        /// Samples needed.
        needed: u64,
    },
    /// Rates too far apart.
    #[error(
        "the capture has {capture_hz} Hz and the reference {reference_hz} Hz: rates up to a factor of {most} apart can be compared"
    )]
    Rates {
        /// Rate of the capture, Hz.
        capture_hz: f64,
        /// Rate of the reference, Hz.
        reference_hz: f64,
        /// Largest ratio.
        most: f64,
    },
    /// The reference is nowhere in the capture.
    #[error(
        "the reference was not found in the capture: their correlation is {correlation:.3} at best, at least {least} is needed; do both files belong together, and are both rates stated rightly?"
    )]
    Unrelated {
        /// Largest correlation found, 0 to 1.
        correlation: f64,
        /// Least accepted.
        least: f64,
    },
}
