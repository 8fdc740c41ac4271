//! What can be wrong with a signal file.

/// Why a signal could not be read or made.
#[derive(Debug, thiserror::Error)]
pub enum SignalError {
    /// The operating system refused to read or write.
    #[error("reading failed after {samples} samples: {cause}")]
    Io {
        /// Samples delivered before the failure.
        samples: u64,
        /// The system's own words.
        cause: std::io::Error,
    },
    /// The resampler refused its own settings.
    #[error("resampling failed: {0}")]
    Resampling(String),
}
